"""Exported files read by other programs, which must find the cycles of the cell, all of them, each once."""

import os
import re
import shutil
import subprocess

import pytest

from cycle_encodings._formula import Form
from cycle_encodings.orbit import ENCODING
from solverkit.exports.files import write_statement
from solverkit.registry import parts
from solverkit.window import Cell
from tests.reference import cycles_of_cell

# Empty and not, fixed points, one, several and repeated words, both signs, an offset with a factor in common with D,
# a bound, the wrong sign.
CELLS = [
    Cell(3, 1, 2, 1),
    Cell(3, -1, 1, 1),
    Cell(3, 1, 1, 1),
    Cell(3, -1, 11, 7),
    Cell(3, 5, 5, 3),
    Cell(3, 5, 5, 3, above=19),
    Cell(3, 5, 5, 3, above=10**9),
    Cell(3, 13, 8, 5),
    Cell(3, -139, 11, 7),
    Cell(3, 35, 8, 4),
    Cell(5, 3, 5, 2),
    Cell(5, -153, 9, 5),
    Cell(7, 9, 10, 3),
    Cell(11, 7, 7, 2),
]
REQUIRED = os.environ.get("SOLVERKIT_REQUIRE_ALL") == "1"


def expected(cell):
    return cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)


def absent(what):
    """Skip, or fail where everything has to be there."""
    if REQUIRED:
        pytest.fail(f"{what} is not installed and SOLVERKIT_REQUIRE_ALL=1")
    pytest.skip(f"{what} is not installed")


def package(name):
    try:
        return __import__(name)
    except ImportError:
        return absent(name)


def written(cell, suffix, tmp_path):
    path = tmp_path / f"cell{suffix}"
    if suffix == ".smt2":
        write_statement(cell, None, "", path)
    else:
        write_statement(ENCODING.encode(cell), Form.CNF, "orbit", path)
    return path


def least_variables(path, sign):
    (line,) = re.findall(rf"^{re.escape(sign)} least ?(.*)$", path.read_text(), re.MULTILINE)
    return [int(word) for word in line.split()]


def test_the_cells_differ():
    counts = [len(expected(cell)) for cell in CELLS]
    assert 0 in counts
    assert 1 in counts
    assert max(counts) > 10


@pytest.mark.parametrize("cell", CELLS, ids=str)
def test_smtlib_in_z3(cell, tmp_path):
    z3 = package("z3")
    solver = z3.Solver()
    solver.add(z3.parse_smt2_file(str(written(cell, ".smt2", tmp_path))))
    found = []
    while solver.check() == z3.sat:
        model = solver.model()
        (least,) = [each for each in model.decls() if each.name() == "n0"]
        found.append(model[least].as_long())
        solver.add(least() != model[least])
    assert solver.check() == z3.unsat
    assert sorted(found) == expected(cell)


@pytest.mark.parametrize("cell", CELLS, ids=str)
def test_smtlib_in_bitwuzla(cell, tmp_path):
    """Each answer is excluded by a line more in the file, which is then read anew."""
    package("bitwuzla")
    path = written(cell, ".smt2", tmp_path)
    found = []
    while (least := least_by_bitwuzla(path)) is not None:
        value, width = least
        assert value not in found
        found.append(value)
        line = f"(assert (not (= n0 (_ bv{value} {width}))))\n(check-sat)"
        path.write_text(path.read_text().replace("(check-sat)", line))
    assert sorted(found) == expected(cell)


@pytest.mark.parametrize(("cell", "told"), [(Cell(3, 5, 5, 3, above=19), "sat\n((n0 "), (Cell(3, 7, 5, 3), "unsat\n")])
def test_the_whole_script_runs_command_by_command(cell, told, tmp_path, capfd):
    bitwuzla = package("bitwuzla")
    parser = bitwuzla.Parser(bitwuzla.TermManager(), bitwuzla.Options())
    parser.parse(str(written(cell, ".smt2", tmp_path)), False, True)
    assert capfd.readouterr().out.startswith(told)


