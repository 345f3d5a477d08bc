"""An encoding with a solver, as a method that decides cells."""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import TYPE_CHECKING

from solverkit.errors import CapacityError, ContradictionError, InputError, MissingPartError
from solverkit.exact.bounds import EXACT_LENGTH, balanced_bound
from solverkit.findings import Cycle
from solverkit.methods import Budget, Family, Hit, Piece, PieceResult
from solverkit.registry import load, parts
from solverkit.solvers._contract import BackEnd, Kind
from solverkit.solvers._isolation import SolverProcess
from solverkit.words import lyndon_count

if TYPE_CHECKING:
    from collections.abc import Sequence

    from cycle_encodings._formula import Encoder
    from solverkit.window import Cell

__all__ = ["DEFAULTS", "MOST_CLAUSES", "FormulaMethod", "formula_method"]

#: Kind of solver -> the encoding and the solver that are used when none is named.
DEFAULTS = {
    Kind.CNF: ("composed", "glucose4"),
    Kind.CP: ("constraints", "cpsat"),
    Kind.MIP: ("inequalities", "highs"),
    Kind.PB: ("inequalities", "exact"),
}
#: No formula with more clauses or rows is built.
MOST_CLAUSES = 50_000_000

# More candidates than any search gets through; a float would overflow far beyond.
_COUNTLESS = 10**200

_process = SolverProcess()


@dataclass(frozen=True, slots=True)
class FormulaMethod:
    """An encoding with a solver that takes it.

    Args:
        encoding: name of the encoding.
        solver: name of the back end.
    """

    encoding: str
    solver: str

    @property
    def name(self) -> str:
        """``KIND:ENCODING@SOLVER``."""
        back_end: BackEnd = load("solvers", self.solver)
        return f"{back_end.kind}:{self.encoding}@{self.solver}"

    @property
    def family(self) -> Family:
        """Formulas are a family of their own: the search is the solver's."""
        return Family.FORMULA

    def _encoder(self) -> Encoder:
        encoder: Encoder = load("encodings", self.encoding)
        return encoder

    def refusal(self, cell: Cell) -> str | None:
        """Return why the cell can't be encoded, or None."""
        if cell.length > EXACT_LENGTH:
            return f"length {cell.length} is above {EXACT_LENGTH}, the limit of the encodings"
        try:
            size = self._encoder().size(cell)
        except CapacityError as problem:
            return str(problem)
        if size > MOST_CLAUSES:
            return f"about {size} clauses or rows, more than {MOST_CLAUSES}"
        return None

    def _size(self, cell: Cell) -> int:
        try:
            return min(self._encoder().size(cell), _COUNTLESS)
        except CapacityError:
            return _COUNTLESS

    def estimate(self, cells: Sequence[Cell]) -> float:
        """Return seconds on one core.

        Encoding at about 10^6 clauses a second, search that grows with the candidates, and one solution for each
        cycle that is expected.
        """
        seconds = 0.0
        for cell in cells:
            candidates = min(max(0, balanced_bound(cell) - cell.above), _COUNTLESS)
            cycles = lyndon_count(cell.length, cell.odd) * abs(cell.offset) // abs(cell.determinant)
            seconds += 0.004 + self._size(cell) * 1.2e-6 + candidates * cell.length * 2e-7
            seconds += min(cycles, 1e15) * cell.length * 2e-5
        return seconds

    def batches(self, cells: Sequence[Cell]) -> list[tuple[Cell, ...]]:
        """Return each cell alone: formulas share nothing."""
        return [(cell,) for cell in cells]

    def pieces(self, batch: tuple[Cell, ...], seconds: float) -> list[Piece]:  # noqa: ARG002 - not yet cut
        """Return the cell as one piece."""
        return [Piece(self.name, batch)]

    def run(self, piece: Piece, budget: Budget) -> PieceResult:
        """List the cycles of the cell; each is substituted into the map before it counts."""
        (cell,) = piece.cells
        begun = time.perf_counter()
        answer = _process.answer(cell, self.encoding, self.solver, budget.seconds, budget.memory)
        hits = []
        for least in answer.least:
            cycle = Cycle(cell.multiplier, cell.offset, least, cell.length)
            if not cycle.lies_in(cell):
                raise ContradictionError(f"{self.name} gives {least} for {cell}, which is a cycle of another cell")
            hits.append(Hit(cycle.length, cycle.odd, least))
        return PieceResult(
            piece,
            tuple(sorted(hits)),
            answer.complete,
            answer.reason,
            statistics=answer.statistics,
            seconds=time.perf_counter() - begun,
        )


def formula_method(text: str) -> FormulaMethod:
    """Return the method that ``KIND``, ``KIND:ENCODING``, ``KIND@SOLVER`` or ``KIND:ENCODING@SOLVER`` names.

    Raises:
        InputError: another form, an unknown encoding or solver, or two that do not go together.
        MissingPartError: no solver of this kind.
    """
    head, at, solver = text.partition("@")
    kind, colon, encoding = head.partition(":")
    if kind not in set(Kind) or (at and not solver) or (colon and not encoding):
        kinds = ", ".join(Kind)
        raise InputError("methods", text, f"KIND, KIND:ENCODING, KIND@SOLVER or KIND:ENCODING@SOLVER with KIND {kinds}")
    usual_encoding, usual_solver = DEFAULTS[Kind(kind)]
    if not any(part.value and part.value.kind == kind for part in parts("solvers")):
        raise MissingPartError(f"a solver of the kind {kind}", "none is installed; see catalog")
    method = FormulaMethod(encoding or usual_encoding, solver or usual_solver)
    encoder: Encoder = load("encodings", method.encoding)
    back_end: BackEnd = load("solvers", method.solver)
    if back_end.kind != kind:
        raise InputError("methods", text, f"{back_end.kind} with the solver {method.solver}")
    if encoder.form != Kind(kind).form:
        raise InputError("methods", text, f"for {kind}, an encoding of the form {Kind(kind).form}")
    return method
