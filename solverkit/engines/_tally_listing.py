"""Every cycle of a cell with few words or few cycles: halves of balanced rotations, joined by residue.

Among the windows of h = ⌊k/2⌋ consecutive letters of a cyclic word the number of ones averages x·h/k and
changes by at most one from a window to the next. Unless all windows hold the same number, one with a =
⌊x·h/k⌋ ones is followed by one with a + 1. Constant windows mean letters of period gcd(h, k), which an
aperiodic word of at least two letters does not have (for even k the period would be k/2, for odd k it would
be 1). So every aperiodic word of length k ≥ 2 has a rotation u·v, |u| = h, where u holds a ones and begins
with 0 and v begins with 1: only such pairs need to be joined.

Source: the argument is the discrete mean value theorem; common practice, no source.
"""

from __future__ import annotations

import time
from dataclasses import dataclass
from math import comb
from typing import TYPE_CHECKING

import numpy as np

from solverkit.errors import CapacityError
from solverkit.words import beta, is_aperiodic

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from numpy.typing import NDArray

    from solverkit.window import Cell

__all__ = ["LARGEST_MODULUS", "element", "least_element", "list_cost", "list_cycles"]

#: Two residues must add without overflow in a signed 64-bit word.
LARGEST_MODULUS = 1 << 62
_CHUNK = 1 << 20


@dataclass(frozen=True, slots=True)
class _Half:
    """Words of ``length`` letters with ``odd`` ones, by rank: those that end with 0 first.

    Args:
        length: number of letters.
        odd: number of ones.
        residues: int64 array of the parts of β mod M that they contribute, in the order of rank.
    """

    length: int
    odd: int
    residues: NDArray[np.int64]

    def word(self, rank: int) -> str:
        """Return the word of this rank."""
        letters, odd = [], self.odd
        for length in range(self.length, 0, -1):
            without = comb(length - 1, odd)
            letters.append("0" if rank < without else "1")
            if rank >= without:
                rank, odd = rank - without, odd - 1
        return "".join(reversed(letters))


def _split(cell: Cell) -> tuple[int, int]:
    """Return h and the number of ones of the first half."""
    half = cell.length // 2
    return half, cell.odd * half // cell.length


def list_cost(cell: Cell) -> int:
    """Return the number of half words that listing ``cell`` makes, those of all shorter lengths included."""
    half, ones = _split(cell)
    lengths = ((half - 1, ones), (cell.length - half - 1, cell.odd - ones - 1))
    return sum(comb(n + 2, a + 1) for n, a in lengths if n >= 0 and a >= 0)


def least_element(cell: Cell, n: int) -> int:
    """Return the least element of the cycle of ``cell`` that contains ``n``.

    Raises:
        ArithmeticError: n is on no cycle of this length and odd count, or on a shorter one.
    """
    step, value, least, odd = cell.map.step, n, n, 0
    for i in range(cell.length):
        odd += value & 1
        value = step(value)
        least = min(least, value)
        if value == n and i + 1 < cell.length:
            raise ArithmeticError(f"{n} returns after {i + 1} steps, not {cell.length}")
    if value != n or odd != cell.odd or least < 1:
        raise ArithmeticError(f"{n} is on no cycle of {cell}")
    return least


def element(cell: Cell, word: str) -> int | None:
    """Return the element n = d·β/D that follows ``word``, or None when it is not a positive integer."""
    n, rest = divmod(cell.offset * beta(word, cell.multiplier), cell.determinant)
    return n if n > 0 and not rest else None


def list_cycles(cell: Cell, modulus: int, deadline: float | None = None) -> list[int]:
    """Return the least elements of all cycles of ``cell``, ascending; its bound ``above`` is not used.

    Args:
        cell: of positive elements.
        modulus: |D|/gcd(D, d), at most 2^62.
        deadline: value of ``time.monotonic()`` after which to give up, or None.

    Raises:
        CapacityError: the deadline has passed.

    Cost: the square root of the number of words in time and memory (8 bytes a half word), 0.1 ms a cycle.
    """
    if (cell.determinant > 0) != (cell.offset > 0):
        return []
    if cell.length == 1:
        n = element(cell, "1")
        return [] if n is None else [n]
    found: set[int] = set()
    for word in _balanced_solutions(cell, modulus, deadline):
        if not is_aperiodic(word):
            continue
        n = element(cell, word)
        if n is None:
            raise ArithmeticError(f"{word} solves {cell} mod {modulus} but gives no positive integer")
        found.add(least_element(cell, n))
    return sorted(found)


def _balanced_solutions(cell: Cell, modulus: int, deadline: float | None) -> Iterator[str]:
    """Yield the words u·v of the module's text with β divisible by ``modulus``."""
    k, x, q = cell.length, cell.odd, cell.multiplier
    half, ones = _split(cell)
    if half - 1 < ones or k - half - 1 < x - ones - 1 or x - ones < 1:
        return

    def weight(j: int, p: int) -> int:
        return pow(q, x - 1 - j, modulus) * pow(2, p, modulus) % modulus

    first = _halves(half - 1, ones, modulus, lambda a, i: weight(a, i + 1))
    second = _halves(k - half - 1, x - ones - 1, modulus, lambda a, i: weight(ones + 1 + a, half + 1 + i))
    fixed = weight(ones, half)  # of the 1 that begins v
    order = np.argsort(first.residues, kind="stable")
    ordered = first.residues[order]
    for start in range(0, second.residues.size, _CHUNK):
        if deadline is not None and time.monotonic() > deadline:
            raise CapacityError("tally", "the time budget ended before the list did")
        wanted = (2 * modulus - second.residues[start : start + _CHUNK] - fixed) % modulus
        low = np.searchsorted(ordered, wanted, side="left")
        high = np.searchsorted(ordered, wanted, side="right")
        for hit in np.flatnonzero(high > low):
            tail = second.word(start + int(hit))
            for place in range(int(low[hit]), int(high[hit])):
                if deadline is not None and time.monotonic() > deadline:
                    raise CapacityError("tally", "the time budget ended before the list did")
                yield "0" + first.word(int(order[place])) + "1" + tail


def _halves(length: int, odd: int, modulus: int, weight: Callable[[int, int], int]) -> _Half:
    """Return the half words of a length and odd count; their a-th one adds ``weight(a, i)`` as letter i."""
    rows = [np.zeros(1, np.int64)] + [np.zeros(0, np.int64)] * odd
    for i in range(length):
        for a in range(min(i + 1, odd), max(1, odd - (length - i - 1)) - 1, -1):
            shifted = rows[a - 1] + weight(a - 1, i)
            shifted[shifted >= modulus] -= modulus
            rows[a] = np.concatenate((rows[a], shifted))
    return _Half(length, odd, rows[odd])
