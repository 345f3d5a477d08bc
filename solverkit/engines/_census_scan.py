"""Lyndon words of one length and odd count, block by block, screened by a divisor of β.

The enumeration places the rarer letter, so that a node of the recursion has more leaves and a word fewer
numbers. If that is the 1, β is the sum of the weights W(j, p) = q^(x−1−j)·2^p of the j-th one at place p. If
it is the 0, let F(t, p) be the sum of the weights of ones at the places before p when t zeros precede each of
them, that is, Σ_{p' < p} W(p' − t, p'). The ones between two zeros are consecutive, hence

    β = F(z, k) + Σ_t (F(t, p_t) − F(t + 1, p_t + 1)),    p_0 < … < p_(z−1) the places of the z zeros:

again a constant and one term for each rare letter. Modulo 2^64 this holds for β and for its fraction alike.
"""

from __future__ import annotations

import random
import time
from dataclasses import dataclass
from itertools import accumulate, repeat
from math import gcd
from typing import TYPE_CHECKING

import numpy as np

from solverkit.errors import CapacityError

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from numpy.typing import NDArray

__all__ = ["Block", "Share", "rare_weights", "screened_words"]

#: Rows of a block. 2^13 to 2^18 are equally fast, 2^10 takes a seventh more.
_CAPACITY = 1 << 14
#: Words visited before the caller may look at the clock, about 0.1 s.
_QUOTA = 1 << 24
#: Level at which the subtrees are dealt out to workers.
_DEAL = 6


@dataclass(frozen=True, slots=True)
class Share:
    """Which part of the words a worker takes: every ``count``-th subtree, from ``index`` on."""

    index: int = 0
    count: int = 1


@dataclass(frozen=True, slots=True)
class Block:
    """Some of the words of a length and odd count, one for each class of rotations.

    Args:
        places: uint16 array (capacity, z), where the rarer letter stands; valid until the next block is made.
        count: rows in use.
        letter: the rarer letter, 1 when both are equally frequent.
        visited: words visited so far, screened out ones included.
    """

    places: NDArray[np.uint16]
    count: int
    letter: int
    visited: int

    def ones(self, length: int) -> Iterator[list[int]]:
        """Yield the places of the ones of each word."""
        for row in self.places[: self.count].tolist():
            yield row if self.letter else sorted(set(range(length)).difference(row))


def rare_weights(length: int, odd: int, weight: Callable[[int, int], int]) -> tuple[NDArray[np.uint64], np.uint64]:
    """Return the terms of the rarer letter and the constant, modulo 2^64.

    Args:
        length: k.
        odd: x.
        weight: W(j, p) of the j-th one at place p.

    Returns:
        A uint64 array (z, k) and a uint64.
    """
    mask = (1 << 64) - 1
    if 2 * odd <= length:
        rows = [[weight(j, p) & mask if p >= j else 0 for p in range(length)] for j in range(odd)]
        return np.array(rows, np.uint64), np.uint64(0)
    zeros = length - odd
    before = [[0] * (length + 1) for _ in range(zeros + 1)]
    for t, sums in enumerate(before):
        for p in range(length):
            sums[p + 1] = (sums[p] + (weight(p - t, p) if 0 <= p - t < odd else 0)) & mask
    rows = [[before[t][p] - before[t + 1][p + 1] & mask for p in range(length)] for t in range(zeros)]
    return np.array(rows, np.uint64).reshape(zeros, length), np.uint64(before[zeros][length])


def screened_words(
    multiplier: int,
    length: int,
    odd: int,
    divisor: int = 1,
    *,
    share: Share | None = None,
    deadline: float | None = None,
    capacity: int = _CAPACITY,
) -> Iterator[Block]:
    """Yield one word of every aperiodic class whose β may be divisible by ``divisor``.

    Args:
        multiplier: q.
        length: k, at most 65,535.
        odd: x, 1 … k.
        divisor: R ≥ 1; no class with R | β is left out, others may be there when R > 1.
        share: which part, or None for all.
        deadline: value of ``time.monotonic()`` after which to give up, or None.
        capacity: rows of a block; at least 2k are used.

    Raises:
        CapacityError: the deadline has passed.

    Cost: 3 to 6 ns a word visited, about 10 ns one that is yielded. The last block tells the number of visited
    words, which is the number of Lyndon words when the share is all.
    """
    share = share or Share()
    rare, letter = (odd, 1) if 2 * odd <= length else (length - odd, 0)
    if rare < 3:
        if share.index == 0:
            places = _few(length, rare)
            yield Block(places, len(places), letter, len(places))
        return
    from solverkit.engines._census_kernels import scan_words  # noqa: PLC0415 - numba loads only when it is used

    powers, twos = _residues(multiplier, odd, divisor), _residues(2, length, divisor)
    unit = _unit(divisor)
    powers = [power * unit % divisor for power in powers]

    def fraction(j: int, p: int) -> int:
        return (powers[odd - 1 - j] * twos[p] % divisor << 64) // divisor

    fractions, constant = rare_weights(length, odd, fraction)
    state = np.array([1, 0, 0], np.int64)
    place, period, latest = (np.zeros(rare + 1, np.int64) for _ in range(3))
    partial = np.full(rare + 1, constant, np.uint64)
    place[1], period[1] = length - rare + 2, 1
    depth = min(rare - 2, _DEAL) if share.count > 1 else 0
    found = np.zeros((max(capacity, 2 * length), rare), np.uint16)
    scratch = (state, place, period, latest, partial)
    worker = (depth, share.count, share.index, _QUOTA)
    while state[0]:
        if deadline is not None and time.monotonic() > deadline:
            raise CapacityError("census", "the time budget ended before the words did")
        count = scan_words(length, fractions, np.uint64(odd), *scratch, *worker, found)
        yield Block(found, int(count), letter, int(state[2]))


def _residues(base: int, count: int, modulus: int) -> list[int]:
    """Return the first ``count`` powers of ``base``, from the 0-th on, mod ``modulus``."""
    return list(
        accumulate(repeat(base, count - 1), lambda power, factor: power * factor % modulus, initial=1 % modulus)
    )


def _unit(modulus: int) -> int:
    """Return a random unit, the same every time.

    Without it the screen would be blunt where many words have β just above a small multiple of R, as they do when
    nearly all steps are odd.
    """
    chance = random.Random(modulus)  # noqa: S311 - no secret
    while True:
        unit = chance.randrange(1, modulus + 1)
        if gcd(unit, modulus) == 1:
            return unit


def _few(length: int, rare: int) -> NDArray[np.uint16]:
    """Return the places of the rarer letter in all Lyndon words with at most two of them."""
    if rare == 0:
        rows: list[list[int]] = [[]] if length == 1 else []
    elif rare == 1:
        rows = [[length - 1]]
    else:
        rows = [[v - 1, length - 1] for v in range(length - 1, length // 2, -1)]
    return np.array(rows, np.uint16).reshape(len(rows), rare)
