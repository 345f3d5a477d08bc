"""Prefix nogoods: the serial orbit, and the least-element sieve mod 2^m as clauses and guarded bounds.

A class mod 2^i that holds no least element, by the exact intervals that its prefix of i steps leaves, is one clause on
the low bits of n_0; a class that is left bounds the high bits of n_0. Moreover the residue transition graph mod 2^g,
pruned to closed walks of length k with x odd steps from the residues that the sieve leaves, forbids residues of every
element.

Condition groups: those of ``serial``, and ``residues``, which follows from them.

Size, with L classes left, C excluded, u = w − m bits of n_0 above the classes, and F residues that the graph forbids:
no variables, and at most C + 2·u·L + k·F clauses more than ``serial``.

Good for cells without cycles and U' from about 10^3 on: 0.5 of the time of ``serial`` on (3, −74923, 59, 39) with
Glucose 4, and 0.85 as the geometric mean of six cells of the benchmark.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._orbit_draft import checked_option, encoded
from cycle_encodings._prefix_classes import class_tree, exclude_classes, exclude_residues, walked
from cycle_encodings._sizes import classes_above, excluded_by_bounds, guarded_orbit_size
from cycle_encodings.serial import guarded_orbit

if TYPE_CHECKING:
    from cycle_encodings._formula import Encoding
    from solverkit.exact.windows import Windows
    from solverkit.window import Cell

__all__ = ["ENCODING", "Prefixes"]


@dataclass(frozen=True, slots=True)
class Prefixes:
    """The serial orbit with prefix nogoods.

    Args:
        depth: classes mod 2^m for m up to this, 0 … 24.
        spare: bits of U' that the classes leave free at least, 1 … 64.
        graph: g of the transition graph mod 2^g, 0 … 8; 0 for none.

    Raises:
        InputError: an option outside its range.
    """

    depth: int = 16
    spare: int = 2
    graph: int = 3
    name: str = "prefixes"
    form: Form = Form.CNF
    summary: str = "serial orbit with the least-element sieve mod 2^m as clauses and guarded bounds"

    def __post_init__(self) -> None:
        checked_option("depth", self.depth, 0, 24)
        checked_option("spare", self.spare, 1, 64)
        checked_option("graph", self.graph, 0, 8)

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses."""
        size = guarded_orbit_size(cell)
        if not excluded_by_bounds(cell):
            classes, high = classes_above(cell, self.depth, self.spare, 1 << 16)
            size += classes * (1 + 2 * high)
        return size

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        return encoded(cell, self._formula)

    def _formula(self, windows: Windows) -> Encoding:
        draft = guarded_orbit(windows)
        exclude_classes(draft, class_tree(windows, self.depth, self.spare))
        if self.graph:
            exclude_residues(draft, self.graph, walked(windows, self.graph))
        return draft.finished()


ENCODING = Prefixes()
