"""The plain orbit with exact windows: the same adders, but ranges from a fixpoint, state by state.

Dynamic programming over position and odd count gives the exact ranges of n_0 and n_i in each state (i, j); states
without room are dropped, until nothing changes. What is left guards its ranges. Otherwise as ``orbit``, so that the two
together measure what windows are worth.

Condition groups: ``step``, ``closing``, ``odd count``, ``order``, ``lower bound``, ``upper bound``, ``ranges``.

Size, with W the mean width of an element, S the mean number of admissible odd counts at a step and a the additions a
step, one for each one in (q − 1)/2 and one for the constant unless d = ±1: about k·W·(3·a + 2) variables and
k·(W·(20·a + 8 + S) + 8·S) clauses.

Good for: comparison: 0.8 of the time of ``orbit`` on six cells of the benchmark with Glucose 4 (geometric mean).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._orbit_draft import encoded
from cycle_encodings._sizes import excluded_by_bounds, mean_width, states_per_step
from cycle_encodings._steps import adder_step, additions
from cycle_encodings.serial import guarded_orbit

if TYPE_CHECKING:
    from cycle_encodings._formula import Encoding
    from solverkit.window import Cell

__all__ = ["ENCODING", "ExactWindows"]


@dataclass(frozen=True, slots=True)
class ExactWindows:
    """The orbit of adders with exact windows; it has no options."""

    name: str = "windows"
    form: Form = Form.CNF
    summary: str = "adders with exact windows and guards; shows what windows are worth over the plain orbit"

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses."""
        if excluded_by_bounds(cell):
            return 2
        states = states_per_step(cell)
        return cell.length * (mean_width(cell) * (20 * additions(cell) + 8 + states) + 8 * states)

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        return encoded(cell, lambda windows: guarded_orbit(windows, step=adder_step).finished())


ENCODING = ExactWindows()
