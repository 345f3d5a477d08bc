"""Trials: order of the runs, continuation, scores, and that a wrong answer is noticed."""

import errno
import json
import os
from collections import Counter
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from solverkit.errors import FileError, InputError
from solverkit.exact.bounds import balanced_bound
from solverkit.exact.reduction import reduced
from solverkit.solvers._isolation import Answer, Ending
from solverkit.trials import harness
from solverkit.trials import results as results_module
from solverkit.trials.agreement import Expected, disagreement, expected
from solverkit.trials.cells import BenchmarkCell, read_cells, write_cells
from solverkit.trials.harness import Limits, Pair, matched, order, perform
from solverkit.trials.results import ResultFile
from solverkit.trials.scores import geometric_mean, scores
from solverkit.window import Cell
from tests.reference import cycles_of_cell
from tests.strategies import cells

BENCHMARKS = Path(__file__).parents[2] / "benchmarks" / "cells.jsonl"
SMALL = [BenchmarkCell(Cell(3, 5, 5, 3)), BenchmarkCell(Cell(3, -1, 11, 7), 1, "easy"), BenchmarkCell(Cell(3, 7, 8, 4))]
PAIRS = [Pair("orbit", "minisat22"), Pair("orbit", "cadical195"), Pair("orbit", "glucose4")]


# Benchmark cells


def test_the_benchmark_cells_cover_what_they_should():
    read = read_cells(BENCHMARKS)
    assert len(read) >= 60
    assert {c.cell.multiplier for c in read} == {3, 5, 7, 9, 11}
    assert {c.cell.offset > 0 for c in read} == {True, False}
    assert {min(c.cycles, 2) for c in read} == {0, 1, 2}
    assert len({c.cell for c in read}) == len(read)
    named = {(3, -3191, 45, 29), (5, -23547, 42, 20), (3, 1175, 59, 37), (3, -74923, 59, 39), (3, -191137, 56, 37)}
    assert named <= {(c.cell.multiplier, c.cell.offset, c.cell.length, c.cell.odd) for c in read}
    few = [c for c in read if abs(c.cell.offset) > 20 * c.bound]
    assert len(few) >= 9
    by_grade = Counter((c.grade, c.cell.multiplier, c.cell.offset > 0, c.cycles > 0) for c in read)
    assert all(
        by_grade[grade, q, sign, some] for grade in ("small", "medium", "large") for q in (3, 5, 7, 9, 11)
        for sign in (True, False) for some in (True, False)
    )  # fmt: skip


def test_the_benchmark_cells_are_irreducible_and_of_their_grade():
    tops = {"small": 20_000, "medium": 500_000, "large": 20_000_000}
    for each in read_cells(BENCHMARKS):
        assert each.cell.determinant % each.cell.offset == 0
        assert reduced(each.cell).cell == each.cell
        assert each.bound == balanced_bound(each.cell)
        assert each.grade == next(grade for grade, top in tops.items() if each.bound < top)


def test_the_numbers_of_cycles_on_file_are_those_of_iteration():
    """Every n up to the bound is iterated, on the cells where that is quick."""
    checked = 0
    for each in read_cells(BENCHMARKS):
        if each.bound < 6000:
            cell = each.cell
            found = [n for n in range(1, each.bound + 1) if not disagreement(cell, [n], False, None)]
            assert len(found) == each.cycles, cell
            checked += 1
    assert checked >= 5


def test_cells_survive_a_file(tmp_path):
    written = [*SMALL, BenchmarkCell(Cell(3, 2**80 + 1, 90, 40, above=7), None, "", 2**70)]
    write_cells(tmp_path / "cells.jsonl", written)
    assert list(read_cells(tmp_path / "cells.jsonl")) == written


