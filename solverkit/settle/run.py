"""Settling a window: triage, execution with every result recorded at once, and the findings."""

from __future__ import annotations

import time
from collections import defaultdict
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING, Protocol

from solverkit.errors import DossierError
from solverkit.findings import CellFinding, Cycle, Evidence, Verdict
from solverkit.ledger.ledger import Ledger, batch_key
from solverkit.methods import LIST_AT_MOST, Budget, merged
from solverkit.settle.calibration import calibrated, factors, measure
from solverkit.settle.choice import CONFIRM_LIMIT, CONFIRM_SECONDS, Batch, default_methods, method_named, plan
from solverkit.settle.pool import Order, executor, run_orders, usable_cores
from solverkit.settle.regions import RegionFinding, RegionWork, conclude_region, region_work
from solverkit.settle.triage import Criterion, Triage, triage
from solverkit.settle.verdicts import conclude, lists_by_cell
from solverkit.window_file import window_digest, window_table

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Sequence

    from solverkit.methods import Family, Listing, Piece, PieceResult
    from solverkit.window import Cell, Window

__all__ = ["Progress", "Settings", "Settlement", "default_dossier", "settle"]

_PIECE_SECONDS = 4.0
_ORDER_SECONDS = 0.5
_ORDER_PIECES = 64
_SERIAL_SECONDS = 1.5
_MOST_ROUNDS = 5
_MEASURE_SECONDS = 10.0
_REGION = "sweep of a region"


@dataclass(frozen=True, slots=True)
class Settings:
    """How a window is settled.

    Args:
        evidence: level asked for; None asks for a second method wherever it fits.
        methods: names of the methods to use on every cell, or None to choose.
        jobs: number of processes; None uses the cores there are.
        cluster: address of a Dask scheduler, or None.
        budget: seconds that one method may spend on one cell, or None.
        memory: bytes that one worker may use, or None.
        list_at_most: a cell with more cycles reports their exact number and a sample.
    """

    evidence: Evidence | None = None
    methods: tuple[str, ...] | None = None
    jobs: int | None = None
    cluster: str | None = None
    budget: float | None = None
    memory: int | None = None
    list_at_most: int = LIST_AT_MOST


class Progress(Protocol):
    """What `settle` tells of its progress; units are estimated seconds of computing."""

    def planned(self, seconds: float, cells: int) -> None:
        """More work was planned."""

    def advanced(self, seconds: float, note: str) -> None:
        """Some of it is done."""


class _Silent:
    def planned(self, seconds: float, cells: int) -> None:
        pass

    def advanced(self, seconds: float, note: str) -> None:
        pass


@dataclass(frozen=True, slots=True)
class Settlement:
    """The findings on a window.

    Args:
        triage: what arithmetic excluded, and the live cells.
        findings: one for each live cell, in the order of the triage.
        evidence_asked: the level asked for, or None.
        seconds: wall-clock time of this run.
        resumed: number of complete lists that were already on record.
        regions: one finding for each side whose live cells are too many to list.
    """

    triage: Triage
    findings: tuple[CellFinding, ...]
    evidence_asked: Evidence | None = None
    seconds: float = 0.0
    resumed: int = 0
    regions: tuple[RegionFinding, ...] = ()

    @property
    def window(self) -> Window:
        """The window."""
        return self.triage.window

    @property
    def cycles(self) -> tuple[Cycle, ...]:
        """All cycles, in the order of published lists."""
        found: tuple[CellFinding | RegionFinding, ...] = (*self.findings, *self.regions)
        return tuple(sorted((c for f in found for c in f.cycles), key=Cycle.sort_key))

    @property
    def open_cells(self) -> tuple[CellFinding, ...]:
        """The findings that are open."""
        return tuple(f for f in self.findings if f.verdict is Verdict.OPEN)

    @property
    def contradictions(self) -> tuple[CellFinding, ...]:
        """The findings on which two methods differ."""
        return tuple(f for f in self.findings if f.contradiction)

    @property
    def short_of_evidence(self) -> tuple[CellFinding, ...]:
        """The settled findings whose evidence is below the level asked for."""
        asked = self.evidence_asked
        return tuple(f for f in self.findings if asked and f.evidence is not None and f.evidence < asked)

    @property
    def complete(self) -> bool:
        """Whether every cell of the window is settled."""
        return not self.open_cells and all(region.verdict is not Verdict.OPEN for region in self.regions)

    @property
    def reaches_evidence(self) -> bool:
        """Whether no settled part falls short of the evidence asked for."""
        asked = self.evidence_asked
        weak = asked is not None and any(r.evidence is not None and r.evidence < asked for r in self.regions)
        return not weak and not self.short_of_evidence

    @property
    def exit_status(self) -> int:
        """What the command line answers."""
        if self.contradictions:
            return 5
        return 0 if self.complete and self.reaches_evidence else 3


