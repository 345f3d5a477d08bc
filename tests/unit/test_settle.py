"""Choice of methods, execution, verdicts."""

import json
import os
import signal
import subprocess
import sys
import time
from concurrent.futures.process import BrokenProcessPool
from dataclasses import replace

import pytest

from solverkit.errors import InputError, MissingPartError
from solverkit.findings import Evidence, Verdict
from solverkit.maps import Map
from solverkit.methods import Budget, Listing, Piece, PieceResult
from solverkit.numerals import Span
from solverkit.registry import parts
from solverkit.settle import choice, pool
from solverkit.settle import run as settle_run
from solverkit.settle.choice import method_named, plan
from solverkit.settle.pool import Order, SerialExecutor, run_orders
from solverkit.settle.run import Settings, settle
from solverkit.settle.triage import Criterion, count_cells, triage
from solverkit.settle.verdicts import conclude, lists_by_cell
from solverkit.shape import shape_from_table
from solverkit.solvers._formula_method import formula_method
from solverkit.window import Cell, Sign, Window
from tests.reference import cycles_by_iteration

BOTH = (Sign.POSITIVE, Sign.NEGATIVE)


def _triple(settlement):
    return [(c.least, c.length, c.gcd) for c in settlement.cycles]


class TestTriage:
    def test_reasons_and_live_cells_add_up_to_the_window(self):
        for window in (
            Window((Map(3, 1),), Span(1, 40), signs=BOTH),
            Window((Map(5, 35), Map(3, -7)), Span(3, 25), Span(2, 9), above=4, primitive=True, signs=BOTH),
        ):
            for criterion in Criterion:
                told = triage(window, criterion)
                assert told.total == count_cells(window)
                assert sum(told.excluded.values()) + told.live == told.total

    def test_the_balanced_bound_never_keeps_more(self):
        window = Window((Map(3, 29), Map(7, -5)), Span(1, 60))
        sharp, plain = triage(window), triage(window, Criterion.PRODUCT)
        kept = {live.cell for live in sharp.cells}
        assert kept < {live.cell for live in plain.cells}

    def test_a_side_with_too_many_cells_is_counted_only(self):
        window = Window((Map(3, -1),), Span(1, 60))
        listed = triage(window, Criterion.PRODUCT)
        counted = triage(window, Criterion.PRODUCT, list_limit=100)
        assert counted.cells == ()
        (region,) = counted.regions
        assert region.count == listed.live + listed.excluded["words"]
        assert counted.first_live() == listed.first_live() == (1, 1)

    def test_primitive_windows_keep_what_the_full_window_keeps_undivided(self):
        """The shortcut through residues against a look at every cell."""
        for map_ in (Map(3, 5), Map(3, -55), Map(5, 21), Map(7, -9), Map(3, 1)):
            window = Window((map_,), Span(2, 60), Span(2, 40), above=3, signs=BOTH)
            whole = [live for live in triage(window).cells if abs(live.reduction.factor) == 1]
            told = triage(replace(window, primitive=True))
            assert list(told.cells) == whole
            assert sum(told.excluded.values()) + told.live == told.total

    def test_vast_cells_are_decided_by_the_closed_interval(self):
        """Between U' and U of Eliahou's cell the balanced bound excludes what the product bound keeps."""
        window = Window((Map(3, 1),), Span(17087915, 17087915), Span(10781274, 10781274), above=25 * 10**13)
        assert triage(window, Criterion.PRODUCT).live == 1
        assert triage(window).live == 0
        assert triage(replace(window, above=2 * 10**14)).live == 1

    def test_many_maps_share_the_limit(self):
        window = Window(tuple(Map(3, d) for d in (1, 5, 35)), Span(1, 40))
        told = triage(window, list_limit=600)
        assert {region.side.map.offset for region in told.regions} == {5, 35}
        assert {live.cell.offset for live in told.cells} == {1}
        assert sum(told.excluded.values()) + told.live == told.total

    def test_primitive_windows_leave_out_cells_that_only_have_multiples(self):
        window = Window((Map(3, 5),), Span(2, 2), primitive=True)
        assert triage(window).excluded["imprimitive"] == 1
        assert triage(replace(window, primitive=False)).live == 1