@pytest.mark.parametrize(
    ("line", "message"),
    [
        ("[1, 2]", "line 2: .*JSON object"),
        ("{", "line 2: .*JSON object"),
        ('{"q": 3, "d": 5, "k": 5}', "line 2, x"),
        ('{"q": 3, "d": 5, "k": 5, "x": 6}', "line 2, x"),
        ('{"q": 4, "d": 5, "k": 5, "x": 3}', "multiplier"),
        ('{"q": 3, "d": 5, "k": 5, "x": 3, "y": 1}', "line 2, y"),
        ('{"q": 3, "d": 5.0, "k": 5, "x": 3}', "line 2, d"),
        ('{"q": 3, "d": 5, "k": 5, "x": 3, "grade": 7}', "grade"),
        ('{"q": 3, "d": 5, "k": 5, "x": 3, "cycles": -1}', "cycles"),
    ],
)
def test_lines_that_are_no_cells_are_named(line, message, tmp_path):
    path = tmp_path / "cells.jsonl"
    path.write_text('{"q": 3, "d": 5, "k": 5, "x": 3}\n' + line + "\n")
    with pytest.raises(InputError, match=message):
        read_cells(path)


def test_files_without_cells_are_refused(tmp_path):
    with pytest.raises(FileError, match="No such file"):
        read_cells(tmp_path / "none.jsonl")
    for content in (b"", b"\xff\n"):
        (tmp_path / "cells.jsonl").write_bytes(content)
        with pytest.raises(InputError, match="--cells"):
            read_cells(tmp_path / "cells.jsonl")


# Order


@given(st.integers(0, 99), st.integers(1, 5))
def test_every_run_comes_once_and_a_repeat_is_finished_before_the_next(seed, repeats):
    runs = list(order(SMALL, PAIRS, repeats, seed))
    assert len(runs) == len(set(runs)) == len(SMALL) * len(PAIRS) * repeats
    assert [run.repeat for run in runs] == sorted(run.repeat for run in runs)
    assert runs == list(order(SMALL, PAIRS, repeats, seed))


@given(st.integers(0, 99))
def test_the_second_of_two_repeats_visits_the_pairs_in_reverse(seed):
    runs = list(order(SMALL, PAIRS, 2, seed))
    for cell in SMALL:
        first, second = ([r.pair for r in runs if r.cell == cell and r.repeat == i] for i in (0, 1))
        assert second == first[::-1]


def test_the_runs_on_one_cell_come_one_after_the_other():
    runs = list(order(SMALL, PAIRS, 2, 5))
    blocks = [runs[i : i + len(PAIRS)] for i in range(0, len(runs), len(PAIRS))]
    assert all(len({run.cell for run in block}) == 1 for block in blocks)


def test_the_seed_decides_the_order():
    assert len({tuple(order(SMALL, PAIRS, 1, seed)) for seed in range(20)}) > 5


def test_only_pairs_of_one_form_match():
    found, others = matched(["orbit"], ["minisat22", "cadical195"])
    assert ([pair.name for pair in found], others) == (["orbit@minisat22", "orbit@cadical195"], [])
    with pytest.raises(InputError, match="each name once"):
        matched(["orbit", "orbit"], ["minisat22"])
    with pytest.raises(InputError, match="solver"):
        matched(["orbit"], ["no-such"])


def test_pairs_of_different_forms_are_told_apart(monkeypatch):
    from types import SimpleNamespace

    from solverkit.solvers._contract import Kind

    real = harness.load

    def load(room, name):
        return SimpleNamespace(kind=Kind.MIP) if name == "a-mip" else real(room, name)

    monkeypatch.setattr(harness, "load", load)
    found, ((other, reason),) = matched(["orbit"], ["a-mip", "minisat22"])
    assert [pair.name for pair in found] == ["orbit@minisat22"]
    assert other.name == "orbit@a-mip"
    assert "inequalities" in reason
    with pytest.raises(InputError, match="a solver that takes orbit"):
        matched(["orbit"], ["a-mip"])


# Agreement


@given(cells(longest=9))
def test_the_reference_is_the_brute_force_list(cell):
    known = cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)
    found = expected(cell)
    assert found.total == len(known)
    assert set(found.least) <= set(known)


def test_a_cell_too_costly_for_every_engine_has_no_reference():
    assert expected(Cell(3, 2**400 + 1, 900, 400), seconds=1e-9) is None


