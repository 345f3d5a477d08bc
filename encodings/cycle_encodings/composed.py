"""The default: prefix classes with their affine forms instead of the first steps, then the serial orbit.

The least-element sieve leaves some classes r mod 2^m of n_0; each is a literal that gives n_0 = 2^m·u + r and
n_m = q^j·u + T^m(r) with the exact bounds of u, and the first m steps of the orbit are not stated at all. From n_m on
the orbit follows by serial multipliers, with exact windows, guards and the order. For q = 3 the elements mod 3 are a
channel.

Condition groups: those of ``serial``, and ``residues``, which here also states the steps before m.

Size, with L classes, N nodes of their tree, u the bits of U' above m, W' the width of q^j·u: about
N + u·3·W' variables and 5·N + L·(W' + 2·u) + 20·u·W' clauses more than ``serial`` without its first m steps.

Good for any cell; the default. Conflicts are about one to three for each least element that the sieve cannot exclude.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._orbit_draft import checked_option, empty_formula, windows_of
from cycle_encodings._prefix_classes import class_tree, jump
from cycle_encodings._sizes import excluded_by_bounds, guarded_orbit_size, mean_width
from cycle_encodings.channels import add_channel
from cycle_encodings.serial import guarded_orbit
from solverkit.exact.bounds import balanced_bound

if TYPE_CHECKING:
    from cycle_encodings._formula import Encoding
    from solverkit.window import Cell

__all__ = ["ENCODING", "Composed"]


@dataclass(frozen=True, slots=True)
class Composed:
    """The default composition.

    Args:
        leaves: at most so many classes of n_0 mod 2^m, 1 … 65,536.
        spare: bits of U' that the classes leave free at least, 1 … 64.
        channel: whether q = 3 gets a channel mod 3.

    Raises:
        InputError: an option outside its range.
    """

    leaves: int = 4096
    spare: int = 3
    channel: bool = True
    name: str = "composed"
    form: Form = Form.CNF
    summary: str = "prefix classes of the least element instead of the first steps, then serial steps; the default"

    def __post_init__(self) -> None:
        checked_option("leaves", self.leaves, 1, 1 << 16)
        checked_option("spare", self.spare, 1, 64)

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses."""
        size = guarded_orbit_size(cell)
        if not excluded_by_bounds(cell):
            depth = max(0, balanced_bound(cell).bit_length() - self.spare)
            size += min(self.leaves, 1 << min(depth, 64) * 7 // 10) * (10 + mean_width(cell))
        return size

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        windows = windows_of(cell)
        if windows.empty:
            return empty_formula(cell)
        tree = class_tree(windows, cell.length, self.spare, self.leaves)
        if not tree.live:
            return empty_formula(cell, "residues")
        first = tree.live[0][0]
        draft = guarded_orbit(windows, first=first)
        if first:
            jump(draft, tree)
        if self.channel and cell.multiplier == 3:
            add_channel(draft, 3)
        return draft.finished()


ENCODING = Composed()