@dataclass(slots=True)
class _State:
    """What is known while settling."""

    window: Window
    ledger: Ledger
    settings: Settings
    listings: dict[tuple[str, Cell], Listing] = field(default_factory=dict)
    failed: set[tuple[str, Cell]] = field(default_factory=set)
    refused: dict[Cell, str] = field(default_factory=dict)

    def take(self, listings: Iterable[Listing]) -> None:
        for entry in listings:
            key = (entry.method, entry.cell)
            if entry.complete or key not in self.listings or not self.listings[key].complete:
                self.listings[key] = entry
            if not entry.complete:
                self.failed.add(key)

    def done(self) -> tuple[dict[Cell, frozenset[Family]], dict[Cell, frozenset[str]]]:
        families: dict[Cell, set[Family]] = defaultdict(set)
        names: dict[Cell, set[str]] = defaultdict(set)
        for (name, cell), entry in self.listings.items():
            if entry.complete:
                families[cell].add(method_named(name).family)
                names[cell].add(name)
        return ({c: frozenset(v) for c, v in families.items()}, {c: frozenset(v) for c, v in names.items()})


def settle(
    window: Window, dossier: Path, settings: Settings | None = None, progress: Progress | None = None
) -> Settlement:
    """Decide every live cell of ``window`` and record everything in ``dossier``.

    Args:
        window: the window.
        dossier: folder; made when absent, continued when it holds the same window.
        settings: how; the defaults when None.
        progress: told of the progress.

    Returns:
        The findings; cells that no method could decide within its limits are open, with the reason.

    Raises:
        DossierError: the folder can't be used, or holds another window.
    """
    begun = time.perf_counter()
    settings = settings or Settings()
    examined = triage(window, Criterion.BALANCED)
    cells = _reduced_cells(examined)
    with _opened(window, dossier) as ledger:
        state = _State(window, ledger, settings)
        state.take(ledger.listings())
        state.failed = _not_again(state)
        resumed = sum(entry.complete for entry in state.listings.values())
        progress = progress or _Silent()
        _decide(cells, state, progress)
        lists = lists_by_cell(list(state.listings.values()))
        refused = {(c.multiplier, c.offset, c.length, c.odd): reason for c, reason in state.refused.items()}
        findings = tuple(conclude(window, live, lists, refused, settings.list_at_most) for live in examined.cells)
        regions = tuple(_sweep_region(region_work(window, each), state, progress) for each in examined.regions)
    return Settlement(examined, findings, settings.evidence, time.perf_counter() - begun, resumed, regions)


def _opened(window: Window, dossier: Path) -> Ledger:
    try:
        dossier.mkdir(parents=True, exist_ok=True)
    except OSError as problem:
        raise DossierError(
            dossier, f"can't be made ({problem.strerror}); name another folder with --dossier"
        ) from problem
    ledger = Ledger(dossier / "ledger.sqlite")
    try:
        ledger.bind(window, window_digest(window), window_table(window))
    except BaseException:
        ledger.close()
        raise
    return ledger


def _not_again(state: _State) -> set[tuple[str, Cell]]:
    """Return the second methods that were ended before and are not worth another try.

    A budget or a level of evidence that is asked for makes them worth it; so does a cell that has no complete list yet.
    """
    if state.settings.budget is not None or state.settings.evidence is not None:
        return set()
    decided = {cell for (_, cell), entry in state.listings.items() if entry.complete}
    return {(method, cell) for method, cell in state.failed if cell in decided}


def _reduced_cells(examined: Triage) -> tuple[Cell, ...]:
    """Return the reduced cells without repeats, each with the least bound that any of its originals asks for."""
    least: dict[tuple[int, int, int, int], Cell] = {}
    for live in examined.cells:
        cell = live.reduction.cell
        key = (cell.multiplier, cell.offset, cell.length, cell.odd)
        if key not in least or cell.above < least[key].above:
            least[key] = cell
    return tuple(sorted(least.values()))


def _decide(cells: Sequence[Cell], state: _State, progress: Progress) -> None:
    settings = state.settings
    methods = None if settings.methods is None else tuple(method_named(name) for name in settings.methods)
    wanted = set(cells)
    decided = {cell for (_, cell), entry in state.listings.items() if entry.complete}
    unfinished = [
        Batch(
            method,
            members,
            calibrated(method_named(method), members),
            CONFIRM_LIMIT if decided.issuperset(members) else None,
        )
        for _, method, members in state.ledger.batches()
        if method != _REGION
        and (settings.methods is None or method in settings.methods)
        and wanted.issuperset(members)
        and any(not _complete(state, method, cell) and (method, cell) not in state.failed for cell in members)
    ]
    if unfinished:
        _execute(unfinished, state, progress)
    for _ in range(_MOST_ROUNDS):
        families, names = state.done()
        chosen = plan(
            cells,
            families,
            frozenset(state.failed),
            methods=methods,
            evidence=settings.evidence or Evidence.CONFIRMED,
            confirm_seconds=settings.budget or CONFIRM_SECONDS,
            names_done=names,
        )
        if sum(batch.seconds for batch in chosen.batches) > _MEASURE_SECONDS and not factors():
            # The first long run on this machine: two seconds of timing make the choice and the progress bar honest.
            measure(methods or default_methods())
            continue
        state.refused.update(chosen.refused)
        if not chosen.batches:
            return
        _execute(chosen.batches, state, progress)


