"""The orbit with one serial multiplier a step, exact windows and guards.

The image of an odd n is (q·n + d)/2, read off column by column with one carry between 0 and q, order-encoded; an even n
is shifted. Windows are taken to the fixpoint of dynamic programming over position and odd count; a state (i, j) guards
the exact ranges of n_0 and n_i there. Every element after the first is above it.

Condition groups: ``step``, ``closing``, ``odd count``, ``order``, ``lower bound``, ``upper bound``, ``ranges``.

Size, with W the mean width of an element and S the mean number of admissible odd counts at a step: about k·W·(q + 3)
variables and k·(W·(7·q + 4 + S) + 8·S) clauses.

Good for any cell, and the ground on which other members build: 0.8 of the time of ``windows`` on six cells of the
benchmark with Glucose 4. Free carries at even steps saved 10 to 20 % over carries that always follow. The carry grows
with q; ``composed`` has a step whose carry does not.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._orbit_draft import OrbitDraft, encoded
from cycle_encodings._sizes import guarded_orbit_size
from cycle_encodings._steps import serial_step

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from cycle_encodings._formula import Encoding
    from cycle_encodings._gates import Builder
    from solverkit.exact.windows import Windows
    from solverkit.window import Cell

__all__ = ["ENCODING", "Serial", "guarded_orbit"]


@dataclass(frozen=True, slots=True)
class Serial:
    """The serial encoding; it has no options."""

    name: str = "serial"
    form: Form = Form.CNF
    summary: str = "one serial multiplier a step, exact windows, guards; the ground that others build on"

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses."""
        return guarded_orbit_size(cell)

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        return encoded(cell, lambda windows: guarded_orbit(windows).finished())


def guarded_orbit(
    windows: Windows,
    closing: bool = True,
    step: Callable[[Builder, Cell, Sequence[int], Sequence[int]], None] = serial_step,
) -> OrbitDraft:
    """Return the orbit with exact windows and guards, ready for more conditions.

    Args:
        windows: of a cell of positive elements, not empty.
        closing: whether the closing is stated; without it the orbit only runs from n_0 to n_k.
        step: a rule of `_steps`.
    """
    draft = OrbitDraft(windows)
    draft.steps(step)
    if closing:
        draft.close()
    draft.count_odd()
    draft.put_least_first()
    draft.bound()
    draft.guard()
    return draft


ENCODING = Serial()
