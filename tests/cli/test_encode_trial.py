"""The commands ``encode`` and ``trial``, in processes of their own, as the command line calls them."""

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from cycle_encodings.composed import ENCODING
from solverkit.trials.cells import read_cells
from solverkit.trials.harness import Pair, order
from solverkit.window import Cell

ROOT = Path(__file__).parents[2]


@pytest.fixture
def program():
    def start(*arguments, cwd):
        paths = os.pathsep.join([str(ROOT), str(ROOT / "encodings")])
        return subprocess.Popen(
            [sys.executable, "-m", "solverkit", *map(str, arguments)], cwd=cwd, text=True,
            stdout=subprocess.PIPE, stderr=subprocess.PIPE, env={**os.environ, "PYTHONPATH": paths},
        )  # fmt: skip

    return start


@pytest.fixture
def run(program, tmp_path):
    def finished(*arguments):
        with program(*arguments, cwd=tmp_path) as process:
            out, err = process.communicate(timeout=100)
        return process.returncode, out, err

    return finished


@pytest.fixture
def document(run):
    def parsed(*arguments, status=0, complaint=""):
        code, out, err = run(*arguments, "--format", "json")
        assert (code, err) == (status, complaint)
        return json.loads(out)

    return parsed


# encode


def test_encode_reduces_and_reflects_by_itself_and_says_so(document, tmp_path):
    """(3, −145) with negative elements is (3, 145), and 145 = 29·5 with gcd(145, D) = 5."""
    told = document("encode", "--map", "3,-145", "--sign", "negative", "--cell", "27,17", "--to", "a.cnf")
    encoding = ENCODING.encode(Cell(3, 5, 27, 17))
    assert (told["variables"], told["clauses"]) == (encoding.variables, len(encoding.clauses))
    assert (told["digest"], told["factor"], told["format"]) == (encoding.digest(), -29, "DIMACS CNF")
    assert (told["encoded"]["offset"], told["cell"]["offset"], told["cell"]["sign"]) == (5, -145, "negative")
    text = (tmp_path / "a.cnf").read_text()
    assert told["bytes"] == len(text)
    assert f"p cnf {encoding.variables} {len(encoding.clauses)}\n" in text


def test_encode_raw_takes_the_cell_as_it_stands(document, tmp_path):
    told = document("encode", "--map", "3,145", "--above", "100", "--cell", "27,17", "--raw", "--to", "a.opb")
    assert told["digest"] == ENCODING.encode(Cell(3, 145, 27, 17, above=100)).digest()
    assert (told["factor"], told["encoding"]) == (1, "composed")
    assert "* cell q=3 d=145 k=27 x=17 above=100\n" in (tmp_path / "a.opb").read_text()


def test_encode_divides_the_bound_as_well(document):
    told = document("encode", "--map", "3,145", "--above", "100", "--cell", "27,17", "--to", "a.cnf")
    assert told["encoded"]["above"] == 100 // 29


def test_encode_writes_smtlib_from_the_cell(document, run, tmp_path):
    told = document("encode", "--map", "3,5", "--cell", "5,3", "--to", "a.smt2")
    assert (told["format"], told["encoding"], told["digest"]) == ("SMT-LIB 2", None, None)
    assert ":named order" in (tmp_path / "a.smt2").read_text()
    code, out, err = run("encode", "--map", "3,5", "--cell", "5,3", "--to", "b.smt2", "--encoding", "orbit")
    assert (code, out) == (2, "")
    assert "--encoding: got orbit; allowed: nothing for SMT-LIB 2, which is written from the cell" in err
    assert not (tmp_path / "b.smt2").exists()


def test_encode_prints_what_it_wrote(run):
    code, out, err = run("encode", "--map", "3,145", "--cell", "27,17", "--encoding", "composed", "--to", "a.cnf")
    encoding = ENCODING.encode(Cell(3, 5, 27, 17))
    assert (code, err) == (0, "")
    assert f"a.cnf: DIMACS CNF, {encoding.variables:,} variables, {len(encoding.clauses):,} clauses, " in out
    assert encoding.digest() in out
    assert "times 29" in out