@pytest.mark.parametrize(
    ("least", "complete", "message"),
    [
        ([19, 23], True, ""),
        ([23, 19], True, ""),
        ([19], False, ""),
        ([], False, ""),
        ([19], True, "1 cycles, but sweep has 2"),
        ([], True, "0 cycles, but sweep has 2"),
        ([19, 19], False, "listed twice"),
        ([19, 23, 31], False, "31 is not the least element"),
        ([31], False, "31 is not the least element"),
        ([49], False, "49 is not the least element"),
    ],
)
def test_answers_are_compared_with_the_reference(least, complete, message):
    told = disagreement(Cell(3, 5, 5, 3), least, complete, Expected((19, 23), 2, "sweep"))
    assert message in told
    assert bool(message) == bool(told)


def test_a_list_that_the_engine_lacks_is_a_disagreement():
    """Both elements are right; the engine is wrong, which must be told as well."""
    cell = Cell(3, 5, 5, 3)
    assert "23 is listed, which sweep has not" in disagreement(cell, [19, 23], False, Expected((19,), 1, "sweep"))
    assert "is missing" in disagreement(cell, [19, 23], True, Expected((19, 29), 2, "sweep"))
    assert not disagreement(cell, [19, 23], True, Expected((19,), 2, "tally"))
    assert not disagreement(cell, [19], True, None)


def test_rotations_and_repeated_words_are_no_members_of_a_cell():
    assert "5 is not" in disagreement(Cell(3, 5, 4, 2), [5], True, None)
    assert "38 is not" in disagreement(Cell(3, 5, 5, 3), [38], True, None)
    assert "19 is not" in disagreement(Cell(3, 5, 5, 3, above=19), [19], True, None)


# Runs


LIMITS = Limits(60.0, 4 << 30)


def kept(path):
    return [json.loads(line) for line in path.read_text().splitlines()]


def test_a_trial_writes_one_checked_result_a_run(tmp_path):
    path = tmp_path / "results.jsonl"
    runs = list(order(SMALL, PAIRS[:2], 1, 1))
    records = perform(runs, LIMITS, 1, ResultFile(path), shout=pytest.fail)
    assert [{"schema": 1, **record} for record in records] == kept(path)
    assert {record["status"] for record in records} == {"complete"}
    assert {record["checked"] for record in records} <= {"sweep", "matching", "tally", "census"}
    assert {(r["encoding"], r["solver"]) for r in records} == {("orbit", "minisat22"), ("orbit", "cadical195")}
    for record in records:
        assert record["found"] == len(cycles_of_cell(record["q"], record["d"], record["k"], record["x"]))
        assert record["wall_s"] >= record["solve_s"] >= 0
        assert record["clauses"] > record["variables"] > 0
        assert record["version"].startswith("python-sat")


class Answers:
    """Stands in for a solver process: what it answers is set beforehand, what it was asked is kept."""

    asked = None
    answer_ = Answer((19, 23), Ending.COMPLETE, "", {"encode_s": 0.1, "solve_s": 0.2, "variables": 3, "clauses": 4})

    def answer(self, cell, encoding, solver, seconds, memory):
        Answers.asked.append((cell, encoding, solver, seconds, memory))
        return Answers.answer_

    def close(self):
        Answers.asked.append("closed")


@pytest.fixture
def answers(monkeypatch):
    monkeypatch.setattr(harness, "SolverProcess", Answers)
    monkeypatch.setattr(Answers, "asked", [])
    monkeypatch.setattr(Answers, "answer_", Answers.answer_)
    return Answers


RUNS = list(order(SMALL[:1], PAIRS[:2], 2, 1))


def test_each_run_has_a_process_of_its_own_with_its_limits(answers):
    perform(RUNS[:2], LIMITS, 1, ResultFile(None), shout=pytest.fail)
    assert len(answers.asked) == 6
    assert answers.asked[2] == answers.asked[5] == "closed"
    pairs = [run.pair for run in RUNS[:2]]
    timed = [answers.asked[1], answers.asked[4]]
    assert timed == [(SMALL[0].cell, pair.encoding, pair.solver, 60.0, 4 << 30) for pair in pairs]


