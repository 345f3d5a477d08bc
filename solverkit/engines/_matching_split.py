"""Where a word is cut in two: one shape of halves that meets every necklace."""

from __future__ import annotations

from dataclasses import dataclass
from math import comb

__all__ = ["Split", "best_split"]


@dataclass(frozen=True, slots=True)
class Split:
    """Words 0A1B: 0A has m letters with c ones, 1B has the other k − m letters with the other x − c ones.

    Lemma. Let 1 ≤ m < k and c = ⌈m·x/k⌉ − 1 or c = ⌊m·x/k⌋. Every aperiodic word of length k with x ones has a
    rotation 0A1B with c ones in 0A.

    Proof. Let c(i) be the number of ones among the m letters from place i on, places taken modulo k. The c(i) sum to
    m·x, and c(i + 1) − c(i) = w(i + m) − w(i) is −1, 0 or 1. They are not all equal, for then w would have the period
    gcd(m, k) < k. So one of them is below the mean m·x/k and one above it: some c(i) ≤ c < c + 1 ≤ some other. Round
    the circle the value goes up from c to c + 1 at some i; there w(i) = 0 and w(i + m) = 1. ∎

    Words with the prefix property of the cycle lemma meet every necklace once, but their halves fall into many classes
    by odd count; here there is one class, and the two lists are shorter together by a factor of about 2.3 near
    k = 72 (a necklace then appears about four times, which costs nothing).

    Args:
        length: k, at least 2.
        odd: x, 1 … k − 1.
        left_length: m.
        left_odd: c.
    """

    length: int
    odd: int
    left_length: int
    left_odd: int

    @property
    def left_count(self) -> int:
        """Number of words 0A."""
        return comb(self.left_length - 1, self.left_odd)

    @property
    def right_count(self) -> int:
        """Number of words 1B."""
        return comb(self.length - self.left_length - 1, self.odd - self.left_odd - 1)

    @property
    def elements(self) -> int:
        """Number of words of both kinds."""
        return self.left_count + self.right_count


def best_split(length: int, odd: int) -> Split:
    """Return the split with the fewest words of both kinds.

    Args:
        length: k, at least 2.
        odd: x, 1 … k − 1.

    >>> best_split(72, 45)
    Split(length=72, odd=45, left_length=36, left_odd=22)
    """
    candidates = [
        Split(length, odd, m, c) for m in range(1, length) for c in {m * odd // length, -(-m * odd // length) - 1}
    ]
    return min(candidates, key=lambda s: (s.elements, abs(2 * s.left_length - length), s.left_length, s.left_odd))
