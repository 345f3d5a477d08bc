"""Clausal solvers of the python-sat library; which there are and what they can do is read from the library."""

from __future__ import annotations

import sys
from dataclasses import dataclass
from functools import lru_cache
from importlib.metadata import version
from typing import TYPE_CHECKING

from pysat.solvers import Solver, SolverNames

from solverkit.solvers._contract import Abilities, Kind

if TYPE_CHECKING:
    from collections.abc import Iterator

    from cycle_encodings._formula import Encoding

__all__ = ["BACK_ENDS", "ClausalSolver"]

# Kissat ends the whole process when a clause is added after solving.
_ONE_SHOT = ("kissat",)


@dataclass(frozen=True, slots=True)
class ClausalSolver:
    """One solver of python-sat.

    Args:
        name: as python-sat names it, such as ``cadical195``.
    """

    name: str
    kind: Kind = Kind.CNF

    @property
    def version(self) -> str:
        """The library's version."""
        return f"python-sat {version('python-sat')}"

    @property
    def abilities(self) -> Abilities:
        """Abilities, found by asking an empty solver."""
        return Abilities(self._incremental, _logs_proofs(self.name), assumptions=self._incremental)

    @property
    def _incremental(self) -> bool:
        return not self.name.startswith(_ONE_SHOT)

    def least_elements(self, encoding: Encoding) -> Iterator[int]:
        """Yield the least element of each model, blocking it before the next.

        Cubes are assumed one after another; the end is always a search without assumptions.
        """
        clauses = [list(clause) for clause in encoding.clauses]
        solver = Solver(name=self.name, bootstrap_with=clauses)
        try:
            for cube in (*(encoding.cubes if self._incremental else ()), None):
                while solver.solve(assumptions=[] if cube is None else [cube]):
                    least = encoding.decode(solver.get_model())
                    yield least
                    blocking = list(encoding.blocking(least))
                    if self._incremental:
                        solver.add_clause(blocking)
                    else:
                        solver.delete()
                        clauses.append(blocking)
                        solver = Solver(name=self.name, bootstrap_with=clauses)
                if cube is not None:
                    # Implied by the clauses, blocking ones included; stated, it need not be found again.
                    solver.add_clause([-cube])
        finally:
            solver.delete()


@lru_cache
def _logs_proofs(name: str) -> bool:
    # A solver that refuses leaves a half-made object behind, whose destructor complains: not worth showing.
    before, sys.unraisablehook = sys.unraisablehook, lambda _: None
    try:
        Solver(name=name, with_proof=True).delete()
    except (NotImplementedError, AttributeError):
        return False
    else:
        return True
    finally:
        sys.unraisablehook = before


def BACK_ENDS() -> tuple[ClausalSolver, ...]:  # noqa: N802 - the room's scan looks for this name
    """Return the solvers that this build of python-sat really has."""
    found = []
    for name in sorted(key for key in vars(SolverNames) if not key.startswith("_")):
        try:
            Solver(name=name).delete()
        except Exception:  # noqa: BLE001, S112 - python-sat raises various errors for solvers that a build lacks
            continue
        found.append(ClausalSolver(name))
    return tuple(found)
