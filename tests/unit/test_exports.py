"""Exported files: what they say, that they are written whole, and what is refused."""

import errno
import os
import pickle
import re
from hashlib import sha256
from itertools import product
from types import SimpleNamespace

import pytest

from cycle_encodings._formula import Form
from cycle_encodings.orbit import ENCODING
from solverkit.errors import CapacityError, FileError, InputError
from solverkit.exports import files
from solverkit.exports.cp_text import cp_lines
from solverkit.exports.dimacs import dimacs_lines
from solverkit.exports.files import format_of, write_statement, write_whole
from solverkit.exports.opb import expanded, inequality_lines, opb_lines
from solverkit.exports.smtlib import smtlib_lines
from solverkit.window import Cell

CELL = Cell(3, 5, 27, 17, above=3)
FORMULA = ENCODING.encode(CELL)


def test_dimacs_digest_is_that_of_the_file_without_comments():
    lines = list(dimacs_lines(FORMULA, "orbit"))
    body = "".join(f"{line}\n" for line in lines if not line.startswith("c "))
    (told,) = [line.split()[-1] for line in lines if line.startswith("c digest sha256 ")]
    assert told == FORMULA.digest() == sha256(body.encode("ascii")).hexdigest()


def test_dimacs_comments_give_cell_encoding_least_element_groups_and_names():
    lines = list(dimacs_lines(FORMULA, "orbit"))
    assert "c cell q=3 d=5 k=27 x=17 above=3" in lines
    assert "c encoding orbit" in lines
    assert "c least " + " ".join(map(str, FORMULA.least_bits)) in lines
    groups = {}
    for line in lines:
        if match := re.fullmatch(r"c group (\d+)\.\.(\d+) (.+)", line):
            groups.setdefault(match[3], []).append((int(match[1]) - 1, int(match[2])))
    assert {name: tuple(ranges) for name, ranges in groups.items()} == dict(FORMULA.groups)
    names = {int(m[1]): m[2] for line in lines if (m := re.fullmatch(r"c variable (\d+) (.+)", line))}
    assert names == dict(FORMULA.names)


def test_comments_come_before_the_problem_line_and_every_line_is_ascii():
    for lines in (list(dimacs_lines(FORMULA, "naïve\nname")), list(opb_lines(FORMULA, "naïve\nname"))):
        kinds = [line[0] in "c*" for line in lines]
        assert kinds == sorted(kinds, reverse=True)
        assert all(line.isascii() and "\n" not in line for line in lines)


def test_opb_header_counts_variables_and_constraints():
    lines = list(opb_lines(FORMULA, "orbit"))
    assert lines[0] == f"* #variable= {FORMULA.variables} #constraint= {len(FORMULA.clauses)}"
    constraints = [line for line in lines if not line.startswith("*")]
    assert len(constraints) == len(FORMULA.clauses)
    assert all(re.fullmatch(r"([+-]\d+ x\d+ )+>= -?\d+ ;", line) for line in constraints)


def holds(line, values):
    """Evaluate one OPB constraint on bit values by number."""
    left, sense, bound = re.fullmatch(r"(.*) (>=|=) (-?\d+) ;", line).groups()
    words = left.split()
    total = sum(int(w) * values[int(x[1:])] for w, x in zip(words[::2], words[1::2], strict=True))
    return total >= int(bound) if sense == ">=" else total == int(bound)


@pytest.mark.parametrize("clause", [(), (1,), (-1,), (1, -2), (-1, -2, 3), (1, -1), (2, 2, -3)])
def test_an_opb_constraint_holds_exactly_where_its_clause_does(clause):
    formula = SimpleNamespace(cell=CELL, variables=3, clauses=(clause,), least_bits=(1,), groups={}, names={},
                              digest=lambda: "0")  # fmt: skip
    line = list(opb_lines(formula, ""))[-1]
    for bits in product((0, 1), repeat=3):
        values = dict(enumerate(bits, 1))
        assert holds(line, values) == any(values[abs(v)] == (v > 0) for v in clause)


@pytest.mark.parametrize(
    ("bounds", "rows"),
    [
        ([(-3, 4), (2, 6)], [(((0, 2), (1, -3)), -9, 1)]),
        ([(-2, 3), (0, 0), (1, 2)], [(((0, 1), (1, 5), (2, 1)), 2, 2), (((0, -1), (2, 4)), None, 5)]),
        ([(0, 5)], [(((0, 3), (0, -1)), 4, None)]),
        ([(0, 5), (3, 2)], []),
    ],
)
def test_expanded_rows_have_the_integer_points_of_the_model(bounds, rows):
    bits, constraints = expanded(bounds, rows)
    wanted = {
        point
        for point in product(*(range(low, high + 1) for low, high in bounds))
        if all(
            (least is None or sum(w * point[i] for i, w in terms) >= least)
            and (most is None or sum(w * point[i] for i, w in terms) <= most)
            for terms, least, most in rows
        )
    }
    found = []
    for pattern in product((0, 1), repeat=sum(map(len, bits))):
        values = {1: 0} | dict(enumerate(pattern, 1))
        if all(holds(line, values) for line in constraints):
            found.append(tuple(low + sum(values[b] << i for i, b in enumerate(places))
                               for (low, _), places in zip(bounds, bits, strict=True)))  # fmt: skip
    assert len(found) == len(set(found))
    assert set(found) == wanted


