"""The command line as a person or a script meets it, in processes of its own."""

import json
import os
import signal
import subprocess
import sys
import time

import pytest

from tests.published import published


def solverkit(*arguments, cwd, **environment):
    return subprocess.run(
        [sys.executable, "-m", "solverkit", *arguments],
        cwd=cwd, capture_output=True, text=True, timeout=200, env={**os.environ, **environment}, check=False,
    )  # fmt: skip


def document(*arguments, cwd, status=0):
    run = solverkit(*arguments, "--format", "json", cwd=cwd)
    assert (run.returncode, run.stderr) == (status, "")
    return json.loads(run.stdout)


def test_settling_3x_plus_1_finds_the_four_known_cycles_confirmed(tmp_path):
    """Böhm & Sontacchi (1978); Lagarias (1985)."""
    told = document("settle", "--map", "3,1", "--sign", "both", "--lengths", "1..60", cwd=tmp_path)
    assert told["complete"]
    expected = {(c["min"], c["k"], c["x"]) for c in published("CY-01")}
    assert {(c["least"], c["length"], c["odd"]) for c in told["cycles"]} == expected
    assert [c["least"] for c in told["cycles"]] == [-1, 1, -5, -17]
    assert {cell["evidence"] for cell in told["cells"]} == {"confirmed"}
    assert (
        told["excluded"]["sign"] + told["excluded"]["bound"] + told["excluded"]["words"] + len(told["cells"])
        == 2 * 1830
    )


def test_settle_documents_keep_the_contract(tmp_path):
    told = document("settle", "--map", "3,5", "--lengths", "1..12", "--all-cells", cwd=tmp_path)
    assert told["schema"] == 1
    assert len(told["cells"]) == 78
    keys = {"multiplier", "offset", "sign", "length", "odd", "bound", "status", "evidence", "methods", "seconds"}
    assert all(keys <= set(cell) for cell in told["cells"])
    assert {c["status"] for c in told["cells"]} == {"none", "found"}
    cycle = {"multiplier", "offset", "least", "length", "odd", "word", "gcd", "circuits"}
    assert all(cycle <= set(each) for each in told["cycles"])
    assert told["assumptions"] == []
    assert [(c["least"], c["length"], c["word"], c["gcd"]) for c in told["cycles"]] == [
        (5, 2, "10", 5), (1, 3, "100", 1), (19, 5, "11100", 1), (23, 5, "11010", 1),
    ]  # fmt: skip


def test_integers_beyond_2_to_53_are_texts(tmp_path):
    big = str(2**60 + 1)
    told = document("settle", "--map", f"3,{big}", "--lengths", "2..2", cwd=tmp_path)
    assert told["cycles"][0]["least"] == told["cycles"][0]["offset"] == big
    assert told["cells"][0]["bound"] == big


def test_triage_above_a_verified_limit_says_why_nothing_is_left(tmp_path):
    run = solverkit("triage", "--map", "3,1", "--above", "2^71", "--lengths", "1..2000", cwd=tmp_path)
    assert run.returncode == 0
    assert "No live cell: arithmetic alone shows that the window holds no cycle." in run.stdout
    assert "k = 1539, x = 971" in run.stdout.replace("\N{NARROW NO-BREAK SPACE}", "")
    told = document("triage", "--map", "3,1", "--above", "2^71", "--lengths", "1..2000", cwd=tmp_path)
    assert (told["live"], told["first_live"], told["cells"]) == (0, None, [])


def test_triage_lists_bounds_words_and_chances(tmp_path):
    """(11, 7): |D| = 139, 30 words, about 19 %; (12, 8): about 2 % (common practice, no source)."""
    told = document("triage", "--map", "3,-1", "--lengths", "1..100", cwd=tmp_path)
    cells = {(c["length"], c["odd"]): c for c in told["cells"]}
    assert len(cells) == told["live"]
    assert (cells[11, 7]["bound"], cells[11, 7]["words"]) == (35, 30)
    assert cells[11, 7]["expected"] == pytest.approx(30 / 139)
    assert cells[11, 7]["chance"] == pytest.approx(0.195, abs=0.005)
    assert cells[12, 8]["chance"] == pytest.approx(0.016, abs=0.002)
    assert all(c["method"] and c["estimate_s"] >= 0 for c in told["cells"])