def least_by_bitwuzla(path):
    import bitwuzla

    terms, options = bitwuzla.TermManager(), bitwuzla.Options()
    options.set(bitwuzla.Option.PRODUCE_MODELS, True)
    parser = bitwuzla.Parser(terms, options)
    parser.parse(str(path), True, True)
    solver = parser.bitwuzla()
    answer = solver.check_sat()
    assert answer in {bitwuzla.Result.SAT, bitwuzla.Result.UNSAT}
    if answer == bitwuzla.Result.UNSAT:
        return None
    (least,) = [each for each in parser.get_declared_funs() if each.symbol() == "n0"]
    text = solver.get_value(least).value(2)
    return int(text, 2), len(text)


@pytest.mark.parametrize("group", ["closing", "odd-count", "order", "upper-bound", "lower-bound"])
def test_each_named_assertion_of_the_script_does_something(group, tmp_path):
    """Without it z3 finds an element too many; the upper bound follows from the rest, which z3 can show."""
    z3 = package("z3")
    cells = {"lower-bound": Cell(3, 5, 5, 3, above=19), "order": Cell(3, 35, 8, 4), "odd-count": Cell(3, 17, 7, 3)}
    cell = cells.get(group, Cell(3, 5, 8, 5))
    path = written(cell, ".smt2", tmp_path)
    kept = [line for line in path.read_text().splitlines() if f":named {group})" not in line]
    assert len(kept) == len(path.read_text().splitlines()) - 1
    solver = z3.Solver()
    solver.add(z3.parse_smt2_string("\n".join(kept)))
    n0 = next(d for d in each_constant(z3, solver) if d.decl().name() == "n0")
    solver.add(*(n0 != value for value in expected(cell)))
    assert solver.check() == (z3.unsat if group == "upper-bound" else z3.sat)


def each_constant(z3, solver):
    stack, seen = list(solver.assertions()), set()
    while stack:
        term = stack.pop()
        if term.get_id() in seen:
            continue
        seen.add(term.get_id())
        if z3.is_const(term) and term.decl().kind() == z3.Z3_OP_UNINTERPRETED:
            yield term
        stack.extend(term.children())


@pytest.mark.parametrize("cell", CELLS, ids=str)
def test_dimacs_in_python_sat(cell, tmp_path):
    from pysat.formula import CNF
    from pysat.solvers import Solver

    path = written(cell, ".cnf", tmp_path)
    bits = least_variables(path, "c")
    found = []
    with Solver(name="glucose4", bootstrap_with=CNF(from_file=str(path)).clauses) as solver:
        while solver.solve():
            true = set(solver.get_model())
            least = sum(1 << i for i, bit in enumerate(bits) if bit in true)
            assert least not in found
            found.append(least)
            solver.add_clause([-bit if bit in true else bit for bit in bits])
    assert sorted(found) == expected(cell)


def run_minisat(program, path):
    """MiniSat writes its answer to a file of its own."""
    out = path.with_suffix(".out")
    run = subprocess.run([program, "-verb=0", str(path), str(out)], capture_output=True, timeout=60, check=False)
    assert run.returncode in {10, 20}, run.stderr
    status, *rest = out.read_text().split("\n")
    assert status == {10: "SAT", 20: "UNSAT"}[run.returncode]
    return {int(word) for word in rest[0].split()} if status == "SAT" else None


def run_standard(program, path):
    """Exit status and v-lines of the competitions."""
    run = subprocess.run([program, str(path)], capture_output=True, text=True, timeout=60, check=False)
    assert run.returncode in {10, 20}, run.stderr
    lines = [line for line in run.stdout.splitlines() if line.startswith("v ")]
    return {int(word) for line in lines for word in line.split()[1:]} if run.returncode == 10 else None


PROGRAMS = {"minisat": run_minisat, "picosat": run_standard, "cadical": run_standard}


