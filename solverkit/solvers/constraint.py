"""CP-SAT, the constraint solver of OR-Tools; it decides in exact integer arithmetic."""

from __future__ import annotations

from dataclasses import dataclass
from importlib.metadata import PackageNotFoundError, version
from typing import TYPE_CHECKING

from solverkit.errors import CapacityError, ContradictionError, InputError, MissingPartError, SolverkitError
from solverkit.findings import Cycle
from solverkit.solvers._contract import Abilities, Kind

if TYPE_CHECKING:
    from collections.abc import Iterator

    from cycle_encodings._constraint_model import ConstraintModel

__all__ = ["BACK_ENDS", "ConstraintSolver", "UndecidedError"]


class UndecidedError(SolverkitError, RuntimeError):
    """A solver ended without an answer."""


@dataclass(frozen=True, slots=True)
class ConstraintSolver:
    """CP-SAT, by default with one worker, so that runs can be repeated and several can share a machine.

    A model that states a search order is searched in that order, any other as CP-SAT sees fit.

    Args:
        workers: number of search threads, 1 … 256.
        linearization: how much of the model CP-SAT relaxes to linear programs, 0 … 2; cycles gain nothing from it.
        probing: CP-SAT's effort of probing in presolve, 0 … 3.
        seed: of the search, at least 0.

    Raises:
        InputError: an option outside its range.
    """

    workers: int = 1
    linearization: int = 0
    probing: int = 2
    seed: int = 1
    name: str = "cpsat"
    kind: Kind = Kind.CP

    def __post_init__(self) -> None:
        for field, low, high in (
            ("workers", 1, 256),
            ("linearization", 0, 2),
            ("probing", 0, 3),
            ("seed", 0, 2**31 - 1),
        ):
            if not low <= getattr(self, field) <= high:
                raise InputError(field, getattr(self, field), f"an integer from {low} to {high}")

    @property
    def version(self) -> str:
        """The library's version."""
        try:
            return f"ortools {version('ortools')}"
        except PackageNotFoundError:
            return "ortools (absent)"

    @property
    def abilities(self) -> Abilities:
        """Every solution starts a new search; refutations are not logged."""
        return Abilities(incremental=False, proofs=False, assumptions=False)

    def least_elements(self, encoding: ConstraintModel) -> Iterator[int]:
        """Yield the least element of each solution, then exclude it; end when CP-SAT reports INFEASIBLE.

        Raises:
            CapacityError: CP-SAT finds the model invalid.
            ContradictionError: CP-SAT gives a solution that is no cycle of the cell.
            MissingPartError: OR-Tools is not installed.
            UndecidedError: CP-SAT ends without an answer.
        """
        try:
            from ortools.sat.python import cp_model  # noqa: PLC0415 - heavy; loaded when it is used
        except ImportError as problem:
            raise MissingPartError("OR-Tools", "install the package ortools") from problem
        model = encoding.model.clone()
        flaw = model.validate()
        if flaw:
            raise CapacityError(self.name, f"CP-SAT finds the model invalid: {flaw.splitlines()[0]}")
        least = model.get_int_var_from_proto_index(encoding.least)
        solver = cp_model.CpSolver()
        solver.parameters.num_workers = self.workers
        solver.parameters.linearization_level = self.linearization
        solver.parameters.cp_model_probing_level = self.probing
        solver.parameters.random_seed = self.seed
        if len(model.Proto().search_strategy):
            solver.parameters.search_branching = cp_model.FIXED_SEARCH
        while True:
            status = solver.solve(model)
            if status == cp_model.INFEASIBLE:
                return
            if status not in (cp_model.OPTIMAL, cp_model.FEASIBLE):
                raise UndecidedError(f"{self.name} ended with the status {solver.status_name(status)}")
            found = encoding.decode(solver.response_proto.solution)
            cell = encoding.cell
            if not Cycle(cell.multiplier, cell.offset, found, cell.length).lies_in(cell):
                raise ContradictionError(f"{self.name} gives {found} for {cell}")
            yield found
            model.add(least != found)


def BACK_ENDS() -> tuple[ConstraintSolver, ...]:  # noqa: N802 - the room's scan looks for this name
    """Return the one solver."""
    return (ConstraintSolver(),)
