"""Live cells as lattice points of a thin cone, counted and listed without walking through the others.

A cell (k, x) of positive elements passes the product bound above B exactly when, with r = q + d/(B + 1),

    log2 q < k/x ≤ log2 r   (d > 0)        max(1, log2 r) ≤ k/x < log2 q   (d < 0),

since U > B says that the product inequality holds at B + 1. Points below a line of slope σ are counted by the
Euclid-like recursion for Σ⌊(a·i + b)/m⌋ (common practice, no source), with rational bounds of σ on both sides that are
tightened until both give the same count; so no rounding can change an answer.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property, lru_cache
from typing import TYPE_CHECKING

from solverkit.exact.enclosures import log2_bounds, power_of_two_exponent
from solverkit.numerals import Span

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from solverkit.maps import Map

__all__ = ["ThinCone", "floor_sum", "tallest"]

_START_BITS = 128
_MOST_BITS = 1 << 22


def floor_sum(count: int, modulus: int, factor: int, shift: int) -> int:
    """Return Σ_{i=0}^{count−1} ⌊(factor·i + shift)/modulus⌋ for factor, shift ≥ 0 and modulus ≥ 1.

    O(log) divisions.

    >>> floor_sum(4, 3, 2, 1) == sum((2 * i + 1) // 3 for i in range(4))
    True
    """
    total = 0
    while True:
        total += factor // modulus * count * (count - 1) // 2 + shift // modulus * count
        factor, shift = factor % modulus, shift % modulus
        top = factor * count + shift
        if top < modulus:
            return total
        count, shift = divmod(top, modulus)
        modulus, factor = factor, modulus


@dataclass(frozen=True, slots=True)
class _Line:
    """A line k = σ·x through the origin, σ = log2 of a positive rational.

    Args:
        value: 2^σ.
        inclusive: whether points on the line count as below it; only matters for rational σ.
    """

    value: Fraction
    inclusive: bool

    def decided(self, question: Callable[[Fraction, bool], int]) -> int:
        """Return ``question(slope, inclusive)``, once rational bounds on both sides of σ agree about it."""
        exponent = power_of_two_exponent(self.value)
        if exponent is not None:
            return question(Fraction(exponent), self.inclusive)
        bits = _START_BITS
        while bits <= _MOST_BITS:
            low, high = log2_bounds(self.value, bits)
            answer = question(low, True)
            if answer == question(high, True):
                return answer
            bits *= 2
        raise ArithmeticError(f"log2 of {self.value} needs more than {_MOST_BITS} bits")

    def floor(self, x: int) -> int:
        """Return the number of k ≥ 1 below the line at x."""
        return self.decided(lambda slope, inclusive: _floor(slope * x, inclusive))

    def reach(self, k: int) -> int:
        """Return the least x ≥ 0 at which k is below the line."""

        def least(slope: Fraction, inclusive: bool) -> int:
            x = Fraction(k) / slope
            up = -(-x.numerator // x.denominator)
            return up if inclusive or up != x else up + 1

        return self.decided(least)

    def capped(self, xs: Span, top: int) -> int:
        """Return Σ over x in ``xs`` of min(top, number of k ≥ 1 below the line at x)."""
        if top <= 0:
            return 0
        steep = max(xs.low, min(xs.high + 1, self.reach(top)))  # from here on the cap counts

        def below(slope: Fraction, inclusive: bool) -> int:
            count = steep - xs.low
            if not count:
                return 0
            # Exclusive points on a rational line: ⌈σx⌉ − 1 = ⌊(a·x − 1)/b⌋ for σ = a/b.
            shift = slope.numerator * xs.low - (0 if inclusive else 1)
            return floor_sum(count, slope.denominator, slope.numerator, shift)

        return self.decided(below) + top * (xs.high - steep + 1)


def _floor(value: Fraction, inclusive: bool) -> int:
    down = value.numerator // value.denominator
    return down if inclusive or down != value else down - 1


class ThinCone:
    """The cells of one map of positive elements that the product bound leaves above B.

    Args:
        positive_map: (q, d).
        above: B.
        lengths: range of k.
        odd: range of x.
    """

    def __init__(self, positive_map: Map, above: int, lengths: Span, odd: Span) -> None:
        self.lengths, self.odd = lengths, Span(odd.low, max(odd.low, min(odd.high, lengths.high)))
        q, d = positive_map.multiplier, positive_map.offset
        tip = q + Fraction(d, above + 1)
        if d > 0:
            self._inner, self._outer = _Line(Fraction(q), inclusive=True), _Line(tip, inclusive=True)
        else:
            # Below the outer line lies what is excluded: k < σ·x, so points on it are kept.
            self._inner, self._outer = _Line(max(tip, Fraction(2)), inclusive=False), _Line(Fraction(q), inclusive=True)
        self._critical = _Line(Fraction(q), inclusive=True)
        self._above_critical = d > 0

    @property
    def empty_range(self) -> bool:
        """Whether the ranges hold no cell at all."""
        return self.odd.low > self.lengths.high

    @cached_property
    def total(self) -> int:
        """Number of cells in the ranges, live or not: pairs with x ≤ k."""
        if self.empty_range:
            return 0
        return self._pairs(self.lengths.high) - self._pairs(self.lengths.low - 1)

    def _pairs(self, top: int) -> int:
        high = min(self.odd.high, top)
        if high < self.odd.low:
            return 0
        count = high - self.odd.low + 1
        return count * (top + 1) - (self.odd.low + high) * count // 2

    @cached_property
    def sign_fits(self) -> int:
        """Number of cells in the ranges with sign(D) = sign(d)."""
        if self.empty_range:
            return 0
        below = self._critical.capped(self.odd, self.lengths.high) - self._critical.capped(
            self.odd, self.lengths.low - 1
        )
        # Below the critical line also lie pairs with k < x, which are no cells.
        low_pairs = self._short(self.lengths.high) - self._short(self.lengths.low - 1)
        below -= low_pairs
        return self.total - below if self._above_critical else below

    def _short(self, top: int) -> int:
        """Return the number of pairs (k, x) with 1 ≤ k ≤ top and k < x in the odd range."""
        if top <= 0:
            return 0
        return sum_capped_identity(self.odd, top)

    def count(self, lengths: Span | None = None) -> int:
        """Return the number of live cells with length in ``lengths`` (all when None). O(log) big divisions."""
        if self.empty_range:
            return 0
        span = lengths or self.lengths
        return self._up_to(span.high) - self._up_to(span.low - 1)

    @lru_cache(maxsize=65536)  # noqa: B019 - cones are few and short-lived; bisection asks the same ends again
    def _up_to(self, top: int) -> int:
        return self._outer.capped(self.odd, top) - self._inner.capped(self.odd, top)

    def cells(self) -> Iterator[tuple[int, int]]:
        """Yield (k, x) of the live cells, ascending; O(log K) counts for each."""
        if self.empty_range:
            return
        pending = [self.lengths]
        while pending:
            span = pending.pop()
            count = self.count(span)
            if not count:
                continue
            if len(span) == 1 or count * 4 > len(span):
                for k in span:
                    for x in self._odd_counts(k):
                        yield k, x
                continue
            middle = (span.low + span.high) // 2
            pending.append(Span(middle + 1, span.high))
            pending.append(Span(span.low, middle))

    def lengths_at(self, odd: int) -> Span | None:
        """Return the lengths of the live cells with this odd count, an interval; None when there are none."""
        low = max(self.lengths.low, self._inner.floor(odd) + 1)
        high = min(self.lengths.high, self._outer.floor(odd))
        return Span(low, high) if low <= high else None

    def _odd_counts(self, k: int) -> range:
        """Return the x at which k is below the outer line and not below the inner one."""
        return range(max(self.odd.low, self._outer.reach(k)), min(self.odd.high, self._inner.reach(k) - 1) + 1)


def sum_capped_identity(xs: Span, top: int) -> int:
    """Return Σ over x in ``xs`` of min(top, x − 1)."""
    turn = max(xs.low, min(xs.high + 1, top + 1))
    count = turn - xs.low
    return (xs.low - 1 + turn - 2) * count // 2 + top * (xs.high - turn + 1)


def tallest(positive_map: Map, lengths: Span, odd: Span) -> tuple[int, int, int] | None:
    """Return (U, k, x) of the cell with the largest product bound in the ranges, the first one if several; or None.

    Doubling and bisection on the bound, with one count each; so windows of any size take milliseconds.
    """

    def reaches(bound: int) -> bool:
        return ThinCone(positive_map, bound - 1, lengths, odd).count() > 0

    if not reaches(1):
        return None
    low, high = 1, 2
    while reaches(high):
        low, high = high, high * high
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (middle, high) if reaches(middle) else (low, middle)
    length, odd_steps = next(ThinCone(positive_map, low - 1, lengths, odd).cells())
    return low, length, odd_steps