@pytest.mark.parametrize("name", ["LB-01", "LB-11"])
def test_triage_of_vast_windows_names_the_published_first_length(name, tmp_path):
    """Eliahou (1993); Barina (2021)."""
    data = published(name)
    told = document(
        "triage", "--map", "3,1", "--above", data["B"], "--lengths", "1..10^12", "--most", "3", cwd=tmp_path
    )
    assert told["first_live"] == {"length": data["k"], "odd": data["x"]}
    assert told["cells"][0]["total_steps"] == data["k"] + data["x"]
    assert len(told["cells"]) == 3


def test_a_window_file_and_options_say_the_same(tmp_path):
    (tmp_path / "w.toml").write_text(
        'title = "one"\n[map]\nmultiplier = 3\noffsets = ["5..9"]\n[cycle]\nlengths = "1..9"\nsign = "both"\n'
        '[shape]\ncircuits = 1\n'
    )  # fmt: skip
    told = document("settle", "w.toml", cwd=tmp_path)
    assert {c["circuits"] for c in told["cycles"]} == {1}
    free = document("settle", "--map", "3,5..9", "--lengths", "1..9", "--sign", "both", cwd=tmp_path)
    assert [c for c in free["cycles"] if c["circuits"] == 1] == told["cycles"]
    assert len(free["cycles"]) > len(told["cycles"])


def test_assumptions_are_recorded_and_used(tmp_path):
    (tmp_path / "w.toml").write_text(
        '[map]\nmultiplier = 3\noffsets = 1\n[cycle]\nlengths = "1..60"\n'
        '[assume]\nno_cycle_below = "2^71"\nsource = "a verification in print"\n'
    )  # fmt: skip
    told = document("settle", "w.toml", cwd=tmp_path)
    assert told["assumptions"] == [{"no_cycle_below": str(2**71), "source": "a verification in print"}]
    assert (told["cells"], told["cycles"], told["complete"]) == ([], [], True)


def test_catalog_lists_the_parts(tmp_path):
    told = document("catalog", cwd=tmp_path)
    assert {e["name"] for e in told["engines"]} >= {"sweep"}
    assert {e["name"] for e in told["encodings"]} >= {"orbit"}
    solvers = {e["name"]: e for e in told["solvers"]}
    assert solvers["cadical195"]["proofs"]
    assert not solvers["minisat22"]["proofs"]
    assert not solvers["kissat404"]["incremental"]
    assert all(not e.get("broken") for room in ("engines", "encodings", "solvers") for e in told[room])


WRONG = [
    (["settle", "--map", "4,5", "--lengths", "1..4"], "--map multiplier"),
    (["settle", "--map", "3,4", "--lengths", "1..4"], "--map offset"),
    (["settle", "--map", "3,0", "--lengths", "1..4"], "--map offset"),
    (["settle", "--map", "1,1", "--lengths", "1..4"], "--map multiplier"),
    (["settle", "--map", "3", "--lengths", "1..4"], "--map"),
    (["settle", "--map", "3,1", "--lengths", "9..4"], "--lengths"),
    (["settle", "--map", "3,1", "--lengths", "-4..4"], "--lengths"),
    (["triage", "--map", "3,1", "--lengths", "1..10^30"], "--lengths"),
    (["triage", "--map", "3,1", "--lengths", "x"], "--lengths"),
    (["triage", "--map", "3,1"], "lengths"),
    (["triage", "--lengths", "1..3"], "map"),
    (["triage", "--map", "3,1", "--lengths", "5", "--above", "-1"], "--above"),
    (["triage", "--map", "3,1", "--lengths", "5", "--odd", "3..2"], "--odd"),
    (["triage", "--map", "3,1", "--lengths", "5", "--sign", "up"], "--sign"),
    (["triage", "--map", "3,1", "--lengths", "5", "--bound", "loose"], "--bound"),
    (["triage", "--map", "3,1", "--lengths", "5", "--most", "-1"], "--most"),
    (["settle", "--map", "3,1", "--lengths", "5", "--jobs", "0"], "--jobs"),
    (["settle", "--map", "3,1", "--lengths", "5", "--methods", "guess"], "methods"),
    (["settle", "--map", "3,1", "--lengths", "5", "--budget", "nan"], "--budget"),
    (["settle", "--map", "3,1", "--lengths", "5", "--limit-memory", "9" * 400], "--limit-memory"),
    (["triage", "--map", "3,1", "--lengths", "5", "--offsets-at-most", "9"], "--offsets-at-most"),
    (["triage", "--map", "3,any", "--lengths", "5"], "--offsets-at-most"),
    (["settle", "--map", "3,1", "--lengths", "1..10^9", "--above", "2^71", "--all-cells"], "--all-cells"),
    (["settle", "--map", "3,1", "--lengths", "5", "--evidence", "sure"], "--evidence"),
    (["settle", "absent.toml"], "window file"),
    (["settle", "--dossier"], "--dossier"),
    (["settle", "--nonsense"], "--nonsense"),
    (["nonsense"], "nonsense"),
]