class TestChoice:
    def test_unknown_methods_are_named(self):
        for name in ("sewep", "cnf:", "cnf:none", "cnf@", "cnf:orbit@nosuch", ""):
            with pytest.raises(InputError):
                method_named(name)

    def test_names_of_pairs_are_completed(self):
        assert method_named("cnf").name == "cnf:composed@glucose4"
        assert method_named("cnf@minisat22").name == "cnf:composed@minisat22"
        assert method_named("cnf:orbit").name == "cnf:orbit@glucose4"
        assert method_named("cp").name == "cp:constraints@cpsat"

    def test_a_kind_without_a_solver_is_a_missing_part(self, monkeypatch):
        left = tuple(part for part in parts("solvers") if part.name != "cpsat")
        monkeypatch.setattr("solverkit.solvers._formula_method.parts", lambda room: left)
        with pytest.raises(MissingPartError, match="a solver of the kind cp"):
            formula_method("cp")

    def test_every_cell_gets_two_families(self):
        cells = [live.reduction.cell for live in triage(Window((Map(3, 13),), Span(1, 30))).cells]
        chosen = plan(cells, {}, frozenset())
        families = {cell: set() for cell in cells}
        for batch in chosen.batches:
            for cell in batch.cells:
                families[cell].add(method_named(batch.method).family)
        assert all(len(kinds) == 2 for kinds in families.values())
        assert not chosen.refused

    def test_computed_evidence_needs_one_method(self):
        cells = [Cell(3, 1, 27, 17), Cell(3, 1, 2, 1)]
        chosen = plan(cells, {}, frozenset(), evidence=Evidence.COMPUTED)
        assert sorted(cell for batch in chosen.batches for cell in batch.cells) == sorted(cells)

    def test_what_failed_is_replaced_by_another_method(self):
        cell = Cell(3, 1, 27, 17)
        first = plan([cell], {}, frozenset(), evidence=Evidence.COMPUTED).batches[0].method
        second = plan([cell], {}, frozenset({(first, cell)}), evidence=Evidence.COMPUTED).batches[0].method
        assert first != second

    def test_a_cell_that_no_method_takes_is_refused_with_all_reasons(self):
        vast = Cell(3, 1, 114208327604, 72057431991, above=2**68)
        told = plan([vast], {}, frozenset()).refused[vast]
        assert "sweep: " in told
        assert "cnf:composed@glucose4: " in told


class TestVerdicts:
    CELL = Cell(3, 13, 8, 5)
    ALL = (211, 227, 251, 259, 283, 287, 319)

    def _finding(self, *entries, above=0, primitive=False):
        window = Window((Map(3, 13),), Span(8, 8), Span(5, 5), above=above, primitive=primitive)
        (live,) = triage(window).cells
        return conclude(window, live, lists_by_cell(entries), {})

    def test_two_families_confirm(self):
        found = self._finding(
            Listing(self.CELL, "sweep", self.ALL, True), Listing(self.CELL, "cnf:composed@glucose4", self.ALL, True)
        )
        assert (found.verdict, found.evidence, len(found.cycles)) == (Verdict.FOUND, Evidence.CONFIRMED, 7)

    def test_two_methods_of_one_family_do_not(self):
        found = self._finding(
            Listing(self.CELL, "matching", self.ALL, True), Listing(self.CELL, "census", self.ALL, True)
        )
        assert found.evidence is Evidence.COMPUTED

    def test_different_lists_contradict_and_both_are_kept(self):
        found = self._finding(
            Listing(self.CELL, "sweep", self.ALL[:-1], True), Listing(self.CELL, "matching", self.ALL[1:], True)
        )
        assert found.contradiction
        assert found.verdict is Verdict.OPEN
        assert [c.least for c in found.cycles] == list(self.ALL)

    def test_an_incomplete_list_leaves_the_cell_open_with_its_cycles(self):
        found = self._finding(Listing(self.CELL, "sweep", self.ALL[:2], False, "out of time"))
        assert (found.verdict, len(found.cycles), found.reason) == (Verdict.OPEN, 2, "sweep: out of time")

    def test_a_count_must_agree_with_a_list(self):
        count = Listing(self.CELL, "tally", self.ALL[:2], True, total=7)
        agreed = self._finding(Listing(self.CELL, "sweep", self.ALL, True), count)
        assert (agreed.evidence, agreed.total, len(agreed.cycles)) == (Evidence.CONFIRMED, None, 7)
        assert self._finding(Listing(self.CELL, "sweep", self.ALL, True), replace(count, total=8)).contradiction
        alone = self._finding(count)
        assert (alone.verdict, alone.total, len(alone.cycles)) == (Verdict.FOUND, 7, 2)

    def test_a_list_with_a_smaller_bound_serves_a_larger_one(self):
        found = self._finding(Listing(self.CELL, "sweep", self.ALL, True), above=260)
        assert [c.least for c in found.cycles] == [283, 287, 319]