def _complete(state: _State, method: str, cell: Cell) -> bool:
    entry = state.listings.get((method, cell))
    return entry is not None and entry.complete


def _execute(batches: Sequence[Batch], state: _State, progress: Progress) -> None:
    """Run batches, recording each piece at once and each batch's lists with its last piece."""
    settings = state.settings
    work: dict[str, tuple[Batch, list[Piece], dict[int, PieceResult]]] = {}
    queue: list[tuple[float, Piece, Budget]] = []
    keys: dict[tuple[str, tuple[Cell, ...]], str] = {}
    for batch in batches:
        method = method_named(batch.method)
        key = batch_key(batch.method, batch.cells)
        pieces = method.pieces(batch.cells, _PIECE_SECONDS)
        state.ledger.add_batch(key, batch.method, batch.cells, pieces)
        have = {n: r for n, r in state.ledger.results(key, pieces).items() if r.complete}
        work[key] = (batch, pieces, have)
        keys[batch.method, batch.cells] = key
        budget = _budget(batch, len(pieces), settings)
        queue += [(batch.seconds / len(pieces), p, budget) for p in pieces if p.index not in have]
        if len(have) == len(pieces):
            state.take(_recorded(state, key, work[key], None))
    for result in _results(queue, settings, progress, sum(len(batch.cells) for batch in batches)):
        key = keys[result.piece.method, result.piece.cells]
        work[key][2][result.piece.index] = result
        state.take(_recorded(state, key, work[key], result))


def _results(
    queue: Sequence[tuple[float, Piece, Budget]], settings: Settings, progress: Progress, cells: int
) -> Iterator[PieceResult]:
    """Run pieces with their estimated seconds and budgets; yield the results as they come."""
    estimated = sum(seconds for seconds, _, _ in queue)
    progress.planned(estimated, cells)
    jobs = settings.jobs or usable_cores()
    if settings.cluster is None and estimated < _SERIAL_SECONDS:
        jobs = 1
    expected = {(p.method, p.cells, p.index): seconds for seconds, p, _ in queue}
    for results in run_orders(_orders(queue), lambda: executor(jobs, settings.cluster), 3 * jobs):
        for result in results:
            yield result
            piece = result.piece
            progress.advanced(expected[piece.method, piece.cells, piece.index], piece.method)


def _sweep_region(work: RegionWork, state: _State, progress: Progress) -> RegionFinding:
    """Sweep a region, recording each piece at once; pieces on record are not run again."""
    window, settings = state.window, state.settings
    if work.refusal is not None or (settings.methods is not None and "sweep" not in settings.methods):
        refusal = work.refusal or "only a sweep settles cells that are too many to list"
        return conclude_region(window, replace(work, refusal=refusal), [], 1)
    pieces = work.pieces(_PIECE_SECONDS)
    key = batch_key(_REGION, (work.cell,))
    state.ledger.add_batch(key, _REGION, (work.cell,), pieces)
    have = {n: r for n, r in state.ledger.results(key, pieces).items() if r.complete}
    share = work.seconds / len(pieces)
    limit = _region_limit(settings, share)
    queue = [(share, piece, Budget(limit, settings.memory)) for piece in pieces if piece.index not in have]
    for result in _results(queue, settings, progress, work.region.count):
        have[result.piece.index] = result
        state.ledger.add_result(key, result)
    return conclude_region(window, work, list(have.values()), len(pieces))


def _recorded(
    state: _State,
    key: str,
    work: tuple[Batch, list[Piece], dict[int, PieceResult]],
    result: PieceResult | None,
) -> list[Listing]:
    """Record a result; return the lists of its batch when that was the last piece."""
    batch, pieces, have = work
    listings = merged(batch.cells, list(have.values())) if len(have) == len(pieces) else []
    state.ledger.add_result(key, result or have[0], listings)
    return listings


def _orders(queue: Sequence[tuple[float, Piece, Budget]]) -> Iterator[Order]:
    load: list[tuple[Piece, Budget]] = []
    seconds = 0.0
    for estimate, piece, budget in queue:
        load.append((piece, budget))
        seconds += estimate
        if seconds >= _ORDER_SECONDS or len(load) == _ORDER_PIECES:
            yield Order(tuple(load))
            load, seconds = [], 0.0
    if load:
        yield Order(tuple(load))


def _budget(batch: Batch, pieces: int, settings: Settings) -> Budget:
    seconds = batch.limit
    if settings.budget is not None:
        seconds = max(settings.budget * len(batch.cells) / pieces, 1e-3)
    return Budget(seconds, settings.memory, settings.list_at_most)


def _region_limit(settings: Settings, share: float) -> float | None:
    """Return the time limit of one piece: a budget is for one cell, so it lets a piece of many have its share."""
    return None if settings.budget is None else max(settings.budget, 1.0, 2 * share)


def default_dossier(window: Window) -> Path:
    """Return the folder that a window's dossier goes to when none is named: it depends on the window alone."""
    return Path(f"dossier-{window_digest(window)[:12]}")