@pytest.mark.parametrize("cut", [0, 1, 30, 10**6])
def test_an_interrupted_file_is_continued_and_nothing_is_run_twice(answers, tmp_path, cut):
    """The last line lacks its end, from the first byte to all of it."""
    path = tmp_path / "results.jsonl"
    whole = perform(RUNS, LIMITS, 1, ResultFile(path), shout=pytest.fail)
    lines = path.read_bytes().splitlines(keepends=True)
    path.write_bytes(b"".join(lines[:2]) + lines[2][:-1][:cut])
    answers.asked.clear()
    results = ResultFile(path)
    assert len(results) == 2
    again = perform(RUNS, LIMITS, 1, results, shout=pytest.fail)
    assert answers.asked.count("closed") == 2
    assert [{**r, "wall_s": 0} for r in kept(path)] == [{"schema": 1, **r, "wall_s": 0} for r in whole]
    assert len(again) == len(whole)


def test_another_limit_or_repeat_is_another_run(answers, tmp_path):
    path = tmp_path / "results.jsonl"
    perform(RUNS[:1], LIMITS, 1, ResultFile(path), shout=pytest.fail)
    for runs, limits, count in ((RUNS[:1], LIMITS, 1), (RUNS[:1], Limits(9.0, 4 << 30), 2), (RUNS[2:], LIMITS, 4)):
        perform(runs, limits, 2, ResultFile(path), shout=pytest.fail)
        assert len(kept(path)) == count


@pytest.mark.parametrize("content", [b"shopping list", b"a\nb\n", b'{"schema": 2}\n', b'{"q": 3}\n', b"\xff\xfe\n"])
def test_a_file_of_another_kind_is_left_alone(tmp_path, content):
    path = tmp_path / "other.txt"
    path.write_bytes(content)
    with pytest.raises(InputError, match="--to"):
        ResultFile(path)
    assert path.read_bytes() == content


def test_a_results_file_in_a_missing_folder_is_one_line(tmp_path):
    with pytest.raises(FileError, match="No such file"):
        ResultFile(tmp_path / "none" / "results.jsonl")


def test_a_full_disk_is_one_line_and_the_file_goes_on_later(answers, tmp_path, monkeypatch):
    def full(_):
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    path = tmp_path / "results.jsonl"
    with monkeypatch.context() as patched:
        patched.setattr(results_module.os, "fsync", full)
        with pytest.raises(FileError, match=r"results.jsonl: can't be written \(No space left on device\)"):
            perform(RUNS, LIMITS, 1, ResultFile(path), shout=pytest.fail)
    perform(RUNS, LIMITS, 1, ResultFile(path), shout=pytest.fail)
    assert len(kept(path)) == len(RUNS)


def test_disagreements_are_shouted_and_kept_also_when_the_file_is_read_again(answers, tmp_path):
    path = tmp_path / "results.jsonl"
    answers.answer_ = Answer((19,), Ending.COMPLETE, "", Answers.answer_.statistics)
    for _ in range(2):
        shouted = []
        perform(RUNS[:1], LIMITS, 1, ResultFile(path), shout=shouted.append)
        assert len(shouted) == 1
        assert "3x+5 k = 5, x = 3: 1 cycles, but " in shouted[0]
    assert len(kept(path)) == 1


def test_a_number_of_cycles_on_file_is_compared_too(answers):
    shouted = []
    runs = list(order([BenchmarkCell(Cell(3, 5, 5, 3), 7)], PAIRS[:1], 1, 1))
    perform(runs, LIMITS, 1, ResultFile(None), shout=shouted.append)
    assert "2 cycles, 7 on file" in shouted[0]


@pytest.mark.parametrize(
    ("answer", "status"),
    [
        (Answer((19,), Ending.LIMIT, "no answer within 60 s", {}), "limit"),
        (Answer((), Ending.INEXACT, "infeasible in floating-point arithmetic", {"solve_s": 1.0}), "inexact"),
        (Answer((), Ending.FAILED, "the solver process ended with status -11", {}), "failed"),
    ],
)  # fmt: skip
def test_runs_that_do_not_complete_say_how_they_ended(answers, answer, status):
    answers.answer_ = answer
    (record,) = perform(RUNS[:1], LIMITS, 1, ResultFile(None), shout=pytest.fail)
    assert (record["status"], record["reason"]) == (status, answer.reason)


