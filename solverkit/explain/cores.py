"""Minimal cores over the condition groups of a cell.

A selector literal switches each group on. A set of groups that no n_0 meets and of which every proper subset is met is
a minimal core; what is left when a satisfiable set cannot grow is a correction set. Every core hits every correction
set, so minimum hitting sets of those found so far, tried one after another, give the cores smallest first.
Source: Reiter, Artif. Intell. 32 (1987) 57-95; Ignatiev, Previti, Liffiton & Marques-Silva, CP 2015, LNCS 9255.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from pysat.examples.hitman import Hitman
from pysat.solvers import Solver

from cycle_encodings.grouped import elements_of
from solverkit.errors import ContradictionError
from solverkit.exact.bounds import balanced_bound

if TYPE_CHECKING:
    from collections.abc import Collection, Iterator
    from types import TracebackType
    from typing import Self

    from cycle_encodings._formula import Encoding
    from solverkit.window import Cell

__all__ = ["GROUPS", "SOLVER", "Core", "Oracle", "condition_holds", "minimal_cores"]

#: The conditions of a cell, in the order in which cores name them.
GROUPS = ("step", "closing", "odd count", "order", "lower bound", "upper bound")
#: The solver that decides sets of groups.
SOLVER = "glucose4"


@dataclass(frozen=True, slots=True)
class Core:
    """A minimal core.

    Args:
        groups: conditions that exclude every first element together.
        witnesses: for each of them, in the same order, elements n_0 … n_k that meet all the others of the core.
    """

    groups: tuple[str, ...]
    witnesses: tuple[tuple[int, ...], ...]


def condition_holds(cell: Cell, group: str, elements: tuple[int, ...]) -> bool:
    """Tell whether n_0 … n_k meet one condition of the cell, in integers.

    >>> from solverkit.window import Cell
    >>> [condition_holds(Cell(3, 1, 2, 1), group, (1, 2, 1)) for group in ("step", "closing", "order")]
    [True, True, True]
    """
    least, last = elements[0], elements[-1]
    if group == "step":
        return list(elements) == cell.map.orbit(least, cell.length)
    if group == "closing":
        return least == last
    if group == "odd count":
        return sum(n & 1 for n in elements[:-1]) == cell.odd
    if group == "order":
        return all(n > least for n in elements[1:-1])
    return least > cell.above if group == "lower bound" else least <= balanced_bound(cell)


class Oracle:
    """One incremental solver that answers for any set of the groups of a grouped encoding.

    Args:
        encoding: of the grouped kind.
        solver: a python-sat solver that takes assumptions.
    """

    def __init__(self, encoding: Encoding, solver: str = SOLVER) -> None:
        self.encoding = encoding
        self._vast = _vast_orbits(encoding.cell, 2 * len(encoding.least_bits))
        self._solver = Solver(name=solver)
        self.selectors = {group: encoding.variables + 1 + i for i, group in enumerate(GROUPS)}
        for name, ranges in encoding.groups.items():
            guard = [-self.selectors[name]] if name in self.selectors else []
            for start, stop in ranges:
                for clause in encoding.clauses[start:stop]:
                    self._solver.add_clause([*guard, *clause])

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self._solver.delete()

    def elements(self, groups: Collection[str], *literals: int, within: bool = False) -> tuple[int, ...] | None:
        """Return elements n_0 … n_k that meet ``groups`` and the literals, or None when there are none.

        Args:
            groups: names of the conditions.
            literals: of the encoding, to hold as well; used with ``within``.
            within: n_0 is below 2^w; else a larger one may do.

        Raises:
            ContradictionError: the solver's elements do not meet a group, by direct computation.
        """
        if not within:
            for orbit in self._vast:
                if all(condition_holds(self.encoding.cell, group, orbit) for group in groups):
                    return orbit
        if not self._solver.solve(assumptions=[*(self.selectors[group] for group in groups), *literals]):
            return None
        found = elements_of(self.encoding, self._solver.get_model())
        for group in groups:
            if not condition_holds(self.encoding.cell, group, found):
                raise ContradictionError(f"{found[0]} does not meet the {group} of {self.encoding.cell}")
        return found

    def exclude(self, least: int) -> None:
        """Exclude the first element ``least`` from all answers to come."""
        self._solver.add_clause(list(self.encoding.blocking(least)))


def _vast_orbits(cell: Cell, bits: int) -> tuple[tuple[int, ...], ...]:
    """Return orbits of numbers of about ``bits`` + k bits that begin with odd steps only, and with x odd steps only.

    Each parity word is that of one class mod 2^k (Terras, Acta Arith. 30 (1976) 241-252). They show that conditions
    without closing and upper bound are met, where the least number to do so may be as large as 2^k.
    """
    orbits = []
    for odd in (cell.odd, cell.length):
        form = cell.map.affine("1" * odd + "0" * (cell.length - odd))
        start = -form.shift * pow(form.slope, -1, 1 << cell.length) % (1 << cell.length)
        orbits.append(tuple(cell.map.orbit(start + (1 << cell.length + bits), cell.length)))
    return tuple(orbits)


def minimal_cores(oracle: Oracle) -> Iterator[Core]:
    """Yield the minimal cores of a cell without cycles, smallest first, each once.

    Each is unsatisfiable as the solver says, and satisfiable without any one of its groups, with witnesses. At most
    2^6 sets of groups are tried, each once.
    """
    known: dict[frozenset[str], tuple[int, ...] | None] = {}

    def met(groups: Collection[str]) -> tuple[int, ...] | None:
        key = frozenset(groups)
        if key not in known:
            known[key] = oracle.elements([group for group in GROUPS if group in key])
        return known[key]

    with Hitman(solver="m22", htype="rc2") as hitting:
        hitting.hit(list(GROUPS))
        while (chosen := hitting.get()) is not None:
            grown = set(chosen)
            if met(grown) is None:
                groups = tuple(group for group in GROUPS if group in grown)
                witnesses = [met(grown - {group}) for group in groups]
                yield Core(groups, tuple(elements for elements in witnesses if elements is not None))
                hitting.block(list(groups))
                continue
            for group in GROUPS:
                if group not in grown and met({*grown, group}) is not None:
                    grown.add(group)
            hitting.hit([group for group in GROUPS if group not in grown])
