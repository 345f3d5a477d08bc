"""Integer programming solvers through OR-Tools: SCIP and HiGHS. They compute in floating point.

What they call a solution is rounded and substituted into the map in exact arithmetic; a false one is excluded by its
least element and never yielded. What they call infeasible proves nothing, so no list of theirs is complete.
"""

from __future__ import annotations

from dataclasses import dataclass
from importlib.metadata import PackageNotFoundError, version
from typing import TYPE_CHECKING, Any

from solverkit.errors import CapacityError, ContradictionError, InputError, MissingPartError
from solverkit.findings import Cycle
from solverkit.solvers._contract import Abilities, Kind
from solverkit.solvers.constraint import UndecidedError

if TYPE_CHECKING:
    from collections.abc import Iterator

    from cycle_encodings._linear_model import LinearModel

__all__ = ["BACK_ENDS", "EXACT_IN_DOUBLES", "IntegerSolver", "Point"]

#: Every integer up to this is a double.
EXACT_IN_DOUBLES = 1 << 53
_NAMES = ("scip", "highs")


@dataclass(frozen=True, slots=True)
class Point:
    """What a solver in floating point calls a solution, rounded to integers.

    Args:
        values: of the variables, in order.
        least: the least element that it stands for.
        keeps_rows: whether it is a point of the model in exact arithmetic.
        genuine: whether ``least`` is the least element of a cycle of the cell.
    """

    values: tuple[int, ...]
    least: int
    keeps_rows: bool
    genuine: bool


@dataclass(frozen=True, slots=True)
class IntegerSolver:
    """One integer programming solver of OR-Tools.

    Args:
        name: ``scip`` or ``highs``.

    Raises:
        InputError: another name.
    """

    name: str
    kind: Kind = Kind.MIP

    def __post_init__(self) -> None:
        if self.name not in _NAMES:
            raise InputError("solver", self.name, " or ".join(_NAMES))

    @property
    def version(self) -> str:
        """The library's version."""
        try:
            return f"{self.name} of ortools {version('ortools')}"
        except PackageNotFoundError:
            return f"{self.name} of ortools (absent)"

    @property
    def abilities(self) -> Abilities:
        """It is not exact, and every solution starts a new search."""
        return Abilities(incremental=False, proofs=False, assumptions=False, exact=False)

    def least_elements(self, encoding: LinearModel) -> Iterator[int]:
        """Yield the least elements of cycles that the solver finds; the end proves nothing.

        Raises:
            CapacityError: a number of the model is no exact double.
            MissingPartError: OR-Tools lacks the solver.
            UndecidedError: the solver ends without an answer.
        """
        for point in self.points(encoding):
            if point.genuine:
                yield point.least

    def points(self, encoding: LinearModel) -> Iterator[Point]:
        """Yield every claimed solution, false ones included, excluding its least element before the next.

        Excluding the least element of a false point loses nothing: exact iteration has shown that it is none.

        Raises:
            CapacityError: a number of the model is no exact double.
            MissingPartError: OR-Tools lacks the solver.
            UndecidedError: the solver ends without an answer, or claims an n_0 outside its range or one excluded.
        """
        model = encoding
        span = model.variables[model.least]
        seen: set[int] = set()
        while True:
            values = self._solved(model)
            if values is None:
                return
            least = model.decode(values)
            if not span.low <= least <= span.high:
                raise UndecidedError(f"{self.name} gives {least}, outside {span.low}..{span.high}")
            if least in seen:
                raise UndecidedError(f"{self.name} repeats {least}, which was excluded")
            yield Point(values, least, model.holds(values), _is_least(encoding, least))
            seen.add(least)
            model = model.excluding(least)

    def _solved(self, model: LinearModel) -> tuple[int, ...] | None:
        """Return a claimed solution, rounded, or None for a claim that there is none."""
        largest = model.largest()
        if largest > EXACT_IN_DOUBLES:
            raise CapacityError(self.name, f"the model has numbers of {largest.bit_length()} bits, more than 53")
        try:
            from ortools.linear_solver.python import model_builder  # noqa: PLC0415 - heavy; loaded when it is used
        except ImportError as problem:
            raise MissingPartError("OR-Tools", "install the package ortools") from problem
        solver = model_builder.Solver(self.name)
        if not solver.solver_is_supported():
            raise MissingPartError(self.name, "install a build of ortools that contains it")
        program, variables = _program(model_builder, model)
        status = solver.solve(program)
        known = model_builder.SolveStatus
        if status in (known.OPTIMAL, known.FEASIBLE):
            return tuple(round(solver.value(variable)) for variable in variables)
        if status == known.INFEASIBLE:
            return None
        raise UndecidedError(f"{self.name} ended with the status {status.name}")


def _program(library: Any, model: LinearModel) -> tuple[Any, list[Any]]:  # noqa: ANN401 - a module of OR-Tools
    """Return the model as OR-Tools keeps it, and its variables in order."""
    program = library.Model()
    variables = [program.new_int_var(each.low, each.high, each.name) for each in model.variables]
    infinity = float("inf")
    for row in model.rows:
        low = -infinity if row.low is None else row.low
        high = infinity if row.high is None else row.high
        total = library.LinearExpr.weighted_sum([variables[i] for i, _ in row.terms], [w for _, w in row.terms])
        program.add_linear_constraint(total, low, high)
    return program, variables


def _is_least(model: LinearModel, least: int) -> bool:
    cell = model.cell
    try:
        return Cycle(cell.multiplier, cell.offset, least, cell.length).lies_in(cell)
    except ContradictionError:
        return False


def BACK_ENDS() -> tuple[IntegerSolver, ...]:  # noqa: N802 - the room's scan looks for this name
    """Return both solvers."""
    return tuple(IntegerSolver(name) for name in _NAMES)