@pytest.mark.parametrize(
    ("arguments", "named"), WRONG, ids=lambda value: " ".join(value) if isinstance(value, list) else ""
)
def test_wrong_input_gets_one_line_and_status_2(arguments, named, tmp_path):
    run = solverkit(*arguments, cwd=tmp_path)
    assert (run.returncode, run.stdout) == (2, "")
    assert run.stderr.count("\n") == 1
    assert named in run.stderr
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("command", ["triage", "settle", "catalog"])
def test_help_has_an_example(command, tmp_path):
    run = solverkit(command, "--help", cwd=tmp_path)
    assert run.returncode == 0
    assert f"Example: solverkit {command}" in run.stdout


def test_a_dossier_of_another_window_or_in_a_file_is_refused(tmp_path):
    assert solverkit("settle", "--map", "3,5", "--lengths", "1..5", "--dossier", "d", cwd=tmp_path).returncode == 0
    other = solverkit("settle", "--map", "3,7", "--lengths", "1..5", "--dossier", "d", cwd=tmp_path)
    assert (other.returncode, other.stdout) == (2, "")
    assert "another window" in other.stderr
    (tmp_path / "f").write_text("x")
    blocked = solverkit("settle", "--map", "3,7", "--lengths", "1..5", "--dossier", "f", cwd=tmp_path)
    assert (blocked.returncode, blocked.stderr.count("\n")) == (2, 1)


def test_an_open_cell_ends_with_status_3_and_a_reason(tmp_path):
    cell = ["--map", "3,1", "--lengths", "17087915", "--odd", "10781274", "--above", "2^47"]
    told = document("settle", *cell, "--budget", "0.01", "--methods", "matching", cwd=tmp_path, status=3)
    assert not told["complete"]
    (cell,) = told["cells"]
    assert (cell["status"], cell["evidence"]) == ("open", None)
    assert "matching" in cell["reason"]


def test_a_missing_cluster_library_or_scheduler_is_one_line(tmp_path):
    (tmp_path / "distributed.py").write_text("raise ImportError('not here')\n")
    run = solverkit("settle", "--map", "3,5", "--lengths", "1..9", "--cluster", "tcp://127.0.0.1:1", cwd=tmp_path,
                    PYTHONPATH=str(tmp_path))  # fmt: skip
    assert (run.returncode, run.stderr.count("\n")) == (4, 1)
    assert "dask.distributed is missing" in run.stderr


def test_output_into_a_closed_pipe_is_no_traceback(tmp_path):
    command = (
        f"{sys.executable} -m solverkit triage --map 3,-1 --lengths 1..100 --format json | head -c 100 > /dev/null"
    )
    run = subprocess.run(["bash", "-c", command], cwd=tmp_path, capture_output=True, text=True, check=False)
    assert "Traceback" not in run.stderr


@pytest.mark.parametrize("command", [["triage"], ["settle"]])
def test_a_terminal_that_knows_only_ascii_gets_its_tables(command, tmp_path):
    run = solverkit(*command, "--map", "3,-1", "--lengths", "1..12", cwd=tmp_path, PYTHONIOENCODING="ascii")
    assert (run.returncode, run.stderr) == (0, "")
    assert "words" in run.stdout or "Settled" in run.stdout


def test_an_interrupt_leaves_a_dossier_that_the_same_command_continues(tmp_path):
    command = [sys.executable, "-m", "solverkit", "settle", "--map", "3,5..99", "--lengths", "1..60", "--dossier", "d"]
    process = subprocess.Popen(command, cwd=tmp_path, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    ledger = tmp_path / "d" / "ledger.sqlite"
    while not ledger.exists():
        time.sleep(0.05)
    time.sleep(1.5)
    second = solverkit("settle", "--map", "3,5..99", "--lengths", "1..60", "--dossier", "d", cwd=tmp_path)
    assert (second.returncode, second.stderr.count("\n")) == (2, 1)
    assert "another run has it open" in second.stderr
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=30)
    assert (process.returncode, out, err.count("\n")) == (3, "", 1)
    assert "the same command continues it" in err