def test_a_time_limit_ends_a_run(tmp_path):
    hard = [BenchmarkCell(Cell(3, -191137, 56, 37))]
    runs = list(order(hard, PAIRS[:1], 1, 1))
    (record,) = perform(runs, Limits(0.5), 1, ResultFile(None), shout=pytest.fail, reference=lambda _: None)
    assert record["status"] == "limit"
    assert 0.4 < record["wall_s"] < 5
    assert record["checked"] is None


# Scores


def record(cell, solver, seconds, repeat=0, limit=10.0):
    told = {"q": 3, "d": cell, "k": 9, "x": 5, "above": 0, "encoding": "e", "solver": solver, "repeat": repeat}
    if seconds is None:
        return {**told, "limit_s": limit, "status": "limit"}
    sizes = {"variables": 100 * cell, "clauses": 1000 * cell}
    return {**told, "limit_s": limit, "status": "complete", "encode_s": 0.25, "solve_s": seconds - 0.25, **sizes}


def test_par_2_counts_a_run_that_did_not_complete_as_twice_the_limit():
    (score,) = scores([record(1, "a", 1.0), record(2, "a", 3.0), record(3, "a", None)], ("e", "a"))
    assert score.par2_s == pytest.approx((1 + 3 + 20) / 3)
    assert (score.runs, score.solved, score.cells, score.cells_solved) == (3, 2, 3, 2)
    assert (score.encode_s, score.solve_s) == (pytest.approx(0.25), pytest.approx(1.75))
    assert score.cactus == (pytest.approx(0.75), pytest.approx(3.5))


def test_ratios_are_geometric_means_over_the_cells_that_either_completed():
    """Cells 1 and 2: 4 and 1; cell 3: at least 5 (limit over 2 s); cell 4: none of both."""
    base = [record(1, "a", 1.0), record(2, "a", 2.0), record(3, "a", 2.0), record(4, "a", None)]
    other = [record(1, "b", 4.0), record(2, "b", 2.0), record(3, "b", None), record(4, "b", None)]
    one, two = scores(base + other, ("e", "a"))
    assert (one.ratio, one.ratio_cells) == (1.0, 3)
    assert two.ratio == pytest.approx((4 * 1 * 5) ** (1 / 3))
    assert (two.ratio_cells, two.bounded_cells) == (3, 1)


def test_repeats_enter_a_ratio_by_their_geometric_mean():
    base = [record(1, "a", 1.0), record(1, "a", 4.0, repeat=1)]
    other = [record(1, "b", 8.0), record(1, "b", 2.0, repeat=1)]
    assert scores(base + other, ("e", "a"))[1].ratio == pytest.approx(2)
    _, partly = scores([*base, other[0], record(1, "b", None, repeat=1)], ("e", "a"))
    assert (partly.solved, partly.cells_solved) == (1, 0)


def test_sizes_are_medians_over_cells_and_known_from_any_solver_of_the_encoding():
    known = [record(i, "a", 1.0) for i in (1, 2, 6)]
    _, other = scores([*known, *(record(i, "b", None) for i in (1, 2, 6))], ("e", "a"))
    assert other.sizes == {"variables": 200, "clauses": 2000}
    assert (other.encode_s, other.solve_s, other.cactus) == (None, None, ())


def test_scores_without_the_baseline_have_no_ratio():
    (score,) = scores([record(1, "a", 1.0)], ("e", "z"))
    assert (score.ratio, score.ratio_cells) == (None, 0)
    assert json.loads(json.dumps(score.table()))["cactus"] == [0.75]


@given(st.lists(st.floats(1e-3, 1e3), min_size=1, max_size=9))
def test_geometric_means_lie_between_the_least_and_the_largest(values):
    assert min(values) * (1 - 1e-9) <= geometric_mean(values) <= max(values) * (1 + 1e-9)
