"""Running a trial: which runs there are, in which order, each in a process of its own, written down at once.

Every repeat visits all cells in an order of its own and runs all pairs on a cell one after the other; repeats come in
twos, the second visiting the pairs of each cell in the reverse order of the first, so that a machine that grows slower
or faster favours no pair. The seed decides these orders and nothing else: most solver libraries take no seed, and the
formula stays the same.

Before it is timed, a process lists the cycles of one tiny cell, so that loading libraries does not count.
"""

from __future__ import annotations

import random
import time
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from solverkit.errors import InputError
from solverkit.numerals import json_integer
from solverkit.registry import load
from solverkit.solvers._formula_method import FormulaMethod
from solverkit.solvers._isolation import SolverProcess
from solverkit.trials.agreement import Expected, disagreement, expected
from solverkit.trials.results import ResultFile, run_key
from solverkit.window import Cell

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

    from cycle_encodings._formula import Encoder
    from solverkit.solvers._contract import BackEnd
    from solverkit.trials.cells import BenchmarkCell

__all__ = ["REFUSED", "Limits", "Pair", "Run", "matched", "order", "perform"]

#: Status of a run that was not begun, beside those of `Ending`.
REFUSED = "refused"
_WARM_UP = Cell(3, 1, 2, 1)
_WARM_UP_SECONDS = 120.0


@dataclass(frozen=True, slots=True, order=True)
class Pair:
    """An encoding with a solver that takes it."""

    encoding: str
    solver: str

    @property
    def name(self) -> str:
        """``ENCODING@SOLVER``."""
        return f"{self.encoding}@{self.solver}"


@dataclass(frozen=True, slots=True)
class Limits:
    """What one run may use.

    Args:
        seconds: from the request to the complete list.
        memory: bytes of address space, or None.
    """

    seconds: float
    memory: int | None = None


@dataclass(frozen=True, slots=True)
class Run:
    """One run of a trial; ``repeat`` counts from 0."""

    cell: BenchmarkCell
    pair: Pair
    repeat: int


def matched(encodings: Sequence[str], solvers: Sequence[str]) -> tuple[list[Pair], list[tuple[Pair, str]]]:
    """Return the pairs whose form matches, and the others with the reason.

    Raises:
        InputError: a name that is unknown or comes twice, or no pair that matches.
    """
    for option, names in (("--encodings", encodings), ("--solvers", solvers)):
        if len(set(names)) < len(names):
            raise InputError(option, ",".join(names), "each name once")
    found: list[Pair] = []
    others: list[tuple[Pair, str]] = []
    for encoding in encodings:
        encoder: Encoder = load("encodings", encoding)
        for solver in solvers:
            back_end: BackEnd = load("solvers", solver)
            if back_end.kind.form == encoder.form:
                found.append(Pair(encoding, solver))
            else:
                reason = f"{solver} takes the form {back_end.kind.form}, {encoding} is of the form {encoder.form}"
                others.append((Pair(encoding, solver), reason))
    if not found:
        raise InputError("--solvers", ",".join(solvers), f"a solver that takes {', '.join(encodings)}; see catalog")
    return found, others


def order(cells: Sequence[BenchmarkCell], pairs: Sequence[Pair], repeats: int, seed: int) -> Iterator[Run]:
    """Yield every run once, in the order that the module describes; the same arguments give the same order."""
    for repeat in range(repeats):
        visits = list(range(len(cells)))
        random.Random(f"cells {seed} {repeat}").shuffle(visits)  # noqa: S311 - an order, not a secret
        for index in visits:
            sequence = list(pairs)
            random.Random(f"pairs {seed} {repeat // 2} {index}").shuffle(sequence)  # noqa: S311
            for pair in reversed(sequence) if repeat % 2 else sequence:
                yield Run(cells[index], pair, repeat)


def perform(
    runs: Sequence[Run],
    limits: Limits,
    seed: int,
    results: ResultFile,
    *,
    shout: Callable[[str], None],
    advance: Callable[[], None] = lambda: None,
    reference: Callable[[Cell], Expected | None] = expected,
) -> list[dict[str, Any]]:
    """Return the records of ``runs``, in order; those that ``results`` holds are not run again.

    Args:
        runs: in the order wanted.
        limits: of each run.
        seed: of the order, for the record.
        results: where records are kept.
        shout: called with each disagreement, in words.
        advance: called after each run.
        reference: cell -> what the arithmetic engines say of it.

    Raises:
        FileError: a result can't be written.
    """
    known: dict[Cell, Expected | None] = {}
    records = []
    for run in runs:
        cell = run.cell.cell
        record = _identity(run, limits)
        before = results.record(run_key(record))
        if before is None:
            if cell not in known:
                known[cell] = reference(cell)
            record |= {"seed": seed, "grade": run.cell.grade, **_measured(run, limits, known[cell])}
            results.append(record)
        else:
            record = before
        if record["disagreement"]:
            shout(f"{run.pair.name}: {record['disagreement']}")
        records.append(record)
        advance()
    return records


def _identity(run: Run, limits: Limits) -> dict[str, Any]:
    cell = run.cell.cell
    return {
        "q": json_integer(cell.multiplier),
        "d": json_integer(cell.offset),
        "k": cell.length,
        "x": cell.odd,
        "above": json_integer(cell.above),
        "encoding": run.pair.encoding,
        "solver": run.pair.solver,
        "repeat": run.repeat,
        "limit_s": limits.seconds,
        "memory": limits.memory,
    }


def _measured(run: Run, limits: Limits, reference: Expected | None) -> dict[str, Any]:
    cell = run.cell.cell
    refusal = FormulaMethod(run.pair.encoding, run.pair.solver).refusal(cell)
    if refusal is not None:
        return {
            "status": REFUSED,
            "reason": refusal,
            "found": 0,
            "wall_s": 0.0,
            "disagreement": "",
        }
    process = SolverProcess()
    try:
        process.answer(_WARM_UP, run.pair.encoding, run.pair.solver, _WARM_UP_SECONDS, limits.memory)
        begun = time.perf_counter()
        answer = process.answer(cell, run.pair.encoding, run.pair.solver, limits.seconds, limits.memory)
        seconds = time.perf_counter() - begun
    finally:
        process.close()
    problem = disagreement(cell, answer.least, answer.complete, reference)
    if not problem and answer.complete and run.cell.cycles not in {None, len(answer.least)}:
        problem = f"{cell.map} k = {cell.length}, x = {cell.odd}: {len(answer.least)} cycles, {run.cell.cycles} on file"
    return {
        "status": answer.ending.value,
        "reason": answer.reason,
        "found": len(answer.least),
        "wall_s": round(seconds, 6),
        **{{"solver": "version"}.get(key, key): value for key, value in answer.statistics.items()},
        "checked": None if reference is None else reference.method,
        "disagreement": problem,
    }
