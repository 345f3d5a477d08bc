"""Which candidates a batch of cells asks for, and what the cells allow at each of them."""

from __future__ import annotations

from bisect import bisect_left
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

from solverkit.exact.bounds import EXACT_LENGTH, balanced_bound, product_bound

if TYPE_CHECKING:
    from collections.abc import Sequence

    from solverkit.window import Cell

__all__ = ["Profile", "cell_bound", "profile"]


@lru_cache(maxsize=1 << 18)
def cell_bound(cell: Cell) -> int:
    """Return an upper bound of every least element of ``cell``: the balanced bound, or U for a huge length.

    Args:
        cell: of positive elements.

    Cost: one summation of ``cell.odd`` integers of ``cell.length`` bits, once a cell.
    """
    return balanced_bound(cell) if cell.length <= EXACT_LENGTH else product_bound(cell)


@dataclass(frozen=True, slots=True)
class Profile:
    """What the cells of one map allow, as a function of the candidate.

    Args:
        low: the least candidate is above this.
        high: no candidate is above this.
        bounds: upper bounds of the cells, ascending, without repeats.
        lengths: largest length of a cell whose bound is at least the one at the same place.
        odds: largest odd count of such a cell.
    """

    low: int
    high: int
    bounds: tuple[int, ...]
    lengths: tuple[int, ...]
    odds: tuple[int, ...]

    @property
    def candidates(self) -> int:
        """Number of odd integers n with low < n ≤ high."""
        return max(0, (self.high + 1) // 2 - (self.low + 1) // 2)

    def limits(self, first: int) -> tuple[int, int]:
        """Return the largest length and the largest odd count of a cell that has a candidate of at least ``first``."""
        place = bisect_left(self.bounds, first)
        return (self.lengths[place], self.odds[place]) if place < len(self.bounds) else (0, 0)

    def breaks(self, first: int, last: int) -> list[int]:
        """Return ascending last elements of parts of ``first`` … ``last`` with about constant limits; ``last`` ends."""
        ends: list[int] = []
        while first <= last:
            place = bisect_left(self.bounds, first)
            if place == len(self.bounds):
                end = last
            else:
                # At least a doubling a part, so that there are few parts.
                doubled = bisect_left(self.bounds, 2 * first)
                end = self.bounds[min(max(place, doubled), len(self.bounds) - 1)]
            ends.append(min(end, last))
            first = ends[-1] + 1
        return ends


def profile(cells: Sequence[Cell]) -> Profile:
    """Return the profile of cells of one map; cells that have no candidate are left out."""
    live = sorted(
        (bound, cell.length, cell.odd, cell.above)
        for cell in cells
        if (bound := cell_bound(cell)) > cell.above
    )
    if not live:
        return Profile(0, 0, (), (), ())
    bounds: list[int] = []
    lengths: list[int] = []
    odds: list[int] = []
    length = odd = 0
    for bound, k, x, _ in reversed(live):
        length, odd = max(length, k), max(odd, x)
        if bounds and bounds[-1] == bound:
            lengths[-1], odds[-1] = length, odd
        else:
            bounds.append(bound)
            lengths.append(length)
            odds.append(odd)
    low = min(above for _, _, _, above in live)
    return Profile(low, live[-1][0], tuple(reversed(bounds)), tuple(reversed(lengths)), tuple(reversed(odds)))
