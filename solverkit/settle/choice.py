"""Which method decides which cell: by estimated cost, then a second one of another family to confirm."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from functools import lru_cache
from math import inf
from typing import TYPE_CHECKING

from solverkit.errors import InputError
from solverkit.exact.bounds import EXACT_LENGTH, balanced_bound
from solverkit.findings import Evidence
from solverkit.registry import load, parts
from solverkit.settle.calibration import calibrated

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from solverkit.maps import Map
    from solverkit.methods import Family, Method
    from solverkit.window import Cell

__all__ = ["CONFIRM_LIMIT", "CONFIRM_SECONDS", "Batch", "Plan", "default_methods", "method_named", "plan"]

#: A second method that is expected to need more than this for a cell is left out, unless a budget allows it; one that
#: takes six times as long is ended, and the cell stays computed.
CONFIRM_SECONDS = 10.0
CONFIRM_LIMIT = 60.0
_MOST_CUTS = 64
# The values of solvers._contract.Kind, which loads python-sat.
_SOLVER_KINDS = ("cnf", "cp", "mip", "pb")


@lru_cache
def method_named(name: str) -> Method:
    """Return the method that an option or a record names.

    Raises:
        InputError: no such method.
    """
    engines = [part.name for part in parts("engines")]
    if name in engines:
        engine: Method = load("engines", name)
        return engine
    if name.partition("@")[0].partition(":")[0] in _SOLVER_KINDS:
        from solverkit.solvers._formula_method import formula_method  # noqa: PLC0415 - solvers load only when used

        return formula_method(name)
    raise InputError(
        "methods", name, ", ".join([*engines, "KIND:ENCODING@SOLVER with KIND " + " or ".join(_SOLVER_KINDS)])
    )


def default_methods() -> tuple[Method, ...]:
    """Return the methods that are chosen from when none are named: the engines that work, and the default encoding."""
    return (*(part.value for part in parts("engines") if not part.problem), method_named("cnf"))


@dataclass(frozen=True, slots=True)
class Batch:
    """Cells that one method decides together.

    Args:
        method: name of the method.
        cells: reduced, of positive elements, of one map.
        seconds: estimated computing time on one core.
        limit: seconds after which each piece is ended, or None; set for second methods.
    """

    method: str
    cells: tuple[Cell, ...]
    seconds: float
    limit: float | None = None


@dataclass(frozen=True, slots=True)
class Plan:
    """What is to be run, and what can't be.

    Args:
        batches: first methods before second ones, each costliest first.
        refused: cell -> why no method takes it.
    """

    batches: tuple[Batch, ...]
    refused: Mapping[Cell, str]


def plan(
    cells: Sequence[Cell],
    done: Mapping[Cell, frozenset[Family]],
    failed: frozenset[tuple[str, Cell]],
    *,
    methods: Sequence[Method] | None = None,
    evidence: Evidence = Evidence.CONFIRMED,
    confirm_seconds: float = CONFIRM_SECONDS,
    names_done: Mapping[Cell, frozenset[str]] | None = None,
) -> Plan:
    """Choose a method for every cell that still needs one.

    Args:
        cells: reduced, of positive elements, without repeats.
        done: cell -> families that have already given a complete list.
        failed: (method name, cell) pairs not to be tried again.
        methods: when given, every one of them runs on every cell that it takes.
        evidence: below ``CONFIRMED`` no second method is chosen.
        confirm_seconds: longest estimated time of a second method for one cell.
        names_done: cell -> names of the methods with a complete list; needed with ``methods``.
    """
    refused: dict[Cell, str] = {}
    chosen: dict[str, list[Cell]] = defaultdict(list)
    confirming: dict[str, list[Cell]] = defaultdict(list)
    pool = tuple(methods) if methods is not None else default_methods()
    if methods is not None:
        for cell in cells:
            for method in pool:
                if method.name in (names_done or {}).get(cell, ()) or (method.name, cell) in failed:
                    continue
                if reason := method.refusal(cell):
                    refused[cell] = f"{method.name}: {reason}"
                else:
                    chosen[method.name].append(cell)
    else:
        fresh = [cell for cell in cells if not done.get(cell)]
        first: dict[Cell, Method] = {}
        for group in _by_map(fresh).values():
            first.update(_primary(group, pool, failed, refused))
        for cell, method in first.items():
            chosen[method.name].append(cell)
        if evidence >= Evidence.CONFIRMED:
            for cell in cells:
                families = done.get(cell) or (frozenset({first[cell].family}) if cell in first else frozenset())
                if len(families) == 1:
                    others = [m for m in pool if m.family not in families]
                    cost, second = _cheapest(cell, others, failed)
                    if second is not None and cost <= confirm_seconds:
                        confirming[second.name].append(cell)
    return Plan((*_batches(chosen), *_batches(confirming, CONFIRM_LIMIT)), refused)


def _batches(chosen: Mapping[str, list[Cell]], limit: float | None = None) -> list[Batch]:
    batches = [
        Batch(name, group, calibrated(method_named(name), group), limit)
        for name, members in chosen.items()
        for group in method_named(name).batches(members)
    ]
    return sorted(batches, key=lambda batch: (-batch.seconds, batch.method, batch.cells))


def _by_map(cells: Sequence[Cell]) -> dict[Map, list[Cell]]:
    groups: dict[Map, list[Cell]] = defaultdict(list)
    for cell in cells:
        groups[cell.map].append(cell)
    return groups


def _cheapest(
    cell: Cell, methods: Sequence[Method], failed: frozenset[tuple[str, Cell]]
) -> tuple[float, Method | None]:
    best: tuple[float, Method | None] = (inf, None)
    for method in methods:
        if (method.name, cell) not in failed and method.refusal(cell) is None:
            cost = calibrated(method, (cell,))
            if cost < best[0]:
                best = (cost, method)
    return best


def _primary(
    group: list[Cell], pool: Sequence[Method], failed: frozenset[tuple[str, Cell]], refused: dict[Cell, str]
) -> dict[Cell, Method]:
    """Choose the first method for cells of one map.

    One sweep serves all its cells and costs what the largest bound costs. So with the cells in order of their bounds,
    largest first, some head of the list goes to the methods that work cell by cell, and the tail to one sweep.
    """
    sweeps = [m for m in pool if m.name == "sweep"]
    others = [m for m in pool if m.name != "sweep"]
    ordered = sorted(group, key=lambda c: (-_range(c), c))
    result: dict[Cell, Method] = {}
    takes = [c for c in ordered if sweeps and ("sweep", c) not in failed and sweeps[0].refusal(c) is None]
    swept = takes
    head: list[Cell] = []
    best = calibrated(sweeps[0], tuple(takes)) if takes else inf
    if takes and best > 0.05:
        spent, cut = 0.0, 0
        for i, cell in enumerate(takes[:_MOST_CUTS]):
            cost, _ = _cheapest(cell, others, failed)
            spent += cost
            if spent >= best:
                break
            rest = takes[i + 1 :]
            total = spent + (calibrated(sweeps[0], tuple(rest)) if rest else 0.0)
            if total < best:
                best, cut = total, i + 1
        head, swept = takes[:cut], takes[cut:]
    for cell in swept:
        result[cell] = sweeps[0]
    without = set(ordered) - set(takes)
    for cell in [*head, *(c for c in ordered if c in without)]:
        _, method = _cheapest(cell, others, failed)
        if method is None:
            reasons = [f"{m.name}: {m.refusal(cell) or 'failed before'}" for m in pool]
            refused[cell] = "; ".join(reasons)
        else:
            result[cell] = method
    return result


def _range(cell: Cell) -> int:
    return balanced_bound(cell) if cell.length <= EXACT_LENGTH else 1 << 62