def test_encode_takes_a_window_file(document, tmp_path):
    (tmp_path / "w.toml").write_text('[map]\nmultiplier = 3\noffsets = [5]\n[cycle]\nlengths = "1..30"\n')
    told = document("encode", "w.toml", "--cell", "27,17", "--to", "a.cnf")
    assert told["digest"] == ENCODING.encode(Cell(3, 5, 27, 17)).digest()


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (("--map", "3,5..9", "--cell", "27,17", "--to", "a.cnf"), "one map, --map Q,D"),
        (("--map", "3,5", "--sign", "both", "--cell", "27,17", "--to", "a.cnf"), "one sign"),
        (("--map", "3,5", "--cell", "27", "--to", "a.cnf"), "--cell: got 27; allowed: K,X"),
        (("--map", "3,5", "--cell", "27,28", "--to", "a.cnf"), "--cell X: got 28"),
        (("--map", "3,5", "--cell", "0,0", "--to", "a.cnf"), "--cell K: got 0"),
        (("--map", "3,5", "--lengths", "1..9", "--cell", "27,17", "--to", "a.cnf"), "--cell K: got 27; allowed: a"),
        (("--map", "3,5", "--primitive", "--cell", "27,17", "--to", "a.cnf"), "--primitive"),
        (("--map", "3,5", "--cell", "27,17", "--to", "a.txt"), "ends in .cnf"),
        (("--map", "3,5", "--cell", "27,17", "--to", "a.cnf", "--encoding", "none"), "got none; allowed: one of"),
        (("--map", "3,5", "--cell", "27,17", "--to", "a.textproto", "--encoding", "orbit"), "of the form constraints"),
        (("--map", "3,5", "--cell", "27,17", "--to", "none/a.cnf"), "can't be written (No such file or directory)"),
        (("--map", "3,5", "--to", "a.cnf"), "--cell"),
    ],
)  # fmt: skip
def test_encode_refuses_in_one_line(run, tmp_path, arguments, message):
    code, out, err = run("encode", *arguments)
    assert (code, out, err.count("\n")) == (2, "", 1)
    assert message in err
    assert not list(tmp_path.iterdir())


def test_encode_refuses_what_is_too_long_or_too_large(run):
    for cell, map_ in (("20001,9", "3,5"), ("20000,9000", f"3,{10**3000 + 1}")):
        code, out, err = run("encode", "--map", map_, "--cell", cell, "--raw", "--to", "a.cnf")
        assert (code, out, err.count("\n")) == (3, "", 1)


def test_a_results_file_must_be_a_plain_file(run):
    code, out, err = run("trial", "--map", "3,5", "--lengths", "5..5", *PAIRS, "--to", "/dev/null")
    assert (code, out, err.count("\n")) == (2, "", 1)
    assert "a plain file" in err


# trial


CELLS = (
    '{"q": 3, "d": 5, "k": 5, "x": 3, "grade": "a"}\n{"q": 3, "d": -1, "k": 11, "x": 7, "cycles": 1, "grade": "b"}\n'
)
HARD = '{"q": 3, "d": -191137, "k": 56, "x": 37, "grade": "hard"}\n'
PAIRS = ("--encodings", "orbit", "--solvers", "minisat22,cadical195")


def test_trial_of_a_file_scores_each_pair_and_each_grade(document, tmp_path):
    (tmp_path / "cells.jsonl").write_text(CELLS)
    told = document("trial", "--cells", "cells.jsonl", *PAIRS, "--repeats", "2", "--to", "r.jsonl")
    assert (told["cells"], told["runs"], told["disagreements"], told["skipped"]) == (2, 8, [], [])
    assert [(s["encoding"], s["solver"], s["solved"]) for s in told["pairs"]] == [
        ("orbit", "cadical195", 4), ("orbit", "minisat22", 4),
    ]  # fmt: skip
    assert told["baseline"] == "orbit@minisat22"
    assert next(s for s in told["pairs"] if s["solver"] == "minisat22")["ratio"] == 1
    assert set(told["grades"]) == {"a", "b"}
    assert len(told["pairs"][0]["cactus"]) == 4
    lines = (tmp_path / "r.jsonl").read_text().splitlines()
    assert len(lines) == 8
    again = document("trial", "--cells", "cells.jsonl", *PAIRS, "--repeats", "2", "--to", "r.jsonl")
    assert again == told
    assert (tmp_path / "r.jsonl").read_text().splitlines() == lines


def test_trial_of_a_window_takes_its_live_cells_reduced_and_each_once(document):
    """3x + 5 and 3x + 25 with k = 5, x = 3: D = 5, so both reduce to d = 5."""
    told = document("trial", "--map", "3,5,25", "--lengths", "5..5", "--odd", "3..3", *PAIRS)
    assert told["cells"] == 1
    assert told["pairs"][0]["solved"] == 1