def test_windows_settle_to_what_iteration_finds(tmp_path):
    """Against plain iteration from every start up to the largest bound of any cell."""
    for map_ in (Map(3, 7), Map(3, -11), Map(5, 3), Map(7, -1)):
        settlement = settle(Window((map_,), Span(1, 14)), tmp_path / str(map_.offset), Settings(jobs=1))
        assert settlement.complete
        top = max(live.bound for live in settlement.triage.cells)
        expected = cycles_by_iteration(map_.multiplier, map_.offset, top, 14)
        assert {(c.least, c.length, c.odd) for c in settlement.cycles} == expected


def test_settled_windows_are_not_computed_again(tmp_path, monkeypatch):
    window = Window((Map(3, 5),), Span(1, 12))
    first = settle(window, tmp_path / "d", Settings(jobs=1))

    def refuse(*_):
        raise AssertionError("work was done again")

    monkeypatch.setattr(settle_run, "run_orders", refuse)
    again = settle(window, tmp_path / "d")
    assert _triple(again) == _triple(first)
    assert [replace(f, seconds=0) for f in again.findings] == [replace(f, seconds=0) for f in first.findings]


def test_evidence_asked_for_and_not_reached_shows_in_the_exit_status(tmp_path):
    window = Window((Map(3, 5),), Span(1, 8))
    assert settle(window, tmp_path / "a", Settings(Evidence.CONFIRMED, jobs=1)).exit_status == 0
    one = settle(window, tmp_path / "b", Settings(Evidence.CONFIRMED, ("sweep",), jobs=1))
    assert one.complete
    assert one.exit_status == 3
    assert settle(window, tmp_path / "c", Settings(methods=("sweep",), jobs=1)).exit_status == 0


def test_a_time_limit_leaves_cells_open_and_a_later_run_settles_them(tmp_path):
    window = Window((Map(3, -3191),), Span(45, 45), Span(29, 29))
    only = ("cnf:composed@glucose4",)
    short = settle(window, tmp_path / "d", Settings(methods=only, budget=0.02, jobs=1))
    assert short.exit_status == 3
    assert "no answer within" in short.open_cells[0].reason
    later = settle(window, tmp_path / "d", Settings(methods=only, jobs=1))
    assert (later.exit_status, later.cycles) == (0, ())