def test_linear_models_say_which_bits_are_the_least_element():
    """Any object with variables, rows and the index of n0 will do."""
    model = SimpleNamespace(
        cell=CELL, digest=lambda: "0", least=1,
        variables=[SimpleNamespace(name="a", low=0, high=1), SimpleNamespace(name="n[0]", low=4, high=9)],
        rows=[SimpleNamespace(terms=((0, 5), (1, 1)), low=None, high=9)],
    )  # fmt: skip
    lines = list(inequality_lines(model, "rows"))
    assert lines[0] == "* #variable= 4 #constraint= 2"
    assert "* least 2 3 4" in lines
    assert any(line.startswith("* offset 4 ") for line in lines)
    assert "* integer n[0] = 4 + 1*x2 2*x3 4*x4" in lines
    assert lines[-2:] == ["-1 x2 -2 x3 -4 x4 >= -5 ;", "-5 x1 -1 x2 -2 x3 -4 x4 >= -5 ;"]


def test_cp_sat_text_is_read_back_with_its_comments():
    from ortools.sat.python import cp_model

    model = cp_model.CpModel()
    numbers = [model.new_int_var(0, 9, "n[0]"), model.new_bool_var("odd\nnumber")]
    model.add(numbers[0] >= 3 * numbers[1] + 2)
    statement = SimpleNamespace(cell=CELL, model=model, sizes=lambda: {"variables": 2}, digest=lambda: "0")
    lines = list(cp_lines(statement, "some"))
    assert "# cell q=3 d=5 k=27 x=17 above=3" in lines
    again = cp_model.CpModel()
    assert again.Proto().parse_text_format("\n".join(lines))
    assert str(again.Proto()) == str(model.Proto())


def test_smtlib_names_an_assertion_for_each_condition_group():
    names = re.findall(r":named ([a-z-]+)\)", "\n".join(smtlib_lines(CELL)))
    assert names == ["step", "closing", "odd-count", "order", "lower-bound", "upper-bound", "ranges"]


def test_smtlib_of_a_cell_of_the_wrong_sign_is_false_by_its_ranges():
    assert "(assert (! false :named ranges))" in list(smtlib_lines(Cell(3, -5, 27, 17)))


def test_smtlib_refuses_lengths_beyond_the_exact_ones():
    with pytest.raises(CapacityError, match="20001"):
        list(smtlib_lines(Cell(3, 5, 20001, 17)))


@pytest.mark.parametrize("name", ["cell.cnf", "cell.opb", "cell.smt2"])
def test_the_same_cell_gives_the_same_bytes(name, tmp_path):
    contents = []
    for folder in ("one", "two"):
        (tmp_path / folder).mkdir()
        path = tmp_path / folder / name
        subject = (CELL, None, "") if name.endswith("smt2") else (ENCODING.encode(CELL), Form.CNF, "orbit")
        write_statement(*subject, path)
        contents.append(path.read_bytes())
    assert contents[0] == contents[1]


@pytest.mark.parametrize(
    ("subject", "name", "message"),
    [
        ((FORMULA, Form.CNF, "orbit"), "a.smt2", "written from the cell"),
        ((FORMULA, Form.CNF, "orbit"), "a.textproto", "of the form constraints"),
        ((FORMULA, Form.CONSTRAINTS, "other"), "a.cnf", "of the form cnf"),
        ((FORMULA, Form.CONSTRAINTS, "other"), "a.opb", "of the form cnf or inequalities"),
        ((CELL, None, ""), "a.cnf", "of the form cnf"),
        ((CELL, None, ""), "a.txt", r"\.cnf.*\.opb.*\.smt2.*\.textproto"),
        ((CELL, None, ""), "cnf", "ends in"),
    ],
)
def test_combinations_that_do_not_fit_are_refused_in_one_line_and_leave_nothing(subject, name, message, tmp_path):
    with pytest.raises(InputError, match=message) as caught:
        write_statement(*subject, tmp_path / name)
    assert "\n" not in str(caught.value)
    assert not list(tmp_path.iterdir())


def test_every_format_takes_at_least_one_form():
    assert {form for each in files.FORMATS.values() for form in each.lines} == {None, *Form}
    assert format_of(files.Path("x.y.cnf")).name == "DIMACS CNF"


def test_a_failure_leaves_the_old_file_and_nothing_else(tmp_path):
    path = tmp_path / "a.cnf"
    path.write_text("old")

    def lines():
        yield "new"
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    with pytest.raises(FileError, match="No space left on device") as caught:
        write_whole(path, lines())
    assert "\n" not in str(caught.value)
    assert [p.name for p in tmp_path.iterdir()] == ["a.cnf"]
    assert path.read_text() == "old"


def test_a_missing_folder_is_one_line(tmp_path):
    with pytest.raises(FileError, match="No such file or directory"):
        write_whole(tmp_path / "none" / "a.cnf", ["x"])


def test_written_files_have_the_usual_permissions(tmp_path):
    write_whole(tmp_path / "a.cnf", ["x"])
    (tmp_path / "b").write_text("x\n")
    assert (tmp_path / "a.cnf").stat().st_mode == (tmp_path / "b").stat().st_mode
    assert (tmp_path / "a.cnf").read_bytes() == (tmp_path / "b").read_bytes()


def test_file_errors_cross_processes():
    error = FileError("a.cnf", "can't be written")
    again = pickle.loads(pickle.dumps(error))
    assert (str(again), again.path, again.exit_status) == ("a.cnf: can't be written", "a.cnf", 2)
