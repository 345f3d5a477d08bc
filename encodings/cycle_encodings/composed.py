"""The default: prefix classes with their affine forms instead of the first steps, then a lean orbit.

The least-element sieve leaves some classes r mod 2^m of n_0; each is a literal that gives n_0 = 2^m·u + r and
n_m = q^j·u + T^m(r) with the exact bounds of u, and the first m steps of the orbit are not stated at all. From n_m on
the orbit follows by sums of shifted copies of n, whose carry stays small for every q, with the order, the range of each
element, and the admissible odd counts. Implied literals are few, since propagation is what a run spends its time on.
For q = 3 the elements mod 3 are a channel. The literals of the classes are the cubes, through which a solver goes one
after another; then about as many conflicts are needed as least elements are left by the sieve.

Condition groups: those of ``serial``, and ``residues``, which here also states the steps before m.

Size, with W the mean width of an element, S the mean number of admissible odd counts at a step, r the copies of n whose
sum is q·n (2 for q = 3, 5, 7, 9; 3 for 11 and 13): about k·(W·(r + 1.5) + S) variables and
k·(W·(2^r·(2·r + 1.5) + 3) + 4·S) clauses, without those of the first m steps; for r > 3 the steps are those of
``orbit``. On top, with L classes, N nodes of their tree, u the bits of U' above m, W' the width of q^j·u: about
N + 3·u·W' variables and 5·N + L·(W' + 2·u) + 20·u·W' clauses.

Good for any cell; the default. On six cells of the benchmark with Glucose 4 it takes 0.26 of the time of ``orbit``
(geometric mean). Where d is far above U' most least elements stay up for many steps whatever is known of them, and the
gain is least, about 2.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._orbit_draft import OrbitDraft, checked_option, empty_formula, encoded
from cycle_encodings._prefix_classes import class_tree, jump
from cycle_encodings._sizes import classes_above, excluded_by_bounds, lean_orbit_size, sixteenths
from cycle_encodings._steps import lean_step
from cycle_encodings.channels import add_channel
from solverkit.exact.bounds import balanced_bound

if TYPE_CHECKING:
    from cycle_encodings._formula import Encoding
    from solverkit.exact.windows import Windows
    from solverkit.window import Cell

__all__ = ["ENCODING", "Composed", "lean_orbit"]


@dataclass(frozen=True, slots=True)
class Composed:
    """The default composition.

    Args:
        leaves: at most so many classes of n_0 mod 2^m, 1 … 65,536.
        spare: bits of U' that the classes leave free at least, 1 … 64.
        channel: whether q = 3 gets a channel mod 3.
        guards: whether each state guards the exact ranges of n_0 and of its element.
        cubes: whether solvers are told to go through the classes one after another.

    Raises:
        InputError: an option outside its range.
    """

    leaves: int = 4096
    spare: int = 3
    channel: bool = True
    guards: bool = False
    cubes: bool = True
    name: str = "composed"
    form: Form = Form.CNF
    summary: str = "prefix classes of the least element instead of the first steps, then sums of copies; the default"

    def __post_init__(self) -> None:
        checked_option("leaves", self.leaves, 1, 1 << 16)
        checked_option("spare", self.spare, 1, 64)

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses."""
        size = lean_orbit_size(cell)
        if not excluded_by_bounds(cell):
            classes, high = classes_above(cell, cell.length, self.spare, self.leaves)
            steps = balanced_bound(cell).bit_length() - high
            width = high + steps * sixteenths(cell.multiplier) // 16
            size = size * (cell.length - steps) // cell.length
            size += classes * (10 + width + 2 * high) + 20 * high * width
        return size

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        return encoded(cell, self._formula)

    def _formula(self, windows: Windows) -> Encoding:
        tree = class_tree(windows, windows.cell.length, self.spare, self.leaves)
        if not tree.live:
            return empty_formula(windows.cell, "residues")
        first = tree.live[0][0]
        draft = lean_orbit(windows, first)
        if self.guards:
            draft.guard()
        leaves = jump(draft, tree) if first else ()
        if self.channel and windows.cell.multiplier == 3:
            add_channel(draft, 3)
        return draft.finished(leaves if self.cubes else ())


def lean_orbit(windows: Windows, first: int) -> OrbitDraft:
    """Return the orbit from step ``first`` on, in as few implied literals as possible.

    With ``first`` > 0 it says nothing of how n_first follows from n_0; `jump` does.

    Args:
        windows: of a cell of positive elements, not empty.
        first: the elements after 1 … ``first`` − 1 steps are left out, and with them the first steps.
    """
    draft = OrbitDraft(windows, sorted({0, *range(first, windows.cell.length + 1)}))
    draft.steps(lean_step)
    draft.close()
    draft.count_odd(exclusive=False)
    draft.put_least_first()
    draft.bound()
    return draft


ENCODING = Composed()