def test_a_second_method_out_of_time_leaves_the_cell_computed_and_is_not_tried_again(tmp_path, monkeypatch):
    window = Window((Map(3, -3191),), Span(45, 45), Span(29, 29))
    monkeypatch.setattr(choice, "CONFIRM_LIMIT", 0.02)
    only = (method_named("sweep"), method_named("cnf"))
    monkeypatch.setattr(choice, "default_methods", lambda: only)
    told = settle(window, tmp_path / "d", Settings(jobs=1))
    assert (told.exit_status, told.findings[0].evidence) == (0, Evidence.COMPUTED)
    monkeypatch.setattr(choice, "CONFIRM_LIMIT", 60.0)
    assert settle(window, tmp_path / "d", Settings(jobs=1)).findings[0].evidence is Evidence.COMPUTED
    asked = settle(window, tmp_path / "d", Settings(Evidence.CONFIRMED, jobs=1))
    assert (asked.exit_status, asked.findings[0].evidence) == (0, Evidence.CONFIRMED)


REGION_WINDOWS = [
    Window((Map(3, 1),), Span(1, 40), signs=BOTH),
    Window((Map(3, 5), Map(3, -7)), Span(4, 33), Span(2, 19), above=20, signs=BOTH),
    Window((Map(3, 35),), Span(1, 30), primitive=True),
    Window((Map(5, 3), Map(7, -5)), Span(2, 24), signs=BOTH),
    Window((Map(3, 13),), Span(8, 8), Span(5, 5), above=258, shape=shape_from_table({"circuits": 2})),
    Window((Map(9, 7),), Span(1, 20), above=3),
]


@pytest.mark.parametrize("window", REGION_WINDOWS, ids=lambda w: f"{w.maps[0]} {w.lengths}")
def test_a_region_holds_the_cycles_that_its_cells_hold(window, tmp_path, monkeypatch):
    """The same window settled cell by cell and as a whole."""
    listed = settle(window, tmp_path / "listed", Settings(jobs=1))
    monkeypatch.setattr(settle_run, "triage", lambda w, c: triage(w, c, list_limit=0))
    whole = settle(window, tmp_path / "whole", Settings(jobs=1))
    assert whole.complete
    assert whole.findings == ()
    assert whole.regions
    assert whole.cycles == listed.cycles
    assert all(region.swept_to == region.bound for region in whole.regions)


def test_a_region_out_of_time_is_open_and_goes_on_later(tmp_path, monkeypatch):
    window = Window((Map(3, 1),), Span(1, 100_000), signs=BOTH)
    with monkeypatch.context() as patch:
        patch.setattr(settle_run, "_region_limit", lambda _settings, _share: 1e-4)
        short = settle(window, tmp_path / "d", Settings(jobs=1))
    assert (short.complete, short.exit_status) == (False, 3)
    assert any(region.swept_to < region.bound and "budget" in region.reason for region in short.regions)
    later = settle(window, tmp_path / "d", Settings(jobs=2))
    assert later.exit_status == 0
    assert [c.least for c in later.cycles] == [-1, 1, -5, -17]


def test_a_region_that_no_sweep_reaches_is_open_with_the_reason(tmp_path):
    told = settle(Window((Map(3, 1),), Span(1, 10**9), above=2**30), tmp_path / "d")
    (region,) = told.regions
    assert told.exit_status == 3
    assert region.region.count > 10**6
    assert "would take" in region.reason


class _Liar:
    """A method that leaves one cycle out."""

    name = "liar"

    def __init__(self):
        self.family = method_named("cnf").family

    def refusal(self, cell):
        return None

    def estimate(self, cells):
        return 0.0

    def batches(self, cells):
        return [tuple(cells)]

    def pieces(self, batch, seconds):
        return [Piece(self.name, batch)]

    def run(self, piece, budget):
        return PieceResult(piece, ())


def test_contradictory_methods_end_with_status_5_and_keep_both(tmp_path, monkeypatch):
    real = choice.method_named
    liar = _Liar()

    def named(name):
        return liar if name == "liar" else real(name)

    for module in (choice, settle_run, pool, sys.modules["solverkit.settle.verdicts"]):
        monkeypatch.setattr(module, "method_named", named)
    told = settle(Window((Map(3, 5),), Span(5, 5)), tmp_path / "d", Settings(methods=("sweep", "liar"), jobs=1))
    assert told.exit_status == 5
    assert [c.least for c in told.contradictions[0].cycles] == [19, 23]
    assert "liar lists 0" in told.contradictions[0].reason


