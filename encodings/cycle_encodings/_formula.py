"""What an encoding gives: a formula with named condition groups, and the way back from a model to a least element."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from hashlib import sha256
from typing import TYPE_CHECKING, Protocol

from pysat.formula import CNF

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from solverkit.window import Cell

__all__ = ["Encoder", "Encoding", "Form", "Statement"]


class Form(StrEnum):
    """What an encoding produces."""

    CNF = "cnf"
    CONSTRAINTS = "constraints"
    INEQUALITIES = "inequalities"


class Statement(Protocol):
    """What every encoding of a cell gives, whatever its form."""

    @property
    def cell(self) -> Cell:
        """The cell, of positive elements."""

    def sizes(self) -> dict[str, int]:
        """Return what there is of each kind, such as ``{"variables": 10, "clauses": 20}``."""

    def digest(self) -> str:
        """Return a SHA-256 that the same cell and options always give."""


@dataclass(frozen=True, slots=True)
class Encoding:
    """A formula whose models are the cycles of one cell, each once up to auxiliary variables.

    Args:
        cell: of positive elements.
        variables: number of variables, 1 … ``variables``.
        clauses: the clauses, in order.
        groups: name of a condition -> ranges [start, stop) of the clauses that state it; together they are all.
        least_bits: variables of the least element, least significant first.
        names: variable -> what it means, for those that mean something by themselves.
        cubes: literals of which every model has one; a solver may assume them one after another before it searches
            without. Nothing but time depends on it.
    """

    cell: Cell
    variables: int
    clauses: tuple[tuple[int, ...], ...]
    groups: Mapping[str, tuple[tuple[int, int], ...]]
    least_bits: tuple[int, ...]
    names: Mapping[int, str]
    cubes: tuple[int, ...] = ()

    def sizes(self) -> dict[str, int]:
        """Return the numbers of variables and clauses."""
        return {"variables": self.variables, "clauses": len(self.clauses)}

    def cnf(self) -> CNF:
        """Return the formula as python-sat keeps it."""
        formula = CNF()
        formula.extend([list(clause) for clause in self.clauses])
        formula.nv = max(formula.nv, self.variables)
        return formula

    def digest(self) -> str:
        """Return the SHA-256 of the clauses in DIMACS form, without comments."""
        count = self.variables
        # Looked up, a literal costs half of what str(literal) costs; a negative index counts from the end.
        text = [*map(str, range(count + 1)), *map(str, range(-count, 0))].__getitem__
        lines = [f"p cnf {count} {len(self.clauses)}", *(" ".join(map(text, clause)) for clause in self.clauses)]
        return sha256((" 0\n".join(lines).replace(" 0\n", "\n", 1) + " 0\n").encode("ascii")).hexdigest()

    def decode(self, model: Iterable[int]) -> int:
        """Return the least element that a model stands for; the caller substitutes it into the map.

        Args:
            model: the literals that hold.
        """
        true = set(model)
        return sum(1 << place for place, bit in enumerate(self.least_bits) if bit in true)

    def blocking(self, least: int) -> tuple[int, ...]:
        """Return the clause that excludes the cycle with this least element."""
        return tuple(-bit if least >> place & 1 else bit for place, bit in enumerate(self.least_bits))


class Encoder(Protocol):
    """An encoding strategy; one file offers one as ``ENCODING``."""

    @property
    def name(self) -> str:
        """The name that options and records use."""

    @property
    def summary(self) -> str:
        """One line: what it is good for."""

    @property
    def form(self) -> Form:
        """Which back ends take it."""

    def encode(self, cell: Cell) -> Statement:
        """Return the statement for a cell of positive elements; the same cell gives the same statement."""

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses or rows, without building them.

        Raises:
            CapacityError: the encoding cannot hold the cell.
        """