def test_dimacs_in_a_program_of_the_system(tmp_path):
    """Blocking clauses are appended to the file and counted in its problem line; one of the programs is enough."""
    there = {name: path for name in PROGRAMS if (path := shutil.which(name))}
    if not there:
        absent("minisat, picosat or cadical")
    for name, program in there.items():
        for cell in CELLS:
            path = written(cell, ".cnf", tmp_path)
            bits = least_variables(path, "c")
            found = []
            while (true := PROGRAMS[name](program, path)) is not None:
                least = sum(1 << i for i, bit in enumerate(bits) if bit in true)
                assert least not in found
                found.append(least)
                text = re.sub(r"^p cnf (\d+) (\d+)$", lambda m: f"p cnf {m[1]} {int(m[2]) + 1}", path.read_text(),
                              flags=re.MULTILINE)  # fmt: skip
                blocking = " ".join(str(-bit if bit in true else bit) for bit in bits)
                path.write_text(f"{text}{blocking} 0\n")
            assert sorted(found) == expected(cell), (name, cell)


def opb_constraints(path):
    """Return [(terms, sense, bound)] of an OPB file, read afresh and checked against its header."""
    lines = path.read_text().splitlines()
    variables, count = map(int, re.fullmatch(r"\* #variable= (\d+) #constraint= (\d+)", lines[0]).groups())
    constraints = []
    for line in lines:
        if not line.startswith("*"):
            *words, sense, bound, end = line.split()
            assert end == ";"
            terms = [(int(w), x) for w, x in zip(words[::2], words[1::2], strict=True)]
            assert all(1 <= int(x[1:]) <= variables for _, x in terms)
            constraints.append((terms, sense, int(bound)))
    assert len(constraints) == count
    return constraints


def solutions_by_exact(path):
    """Return the values of n0, with the Exact package."""
    exact = package("exact")
    constraints = opb_constraints(path)
    bits = [f"x{number}" for number in least_variables(path, "*")]
    solver = exact.Exact()
    for name in dict.fromkeys([*bits, *(x for terms, _, _ in constraints for _, x in terms)]):
        solver.addVariable(name)
    for terms, sense, bound in constraints:
        solver.addConstraint(terms, True, bound, sense == "=", bound)
    found = []
    while solver.runFull(False) == "SAT":
        values = solver.getLastSolutionFor(bits)
        found.append(sum(value << i for i, value in enumerate(values)))
        terms = [(-1 if value else 1, bit) for value, bit in zip(values, bits, strict=True)]
        solver.addConstraint(terms, True, 1 - sum(values))
    return sorted(found)


@pytest.mark.parametrize("cell", [cell for cell in CELLS if len(expected(cell)) < 10], ids=str)
def test_opb_in_exact(cell, tmp_path):
    assert solutions_by_exact(written(cell, ".opb", tmp_path)) == expected(cell)


@pytest.mark.parametrize("form", [Form.CONSTRAINTS, Form.INEQUALITIES])
def test_every_other_form_has_an_export(form, tmp_path):
    """Text of CP-SAT is parsed back by OR-Tools; OPB of inequalities is solved by Exact."""
    encoders = [part.value for part in parts("encodings") if part.value is not None and part.value.form is form]
    if not encoders:
        pytest.skip(f"no encoding has the form {form}")
    for encoder in encoders:
        for cell in CELLS[:8]:
            statement = encoder.encode(cell)
            if form is Form.INEQUALITIES:
                path = tmp_path / "cell.opb"
                write_statement(statement, form, encoder.name, path)
                shift = int(re.search(r"^\* offset (-?\d+) ", path.read_text(), re.MULTILINE)[1])
                assert [n + shift for n in solutions_by_exact(path)] == expected(cell), (encoder.name, cell)
            else:
                path = tmp_path / "cell.textproto"
                write_statement(statement, form, encoder.name, path)
                assert cp_solvable(path) == bool(expected(cell)), (encoder.name, cell)


def cp_solvable(path):
    from ortools.sat.python import cp_model

    model = cp_model.CpModel()
    assert model.Proto().parse_text_format(path.read_text())
    assert not model.Validate()
    solver = cp_model.CpSolver()
    solver.parameters.num_workers = 1
    answer = solver.Solve(model)
    assert answer in {cp_model.OPTIMAL, cp_model.FEASIBLE, cp_model.INFEASIBLE}
    return answer != cp_model.INFEASIBLE
