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
        low: every candidate is above this.
        high: no candidate is above this.
        bounds: upper bounds of the cells, ascending, without repeats.
        lengths: largest length of a cell whose bound is at least the one at the same place.
        odds: largest odd count of such a cell.
        cells: the cells that have candidates, by ascending bound.
        places: for each of ``bounds``, the place of the first cell with it.
    """

    low: int
    high: int
    bounds: tuple[int, ...]
    lengths: tuple[int, ...]
    odds: tuple[int, ...]
    cells: tuple[Cell, ...]
    places: tuple[int, ...]

    @property
    def candidates(self) -> int:
        """Number of odd integers n with low < n ≤ high."""
        return max(0, (self.high + 1) // 2 - (self.low + 1) // 2)

    def limits(self, first: int) -> tuple[int, int]:
        """Return the largest length, and the largest odd count, of the cells whose bound is at least ``first``."""
        place = bisect_left(self.bounds, first)
        return (self.lengths[place], self.odds[place]) if place < len(self.bounds) else (0, 0)

    def reaching(self, first: int) -> tuple[Cell, ...]:
        """Return the cells whose bound is at least ``first``."""
        place = bisect_left(self.bounds, first)
        return self.cells[self.places[place] :] if place < len(self.bounds) else ()


def profile(cells: Sequence[Cell]) -> Profile:
    """Return the profile of cells of one map; cells without a candidate are left out."""
    live = sorted((bound, cell) for cell in cells if (bound := cell_bound(cell)) > cell.above)
    if not live:
        return Profile(0, 0, (), (), (), (), ())
    bounds: list[int] = []
    lengths: list[int] = []
    odds: list[int] = []
    places: list[int] = []
    length = odd = 0
    for place in range(len(live) - 1, -1, -1):
        bound, cell = live[place]
        length, odd = max(length, cell.length), max(odd, cell.odd)
        if bounds and bounds[-1] == bound:
            lengths[-1], odds[-1], places[-1] = length, odd, place
        else:
            bounds.append(bound)
            lengths.append(length)
            odds.append(odd)
            places.append(place)
    backwards = (tuple(reversed(column)) for column in (bounds, lengths, odds, places))
    ascending, most_steps, most_odd, first_places = backwards
    low = min(cell.above for _, cell in live)
    ordered = tuple(cell for _, cell in live)
    return Profile(low, live[-1][0], ascending, most_steps, most_odd, ordered, first_places)
