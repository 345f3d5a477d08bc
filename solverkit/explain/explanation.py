"""The explanation of one cell, computed in a process of its own so that a time limit is a time limit."""

from __future__ import annotations

import contextlib
import multiprocessing
import time
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

from solverkit.errors import ContradictionError
from solverkit.explain.arithmetic import Exclusion, arithmetic_exclusion
from solverkit.findings import Cycle, Verdict
from solverkit.solvers._isolation import become_solver_child

if TYPE_CHECKING:
    from multiprocessing.connection import Connection

    from solverkit.explain.cores import Core, Oracle
    from solverkit.explain.reach import Reach
    from solverkit.window import Cell

__all__ = ["Explained", "Explanation", "Relaxation", "explained"]


@dataclass(frozen=True, slots=True)
class Explained:
    """A minimal core with its reach.

    Args:
        core: the core.
        reach: what it proves beyond the bounds of the cell; None when time ran out before.
        every_number: whether it excludes all numbers, or only those below the width.
    """

    core: Core
    reach: Reach | None
    every_number: bool


@dataclass(frozen=True, slots=True)
class Relaxation:
    """What is admitted when one condition is left out of a cell that holds cycles.

    Args:
        group: the condition.
        least: a first element that then is admitted as well, or None when there is none below the width.
    """

    group: str
    least: int | None


@dataclass(frozen=True, slots=True)
class Explanation:
    """Why a cell is empty, or what it holds.

    Args:
        cell: of positive elements.
        status: none, found or open.
        exclusion: the reason of arithmetic alone, or None.
        cores: minimal cores, smallest first; when the cell is empty.
        cycles: by least element; when it is not.
        relaxations: what one condition less admits, beside the cycles.
        width: w; the formula speaks of first elements below 2^w. None when no formula was needed.
        complete: whether nothing that was asked for is missing.
        reason: why something is missing, or empty.
    """

    cell: Cell
    status: Verdict
    exclusion: Exclusion | None = None
    cores: tuple[Explained, ...] = ()
    cycles: tuple[Cycle, ...] = ()
    relaxations: tuple[Relaxation, ...] = ()
    width: int | None = None
    complete: bool = True
    reason: str = ""


@dataclass(slots=True)
class _Progress:
    """What has arrived from the child so far."""

    exclusion: Exclusion | None
    width: int | None = None
    empty: bool = False
    listed: bool = False
    least: list[int] = field(default_factory=list)
    cores: list[Explained] = field(default_factory=list)
    relaxations: list[Relaxation] = field(default_factory=list)


def explained(cell: Cell, seconds: float, *, all_cores: bool = False) -> Explanation:
    """Return why a cell is empty, or its cycles.

    Args:
        cell: of positive elements.
        seconds: time limit; what is established by then is returned, incomplete.
        all_cores: all minimal cores instead of the smallest ones; also where arithmetic alone excludes the cell.

    Raises:
        ContradictionError: what the solver found does not stand direct computation.
    """
    exclusion = arithmetic_exclusion(cell)
    progress = _Progress(exclusion)
    if exclusion is not None and not all_cores:
        return _concluded(cell, progress, "")
    context = multiprocessing.get_context("spawn")
    ours, theirs = context.Pipe()
    process = context.Process(target=_serve, args=(theirs, cell, all_cores), daemon=True)
    deadline = time.monotonic() + seconds
    process.start()
    theirs.close()
    try:
        reason = _received(ours, progress, deadline, seconds)
    finally:
        process.kill()
        process.join()
        process.close()
        ours.close()
    return _concluded(cell, progress, reason)


def _received(pipe: Connection, progress: _Progress, deadline: float, seconds: float) -> str:
    """Take what the child sends until it is done or time is up; return why something is missing, or nothing."""
    try:
        while pipe.poll(max(0.0, deadline - time.monotonic())):
            kind, content = pipe.recv()
            if kind == "done":
                return ""
            if kind == "contradiction":
                raise ContradictionError(content)
            if kind == "failed":
                return str(content)
            if kind == "width":
                progress.width = content
            elif kind == "empty":
                progress.empty = True
            elif kind == "listed":
                progress.listed = True
            elif kind == "least":
                progress.least.append(content)
            elif kind == "core":
                progress.cores.append(content)
            elif kind == "reach":
                progress.cores[-1] = content
            else:
                progress.relaxations.append(content)
    except EOFError:
        return "the solver process ended early"
    return f"{seconds:g} s were not enough"


