"""Rough sizes of orbit formulas from the lengths of a cell's numbers alone; nothing large is built."""

from __future__ import annotations

from typing import TYPE_CHECKING

from cycle_encodings._steps import copies
from solverkit.exact.bounds import balanced_bound

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = [
    "excluded_by_bounds",
    "guarded_orbit_size",
    "mean_width",
    "sixteenths",
    "states_per_step",
    "summed_orbit_size",
]


def excluded_by_bounds(cell: Cell) -> bool:
    """Tell whether U' ≤ B: then the formula is two clauses."""
    return balanced_bound(cell) <= cell.above


def sixteenths(number: int) -> int:
    """Return 16·log2 of a number, rounded down.

    >>> sixteenths(2), sixteenths(3)
    (16, 25)
    """
    return int(number**16).bit_length() - 1


def states_per_step(cell: Cell) -> int:
    """Return a rough number of admissible odd counts at one step: half of the triangle of all of them."""
    return cell.odd * (cell.length - cell.odd) // (2 * cell.length) + 2


def mean_width(cell: Cell) -> int:
    """Return a rough mean width of an element: along the highest orbit, x steps up by q/2 and then k − x down."""
    top = max(balanced_bound(cell), abs(cell.offset))
    return top.bit_length() + cell.odd * (sixteenths(cell.multiplier) - 16) // 32


def guarded_orbit_size(cell: Cell) -> int:
    """Return a rough number of clauses of `serial.guarded_orbit`, k·(W·(7·q + 4 + S) + 8·S)."""
    if excluded_by_bounds(cell):
        return 2
    states = states_per_step(cell)
    return cell.length * (mean_width(cell) * (7 * cell.multiplier + 4 + states) + 8 * states)


def summed_orbit_size(cell: Cell) -> int:
    """Return a rough number of clauses of `composed.lean_orbit`, k·(W·(2^r·(2·r + 1.5) + 3) + 4·S)."""
    if excluded_by_bounds(cell):
        return 2
    states, r = states_per_step(cell), len(copies(cell.multiplier))
    return cell.length * (mean_width(cell) * ((4 * r + 3 << r) // 2 + 3) + 4 * states)