def test_trial_prints_a_table(run, tmp_path):
    (tmp_path / "cells.jsonl").write_text(CELLS)
    code, out, err = run("trial", "--cells", "cells.jsonl", *PAIRS, "--baseline", "orbit@cadical195")
    assert (code, err) == (0, "")
    for text in ("PAR-2", "ratios to orbit@cadical195", "minisat22", "2/2", "All answers agree"):
        assert text in out


def test_a_wrong_number_on_file_is_shouted_with_status_5(run, tmp_path):
    (tmp_path / "cells.jsonl").write_text('{"q": 3, "d": 5, "k": 5, "x": 3, "cycles": 3}\n')
    code, out, err = run("trial", "--cells", "cells.jsonl", "--encodings", "orbit", "--solvers", "minisat22")
    assert code == 5
    assert "DISAGREEMENT: orbit@minisat22: 3x+5 k = 5, x = 3: 2 cycles, 3 on file" in err
    assert "1 disagreement; please report this." in out


def test_unfinished_runs_count_twice_the_limit(document, tmp_path):
    (tmp_path / "cells.jsonl").write_text(HARD)
    told = document(
        "trial", "--cells", "cells.jsonl", "--encodings", "orbit", "--solvers", "minisat22", "--seconds", "0.5"
    )
    (score,) = told["pairs"]
    assert (score["solved"], score["par2_s"], score["ratio"]) == (0, 1.0, None)
    assert [entry["status"] for entry in told["unfinished"]] == ["limit"]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ((*PAIRS,), "lengths"),
        (("--cells", "none.jsonl", *PAIRS), "No such file"),
        (("--cells", "cells.jsonl", "--map", "3,5", "--lengths", "1..5", *PAIRS), "either this or a window"),
        (("--cells", "cells.jsonl", "--encodings", "orbit,", "--solvers", "minisat22"), "--encodings: got orbit,"),
        (("--cells", "cells.jsonl", "--encodings", "orbit", "--solvers", "none"), "solver: got none"),
        (("--cells", "cells.jsonl", *PAIRS, "--baseline", "x@y"), "--baseline: got x@y; allowed: one of orbit@"),
        (("--cells", "cells.jsonl", *PAIRS, "--seconds", "0"), "--seconds"),
        (("--map", "3,1", "--lengths", "3..3", *PAIRS), "0 live cells"),
        (("--cells", "cells.jsonl", *PAIRS, "--to", "cells.jsonl"), "results of a trial to continue"),
    ],
)
def test_trial_refuses_in_one_line(run, tmp_path, arguments, message):
    (tmp_path / "cells.jsonl").write_text(CELLS)
    code, out, err = run("trial", *arguments)
    assert (code, out, err.count("\n")) == (2, "", 1)
    assert message in err
    assert (tmp_path / "cells.jsonl").read_text() == CELLS


def test_ctrl_c_keeps_what_is_done_and_the_same_command_goes_on(program, document, tmp_path):
    (tmp_path / "cells.jsonl").write_text(CELLS + HARD)
    chosen, pairs = read_cells(tmp_path / "cells.jsonl"), [Pair("orbit", "minisat22")]
    seed = next(i for i in range(99) if [*order(chosen, pairs, 1, i)][-1].cell == chosen[-1])
    command = ("trial", "--cells", "cells.jsonl", "--encodings", "orbit", "--solvers", "minisat22", "--repeats", "1",
               "--seconds", "50", "--seed", seed, "--to", "r.jsonl")  # fmt: skip
    with program(*command, cwd=tmp_path) as process:
        results, deadline = tmp_path / "r.jsonl", time.monotonic() + 60
        while not (results.exists() and results.read_text()) and time.monotonic() < deadline:
            time.sleep(0.05)
        process.send_signal(signal.SIGINT)
        out, err = process.communicate(timeout=60)
    done = results.read_text().splitlines()
    assert (process.returncode, out) == (3, "")
    assert err == "solverkit: interrupted; what is done is in r.jsonl, the same command continues it\n"
    assert 1 <= len(done) <= 2
    (tmp_path / "cells.jsonl").write_text(CELLS)
    told = document(*command)
    assert told["pairs"][0]["solved"] == 2
    assert results.read_text().splitlines()[: len(done)] == done
