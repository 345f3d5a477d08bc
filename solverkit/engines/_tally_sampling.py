"""Uniformly random cycles of a cell that has too many to list.

A solution word is drawn as a prefix and a suffix of m letters. Let H(b, r) be the number of suffixes with b
ones and residue r of α, and H(b) the largest of these. Draw b with weight C(k − m, x − b)·H(b), then a
uniformly random prefix with x − b ones; keep it with chance H(b, r)/H(b), r being the residue that its suffix
must have; then take one of the H(b, r) suffixes, all equally likely. Every solution word has the same chance,
whatever M is, and all random choices are made with integers. Aperiodic words are kept; each cycle has exactly
k of them, so cycles are equally likely as well.

Source: rejection sampling (von Neumann 1951); the split is ours.
"""

from __future__ import annotations

import random
import time
from itertools import accumulate
from math import comb
from typing import TYPE_CHECKING

from solverkit.engines._tally_count import Plan, Table, prefix_table
from solverkit.words import is_aperiodic

if TYPE_CHECKING:
    from collections.abc import Iterator

    import numpy as np
    from numpy.typing import NDArray

    from solverkit.window import Cell

__all__ = ["alpha", "sample_words", "suffix_length"]

#: Longest suffix. Its table takes time and memory in proportion; with 20 letters a word takes 2 ms at M = 3·10^6.
_LONGEST_SUFFIX = 20


class _Suffixes:
    """The words of m letters by odd count and residue of α, and how to draw one of them."""

    def __init__(self, cell: Cell, modulus: int, length: int, deadline: float | None) -> None:
        self._multiplier, self._modulus = cell.multiplier, modulus
        self.length, self.high = length, min(length, cell.odd)
        self._table: Table = prefix_table(cell.multiplier, Plan(length, 0, self.high, modulus), deadline)
        self.largest = [int(self._row(b).max()) for b in range(self.high + 1)]
        cut = length // 2
        self._left = self._by_residue(cut)
        self._right = self._by_residue(length - cut)

    def _row(self, odd: int) -> NDArray[np.uint64]:
        row: NDArray[np.uint64] = self._table.counts[0, self._table.slot(odd)]
        return row

    def count(self, odd: int, residue: int) -> int:
        """Return the number of suffixes with this odd count and residue."""
        return int(self._row(odd)[residue])

    def _by_residue(self, length: int) -> dict[tuple[int, int], list[str]]:
        groups: dict[tuple[int, int], list[str]] = {}
        for code in range(1 << length):
            word = f"{code:0{length}b}" if length else ""
            groups.setdefault((word.count("1"), self._alpha(word)), []).append(word)
        return groups

    def _alpha(self, word: str) -> int:
        return alpha(word, self._multiplier, self._modulus)

    def all(self, odd: int, residue: int) -> list[str]:
        """Return the suffixes with this odd count and residue, in a fixed order."""
        modulus, cut = self._modulus, self.length // 2
        words: list[str] = []
        for (ones, ours), left in self._left.items():
            # α(uv) = α(u) + 2^|u|·q^(−a)·α(v)
            theirs = (residue - ours) * pow(2, -cut, modulus) * pow(self._multiplier, ones, modulus) % modulus
            for end in self._right.get((odd - ones, theirs), ()):
                words.extend(begin + end for begin in left)
        return words


def alpha(word: str, multiplier: int, modulus: int) -> int:
    """Return α = β·q^(−x) mod M of ``word``."""
    inverse = pow(multiplier, -1, modulus) if modulus > 1 else 0
    value, scale = 0, inverse
    for position, letter in enumerate(word):
        if letter == "1":
            value += scale * pow(2, position, modulus)
            scale = scale * inverse % modulus
    return value % modulus


def suffix_length(cell: Cell, modulus: int, memory: int) -> int:
    """Return m: enough letters for a suffix for each residue, as far as the limits allow."""
    length = 0
    while (
        length < min(_LONGEST_SUFFIX, cell.length)
        and comb(length, length // 2) < modulus
        and Plan(length + 1, 0, min(length + 1, cell.odd), modulus).bytes <= memory
    ):
        length += 1
    return length


def sample_words(cell: Cell, modulus: int, seed: int, memory: int, deadline: float | None = None) -> Iterator[str]:
    """Yield uniformly random aperiodic solution words of ``cell``, without end; at least one must exist.

    Args:
        cell: of positive elements.
        modulus: |D|/gcd(D, d), below 2^31.
        seed: of the random choices.
        memory: bytes that the table of suffixes may take.
        deadline: value of ``time.monotonic()`` after which it ends, or None.

    Cost: 0.5 ms (k = 60, M = 10^5) to 8 ms (k = 200, M = 10^6) a word once the table of suffixes stands.
    """
    chance = random.Random(seed)  # noqa: S311 - a sample, no secret
    k, x, q = cell.length, cell.odd, cell.multiplier
    tails = _Suffixes(cell, modulus, suffix_length(cell, modulus, memory) if modulus > 1 else 0, deadline)
    head = k - tails.length
    weights = list(accumulate(comb(head, x - b) * tails.largest[b] for b in range(tails.high + 1)))
    while deadline is None or time.monotonic() <= deadline:
        drawn = chance.randrange(weights[-1])
        tail_odd = next(b for b, weight in enumerate(weights) if drawn < weight)
        places = set(chance.sample(range(head), x - tail_odd))
        begin = "".join("1" if i in places else "0" for i in range(head))
        residue = -alpha(begin, q, modulus) * pow(2, -head, modulus) * pow(q, x - tail_odd, modulus) % modulus
        ways = tails.count(tail_odd, residue)
        if chance.randrange(tails.largest[tail_odd]) >= ways:
            continue
        ends = tails.all(tail_odd, residue)
        if len(ends) != ways:
            raise ArithmeticError(f"{ways} suffixes counted but {len(ends)} listed")
        word = begin + ends[chance.randrange(ways)]
        if is_aperiodic(word):
            yield word