class _Dying(SerialExecutor):
    """An executor whose worker dies over the first orders."""

    deaths = 0

    def submit(self, fn, /, *args, **kwargs):
        if _Dying.deaths:
            _Dying.deaths -= 1
            from concurrent.futures import Future

            future = Future()
            future.set_exception(BrokenProcessPool("a worker died"))
            return future
        return super().submit(fn, *args, **kwargs)


@pytest.mark.parametrize(("deaths", "complete"), [(0, True), (2, True), (3, False)])
def test_an_order_whose_worker_dies_runs_again_at_most_three_times(deaths, complete):
    method = method_named("sweep")
    (piece,) = method.pieces((Cell(3, -1, 11, 7),), 1.0)
    _Dying.deaths = deaths
    (results,) = run_orders([Order(((piece, Budget()),))], _Dying, 2)
    assert results[0].complete is complete
    assert complete or "failed three times" in results[0].reason


RUN = """
import sys
from pathlib import Path
from solverkit.maps import Map
from solverkit.numerals import Span
from solverkit.settle.run import Settings, settle
from solverkit.window import Window
if __name__ == "__main__":
    window = Window(tuple(Map(3, d) for d in range(5, 22, 2)), Span(1, 40))
    settlement = settle(window, Path(sys.argv[1]), Settings(jobs=2))
    print(settlement.exit_status, [(c.offset, c.least, c.length) for c in settlement.cycles])
"""


@pytest.mark.skipif(not hasattr(os, "killpg"), reason="process groups are a POSIX notion")
def test_killed_at_any_moment_a_run_goes_on_to_the_same_result(tmp_path):
    """kill -9 to the whole process group, several times; nothing recorded is lost or computed again."""
    script = tmp_path / "run.py"
    script.write_text(RUN)

    def start(folder):
        return subprocess.Popen(
            [sys.executable, str(script), str(folder)], stdout=subprocess.PIPE, text=True, start_new_session=True
        )

    whole = start(tmp_path / "whole").communicate(timeout=120)[0]
    recorded = []
    for pause in (1.0, 1.6, 2.2):
        process = start(tmp_path / "killed")
        time.sleep(pause)
        os.killpg(process.pid, signal.SIGKILL)
        process.communicate()
        ledger = tmp_path / "killed" / "ledger.sqlite"
        if ledger.exists():
            recorded.append(_complete_lists(ledger))
    assert start(tmp_path / "killed").communicate(timeout=120)[0] == whole
    assert whole.startswith("0 [(5, 5, 2)")
    final = _complete_lists(tmp_path / "killed" / "ledger.sqlite")
    for earlier in recorded:
        assert earlier.items() <= final.items()


def _complete_lists(path):
    import sqlite3

    connection = sqlite3.connect(path)
    try:
        rows = connection.execute(
            "SELECT method, multiplier, divisor, length, odd, above, least, seconds FROM listing WHERE complete"
        ).fetchall()
    except sqlite3.OperationalError:  # killed before the tables were made
        rows = []
    finally:
        connection.close()
    return {tuple(row[:6]): (json.loads(row[6])[0:], row[7]) for row in rows}


def test_an_interrupt_while_a_solver_starts_stays_an_interrupt(monkeypatch):
    """Closing what has not started must not hide it behind an error of its own."""
    from multiprocessing.context import SpawnProcess

    from solverkit.solvers._isolation import SolverProcess

    def interrupted(self):
        raise KeyboardInterrupt

    monkeypatch.setattr(SpawnProcess, "start", interrupted)
    process = SolverProcess()
    with pytest.raises(KeyboardInterrupt):
        process.answer(Cell(3, 1, 2, 1), "orbit", "glucose4", 1.0, None)
    process.close()
