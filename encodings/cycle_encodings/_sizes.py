"""Rough sizes of orbit formulas from the lengths of a cell's numbers alone; nothing large is built."""

from __future__ import annotations

from typing import TYPE_CHECKING

from cycle_encodings._steps import MOST_COPIES, additions, copies
from solverkit.exact.bounds import balanced_bound

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = [
    "classes_above",
    "excluded_by_bounds",
    "guarded_orbit_size",
    "lean_orbit_size",
    "mean_width",
    "most_classes",
    "sixteenths",
    "states_per_step",
]

#: Literals that the bounds of all classes together may take.
_BOUND_LITERALS = 20_000_000


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


def lean_orbit_size(cell: Cell) -> int:
    """Return a rough number of clauses of `composed.lean_orbit`.

    k·(W·(2^r·(2·r + 1.5) + 3) + 4·S) with r ≤ 3 copies, k·(W·(20·a + 6) + 4·S) with a additions for more.
    """
    if excluded_by_bounds(cell):
        return 2
    r = len(copies(cell.multiplier))
    column = (4 * r + 3 << r) // 2 + 3 if r <= MOST_COPIES else 20 * additions(cell) + 6
    return cell.length * (mean_width(cell) * column + 4 * states_per_step(cell))


def most_classes(bits: int) -> int:
    """Return how many classes of an n_0 with ``bits`` bits a formula may have.

    The bounds of one class take up to bits² literals.

    >>> most_classes(20), most_classes(2000)
    (50000, 5)
    """
    return max(1, _BOUND_LITERALS // max(1, bits) ** 2)


def classes_above(cell: Cell, depth: int, spare: int, leaves: int) -> tuple[int, int]:
    """Return rough numbers of the classes mod 2^m that the sieve leaves, and of the bits of n_0 above m.

    About 2^(0.7·m) classes survive m steps.
    """
    bits = balanced_bound(cell).bit_length()
    most = min(leaves, most_classes(bits))
    steps = max(0, min(depth, cell.length, bits - spare, most.bit_length() * 10 // 7))
    return min(most, 1 << steps * 7 // 10), bits - steps