def _concluded(cell: Cell, progress: _Progress, reason: str) -> Explanation:
    cycles = tuple(Cycle(cell.multiplier, cell.offset, least, cell.length) for least in sorted(progress.least))
    for cycle in cycles:
        if not cycle.lies_in(cell):
            raise ContradictionError(f"{cycle.least} is no cycle of {cell}")
    if cycles and progress.exclusion is not None:
        raise ContradictionError(f"arithmetic excludes {cell}, but {cycles[0].least} is a cycle of it")
    if cycles:
        status = Verdict.FOUND
    elif progress.empty or progress.exclusion is not None:
        status = Verdict.NONE
    else:
        status = Verdict.OPEN
    if cycles and not progress.listed:
        reason = f"{reason}, there may be more cycles"
    return Explanation(
        cell,
        status,
        progress.exclusion,
        tuple(sorted(progress.cores, key=_rank)),
        cycles,
        tuple(progress.relaxations),
        progress.width,
        not reason,
        reason,
    )


def _rank(explained: Explained) -> tuple[int, list[int]]:
    """Return what cores are sorted by: size, then the order of their conditions."""
    from solverkit.explain.cores import GROUPS  # noqa: PLC0415 - loads python-sat, as the core's class does

    return len(explained.core.groups), [GROUPS.index(group) for group in explained.core.groups]


def _serve(pipe: Connection, cell: Cell, all_cores: bool) -> None:
    become_solver_child()
    with contextlib.suppress(BrokenPipeError, ConnectionResetError):
        try:
            _work(pipe, cell, all_cores=all_cores)
        except ContradictionError as problem:
            pipe.send(("contradiction", str(problem)))
        except BrokenPipeError:
            raise
        except Exception as problem:  # noqa: BLE001 - any failure of a solver leaves the rest open
            pipe.send(("failed", f"{type(problem).__name__}: {problem}"))


def _work(pipe: Connection, cell: Cell, *, all_cores: bool) -> None:
    from cycle_encodings.grouped import ENCODING  # noqa: PLC0415 - python-sat loads in the child only
    from solverkit.explain.cores import GROUPS, Oracle, minimal_cores  # noqa: PLC0415
    from solverkit.explain.reach import reach_of, speaks_of_every_number  # noqa: PLC0415

    encoding = ENCODING.encode(cell)
    width = len(encoding.least_bits)
    pipe.send(("width", width))
    with Oracle(encoding) as oracle:
        first = oracle.elements(GROUPS)
        if first is not None:
            _list_cycles(pipe, oracle, first)
            pipe.send(("done", None))
            return
        pipe.send(("empty", None))
        fewest: int | None = None
        for core in minimal_cores(oracle):
            if fewest is not None and len(core.groups) > fewest and not all_cores:
                break
            fewest = fewest or len(core.groups)
            every = speaks_of_every_number(cell, core.groups, width)
            pipe.send(("core", Explained(core, None, every)))
            reach = reach_of(oracle, core)
            # A smaller bound that serves as well may let the core speak of more numbers.
            every = every or speaks_of_every_number(replace(cell, above=reach.above), core.groups, width)
            if every and "upper bound" not in core.groups:
                reach = replace(reach, up_to=None)
            pipe.send(("reach", Explained(core, reach, every)))
    pipe.send(("done", None))


def _list_cycles(pipe: Connection, oracle: Oracle, first: tuple[int, ...] | None) -> None:
    """Send all cycles, then what one condition less admits beside them."""
    from solverkit.explain.cores import GROUPS  # noqa: PLC0415

    while first is not None:
        pipe.send(("least", first[0]))
        oracle.exclude(first[0])
        first = oracle.elements(GROUPS, within=True)
    pipe.send(("listed", None))
    for group in GROUPS[1:]:
        more = oracle.elements([name for name in GROUPS if name != group], within=True)
        pipe.send(("relaxation", Relaxation(group, None if more is None else more[0])))
