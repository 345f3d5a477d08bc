"""The plain orbit encoding: bits of every element, one addition a step, prefix counters, "least element first".

A step is out = h + p·(((q − 1)/2)·n + (d + 1)/2) with n = 2h + p, in two's complement, wide enough to be exact: for
(3, 1) and (3, −1) this is one adder a step, in general one for each one in (q − 1)/2 and one for the constant. A state
(i, j), "j odd steps among the first i", is a literal. Every element after the first is strictly larger than the first,
so each cycle is one model, and a word that repeats a shorter one is none. The element after i steps has a range, from
one pass over the windows.

Condition groups: ``step`` (the map), ``closing`` (the last image is the first element), ``odd count`` (the prefix
counters), ``order`` (least element first), ``lower bound`` (above B), ``upper bound`` (at most U'), ``ranges`` (of the
element after each step).

Size, with W the mean width of an element, S the mean number of odd counts at a step and a the additions a step: about
k·W·(3·a + 2) variables and k·(W·(20·a + 8) + 8·S) clauses.

Good for U' up to about 10^4; it is the plain member of the family, against which others are compared.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._orbit_draft import OrbitDraft, encoded
from cycle_encodings._sizes import excluded_by_bounds, mean_width, states_per_step
from cycle_encodings._steps import adder_step, additions

if TYPE_CHECKING:
    from cycle_encodings._formula import Encoding
    from solverkit.exact.windows import Windows
    from solverkit.window import Cell

__all__ = ["ENCODING", "Orbit"]


@dataclass(frozen=True, slots=True)
class Orbit:
    """The plain orbit encoding; it has no options."""

    name: str = "orbit"
    form: Form = Form.CNF
    summary: str = "bits of every element, one addition a step; plain and exact, for U' up to about 10^4"

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses."""
        if excluded_by_bounds(cell):
            return 2
        return cell.length * (mean_width(cell) * (20 * additions(cell) + 8) + 8 * states_per_step(cell))

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        return encoded(cell, _plain, rounds=1)


def _plain(windows: Windows) -> Encoding:
    draft = OrbitDraft(windows)
    draft.steps(adder_step)
    draft.close()
    draft.count_odd()
    draft.put_least_first()
    draft.bound()
    return draft.finished()


ENCODING = Orbit()
