"""The pseudo-Boolean solver of the optional package Exact: conflict-driven search with cutting planes, in integers."""

from __future__ import annotations

import signal
import threading
from dataclasses import dataclass
from importlib.metadata import PackageNotFoundError, version
from typing import TYPE_CHECKING, Any

from solverkit.errors import ContradictionError, MissingPartError
from solverkit.findings import Cycle
from solverkit.solvers._contract import Abilities, Kind
from solverkit.solvers.constraint import UndecidedError

if TYPE_CHECKING:
    from collections.abc import Iterator

    from cycle_encodings._linear_model import IntegerVariable, LinearModel, Row

__all__ = ["BACK_ENDS", "PseudoBooleanSolver"]

# Exact catches these when a solver is made, and then a process that is told to end goes on.
_TAKEN = (signal.SIGINT, signal.SIGTERM, signal.SIGXCPU)


@dataclass(frozen=True, slots=True)
class PseudoBooleanSolver:
    """The solver Exact; integers are in binary, and numbers may have any size."""

    name: str = "exact"
    kind: Kind = Kind.PB

    @property
    def version(self) -> str:
        """The library's version, or that it is absent."""
        try:
            return f"Exact {version('Exact')}"
        except PackageNotFoundError:
            return "Exact (absent)"

    @property
    def abilities(self) -> Abilities:
        """Rows can be added between solutions."""
        return Abilities(incremental=True, proofs=False, assumptions=True)

    def least_elements(self, encoding: LinearModel) -> Iterator[int]:
        """Yield the least element of each point, then exclude it; end when Exact reports UNSAT.

        Raises:
            ContradictionError: Exact gives a point that is no cycle of the cell.
            MissingPartError: the package Exact is not installed.
            UndecidedError: Exact ends without an answer.
        """
        try:
            from exact import Exact  # noqa: PLC0415 - optional
        except ImportError as problem:
            raise MissingPartError("the package Exact", 'install "solverkit[pseudo-boolean]"') from problem
        handlers = {number: signal.getsignal(number) for number in _TAKEN}
        solver, model, cell = Exact(), encoding, encoding.cell
        _restored(handlers)

        def take(variables: tuple[IntegerVariable, ...], rows: tuple[Row, ...], first: int) -> None:
            for index, each in enumerate(variables, first):
                solver.addVariable(f"v{index}", each.low, each.high)
            for row in rows:
                terms = [(weight, f"v{index}") for index, weight in row.terms]
                low, high = row.low is not None, row.high is not None
                solver.addConstraint(terms, low, row.low if low else 0, high, row.high if high else 0)

        take(model.variables, model.rows, 0)
        names = [f"v{index}" for index in range(len(model.variables))]
        while (status := solver.runFull(False)) == "SAT":
            least = encoding.decode(solver.getLastSolutionFor(names))
            if not Cycle(cell.multiplier, cell.offset, least, cell.length).lies_in(cell):
                raise ContradictionError(f"{self.name} gives {least} for {cell}")
            yield least
            following = model.excluding(least)
            take(following.variables[len(model.variables) :], following.rows[len(model.rows) :], len(model.variables))
            model = following
        if status != "UNSAT":
            raise UndecidedError(f"{self.name} ended with the status {status}")


def _restored(handlers: dict[signal.Signals, Any]) -> None:
    """Put back the handlers of signals; only the main thread can, and only it runs them."""
    if threading.current_thread() is threading.main_thread():
        for number, handler in handlers.items():
            if handler is not None:
                signal.signal(number, handler)


def BACK_ENDS() -> tuple[PseudoBooleanSolver, ...]:  # noqa: N802 - the room's scan looks for this name
    """Return the one solver, also where its package is absent: using it then says what to install."""
    return (PseudoBooleanSolver(),)
