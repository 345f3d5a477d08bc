"""Residue tree: which classes mod 2^m can hold a least element, and which continuations they admit.

Every table here is built for the candidates n ≥ ``floor`` of one block, from integers alone.

Source: the first m parities depend on n mod 2^m only (Terras, Acta Arith. 30 (1976) 241-252).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

__all__ = ["Classes", "Continuations", "continuations", "fewest_odd", "surviving"]

_WORD = (1 << 64) - 1


@lru_cache(maxsize=256)
def fewest_odd(multiplier: int, offset: int, floor: int, depth: int) -> tuple[int, ...]:
    """Return the least odd count with which the first j steps can stay at or above n, for j = 0 … ``depth``.

    After j steps with a odd ones the value is (q^a·n + d·β)/2^j. For d > 0 it is below every n ≥ ``floor`` exactly
    when floor·(2^j − q^a) > d·β, so a is given up when this holds for the largest β among the words whose shorter
    prefixes are not given up; that β obeys max(β(j, a), q·β(j, a−1) + 2^j). For d < 0 it is below n whenever
    q^a < 2^j. A count above one that survives survives too, in both cases.
    """
    largest: dict[int, int] = {0: 0}
    fewest = [0]
    for j in range(1, depth + 1):
        grown: dict[int, int] = dict(largest)
        for odd, beta in largest.items():
            grown[odd + 1] = max(grown.get(odd + 1, 0), multiplier * beta + (1 << (j - 1)))
        largest = {}
        for odd, beta in grown.items():
            deficit = (1 << j) - multiplier**odd
            dropped = floor * deficit > offset * beta if offset > 0 else deficit > 0
            if not dropped:
                largest[odd] = beta
        fewest.append(min(largest))
    return tuple(fewest)


@dataclass(frozen=True, slots=True)
class Classes:
    """The classes r mod 2^depth that survive, sorted by odd count.

    Args:
        depth: m.
        residue: r, uint64[c].
        odd: odd steps among the first m, int64[c].
        beta: β of the first m parities, uint64[c].
        spent: ledger units spent in the first m steps, int64[c]; see `_sweep_ledger`.
    """

    depth: int
    residue: NDArray[np.uint64]
    odd: NDArray[np.int64]
    beta: NDArray[np.uint64]
    spent: NDArray[np.int64]


def surviving(
    multiplier: int,
    offset: int,
    fewest: tuple[int, ...],
    depth: int,
    most: int,
    charges: NDArray[np.int64],
    budget: int,
) -> Classes:
    """Return the classes mod 2^depth all of whose prefixes have at least ``fewest[j]`` odd steps.

    Args:
        multiplier: q.
        offset: d.
        fewest: from `fewest_odd`, at least ``depth + 1`` entries.
        depth: m, with q^m below 2^62.
        most: largest odd count worth keeping.
        charges: int64[depth, depth + 1], units charged for an odd step at (position, odd steps before it).
        budget: classes that spent more are left out.

    Values T^j(r) are kept mod 2^64; after j steps their low 64 − j bits are right, and only parities are read.
    """
    q, d = np.uint64(multiplier), np.uint64(offset & _WORD)
    powers = np.array([pow(multiplier, a) & _WORD for a in range(depth + 1)], np.uint64)
    one = np.uint64(1)
    residue = np.zeros(1, np.uint64)
    odd = np.zeros(1, np.int64)
    value = np.zeros(1, np.uint64)
    beta = np.zeros(1, np.uint64)
    spent = np.zeros(1, np.int64)
    for j in range(depth):
        residue = np.concatenate([residue, residue + np.uint64(1 << j)])
        value = np.concatenate([value, value + powers[odd]])
        odd, beta, spent = (np.concatenate([part, part]) for part in (odd, beta, spent))
        parity = (value & one).astype(bool)
        spent = spent + np.where(parity, charges[j, odd], 0)
        value = np.where(parity, q * value + d, value) >> one
        beta = np.where(parity, q * beta + np.uint64(1 << j), beta)
        odd = odd + parity
        keep = (odd >= fewest[j + 1]) & (odd <= most) & (spent <= budget)
        residue, odd, value, beta, spent = (part[keep] for part in (residue, odd, value, beta, spent))
    order = np.argsort(odd, kind="stable")
    return Classes(depth, residue[order], odd[order], beta[order], spent[order])


@dataclass(frozen=True, slots=True)
class Continuations:
    """What the next m steps do to a value v, by s = v mod 2^m: T^m(v) = (v >> m)·q^odd[s] + shift[s].

    Args:
        depth: m.
        odd: int64[2^m], odd steps.
        shift: T^m(s), Python integers.
        before: int64[m, 2^m], odd steps among the first i.
        parity: bool[m, 2^m], whether step i is odd.
    """

    depth: int
    odd: NDArray[np.int64]
    shift: tuple[int, ...]
    before: NDArray[np.int64]
    parity: NDArray[np.bool_]


@lru_cache(maxsize=32)
def continuations(multiplier: int, offset: int, depth: int) -> Continuations:
    """Return the continuations of depth m, with q^m below 2^62."""
    q, d, one = np.uint64(multiplier), np.uint64(offset & _WORD), np.uint64(1)
    size = 1 << depth
    value = np.arange(size, dtype=np.uint64)
    beta = np.zeros(size, np.int64)
    odd = np.zeros(size, np.int64)
    before = np.zeros((depth, size), np.int64)
    parities = np.zeros((depth, size), np.bool_)
    for j in range(depth):
        parity = (value & one).astype(bool)
        before[j], parities[j] = odd, parity
        value = np.where(parity, q * value + d, value) >> one
        beta = np.where(parity, multiplier * beta + (1 << j), beta)
        odd = odd + parity
    powers = [multiplier**a for a in range(depth + 1)]
    shift = tuple(
        (powers[a] * s + offset * b) >> depth for s, (a, b) in enumerate(zip(odd.tolist(), beta.tolist(), strict=True))
    )
    return Continuations(depth, odd, shift, before, parities)
