"""Back ends for constraint models and linear models: exact lists, honest failures, false solutions caught."""

import builtins
import signal
from itertools import pairwise
from types import SimpleNamespace

import pytest

from cycle_encodings._constraint_model import ModelDraft
from cycle_encodings._linear_model import IntegerVariable, LinearDraft, LinearModel, Row
from cycle_encodings.constraints import ENCODING as CONSTRAINTS
from cycle_encodings.inequalities import ENCODING as INEQUALITIES
from solverkit.errors import CapacityError, ContradictionError, InputError, MissingPartError
from solverkit.exact.bounds import balanced_bound
from solverkit.methods import Budget
from solverkit.registry import parts
from solverkit.settle.choice import method_named
from solverkit.solvers._isolation import SolverProcess
from solverkit.solvers.constraint import ConstraintSolver, UndecidedError
from solverkit.solvers.integer import EXACT_IN_DOUBLES, IntegerSolver
from solverkit.solvers.pseudo_boolean import PseudoBooleanSolver
from solverkit.window import Cell
from tests.reference import cycles_of_cell

CELL = Cell(3, 13, 8, 5)
CYCLES = [211, 227, 251, 259, 283, 287, 319]


def one_row(cell):
    """The cycle equation (D/d)·n_0 = β alone, for d | D, on truth values "the j-th odd step is step i", in order."""
    q, k, x = cell.multiplier, cell.length, cell.odd
    draft = LinearDraft(cell)
    least = draft.integer(cell.above + 1, balanced_bound(cell), "n[0]")
    places = [{i: draft.integer(0, 1, f"{j}@{i}") for i in range(j, k - x + j + 1)} for j in range(x)]
    draft.group("odd count")
    for choice in places:
        draft.row([(index, 1) for index in choice.values()], 1, 1)
    for one, two in pairwise(places):
        draft.row([(index, i) for i, index in two.items()] + [(index, -i) for i, index in one.items()], 1, None)
    draft.group("equation")
    beta = [(index, -(q ** (x - 1 - j)) << i) for j, choice in enumerate(places) for i, index in choice.items()]
    draft.row([(least, cell.determinant // cell.offset), *beta], 0, 0)
    return draft.finished(least)


@pytest.mark.parametrize("solver", ["scip", "highs"])
def test_a_false_solution_of_the_cycle_equation_is_caught(solver):
    """The cell is empty, as the exact model shows; all numbers are exact doubles, and still a point is claimed."""
    cell = Cell(3, -8369, 29, 20)
    assert list(ConstraintSolver().least_elements(CONSTRAINTS.encode(cell))) == []
    model = one_row(cell)
    assert model.largest() <= EXACT_IN_DOUBLES
    point = next(IntegerSolver(solver).points(model))
    assert not point.keeps_rows
    assert not point.genuine


@pytest.mark.parametrize("solver", ["scip", "highs"])
def test_false_points_are_excluded_and_only_cycles_yielded(solver, monkeypatch):
    """Two false claims, one cycle, then "infeasible": only the cycle comes out."""
    model = INEQUALITIES.encode(CELL)
    width = len(model.variables)
    claims = [(212, 0), (227, 1), (300, 2)]
    asked = []

    def claimed(self, asked_model):
        asked.append(asked_model)
        if len(asked) > len(claims):
            return None
        return (claims[len(asked) - 1][0],) + (0,) * (width - 1 + claims[len(asked) - 1][1])

    monkeypatch.setattr(IntegerSolver, "_solved", claimed)
    assert list(IntegerSolver(solver).least_elements(model)) == [227]
    assert [len(each.rows) - len(model.rows) for each in asked] == [0, 2, 4, 6]


@pytest.mark.parametrize("claim", [10**6, 227])
def test_claims_that_the_model_excludes_are_no_answer(claim, monkeypatch):
    """Outside the range of n_0, or the same cycle again."""
    model = INEQUALITIES.encode(CELL)

    def claimed(self, asked):
        return (claim,) + (0,) * (len(asked.variables) - 1)

    monkeypatch.setattr(IntegerSolver, "_solved", claimed)
    with pytest.raises(UndecidedError, match=str(claim)):
        list(IntegerSolver("scip").least_elements(model))


@pytest.mark.parametrize("solver", ["scip", "highs"])
def test_integer_programs_find_all_cycles_of_a_small_cell_and_claim_no_completeness(solver):
    assert cycles_of_cell(3, 13, 8, 5) == CYCLES
    assert sorted(IntegerSolver(solver).least_elements(INEQUALITIES.encode(CELL))) == CYCLES
    assert not IntegerSolver(solver).abilities.exact
    method = method_named(f"mip:inequalities@{solver}")
    result = method.run(method.pieces((CELL,), 1.0)[0], Budget())
    assert sorted(hit.least for hit in result.hits) == CYCLES
    assert not result.complete
    assert "floating-point" in result.reason


@pytest.mark.parametrize("solver", ["scip", "highs"])
def test_numbers_that_are_no_exact_doubles_are_refused(solver):
    model = INEQUALITIES.encode(Cell(3, 2**58 - 3**36, 58, 36))
    assert model.largest() > EXACT_IN_DOUBLES
    with pytest.raises(CapacityError, match="53"):
        next(IntegerSolver(solver).least_elements(model))


def test_pseudo_boolean_numbers_may_have_any_size():
    """A model that needs 200 bits: n_0 = 2^200 + 2·v, 0 ≤ v ≤ 1, and n_0 odd has no point."""
    base = 2**200
    variables = (IntegerVariable("n[0]", base, base + 3), IntegerVariable("v", 0, 1), IntegerVariable("w", 0, 2))
    rows = (Row(((0, 1), (1, -2)), base, base), Row(((0, 1), (2, -2)), base + 1, base + 1))
    assert list(PseudoBooleanSolver().least_elements(LinearModel(CELL, variables, rows, {}, 0))) == []


def test_constraint_solver_completes_lists_with_every_option():
    model = CONSTRAINTS.encode(CELL)
    digest = model.digest()
    for solver in (ConstraintSolver(linearization=2, probing=0, seed=7), ConstraintSolver(workers=2)):
        assert sorted(solver.least_elements(model)) == CYCLES
    assert model.digest() == digest


def test_an_invalid_constraint_model_is_named_before_solving():
    draft = ModelDraft(CELL, "too large")
    large = draft.integer(1, 2**60, "n[0]")
    draft.model.add(16 * large == 16)
    with pytest.raises(CapacityError, match="invalid"):
        next(ConstraintSolver().least_elements(draft.finished(large)))


@pytest.mark.parametrize("status", ["UNKNOWN", "MODEL_INVALID"])
def test_without_an_answer_of_cp_sat_the_cell_stays_open(status, monkeypatch):
    from ortools.sat.python import cp_model

    monkeypatch.setattr(cp_model.CpSolver, "solve", lambda self, model: getattr(cp_model, status))
    monkeypatch.setattr(cp_model.CpSolver, "status_name", lambda self, given: status)
    with pytest.raises(UndecidedError, match=status):
        next(ConstraintSolver().least_elements(CONSTRAINTS.encode(CELL)))


@pytest.mark.parametrize("status", ["ABNORMAL", "NOT_SOLVED", "UNKNOWN_STATUS", "MODEL_INVALID"])
def test_without_an_answer_of_an_integer_program_the_cell_stays_open(status, monkeypatch):
    from ortools.linear_solver.python import model_builder

    monkeypatch.setattr(model_builder.Solver, "solve", lambda self, model: getattr(model_builder.SolveStatus, status))
    with pytest.raises(UndecidedError, match=status):
        next(IntegerSolver("scip").least_elements(INEQUALITIES.encode(CELL)))


@pytest.mark.parametrize("status", ["TIMEOUT", "INCONSISTENT", "PAUSED"])
def test_without_an_answer_of_exact_the_cell_stays_open(status, monkeypatch):
    import exact

    quiet = SimpleNamespace(addVariable=lambda *_: None, addConstraint=lambda *_: None, runFull=lambda _: status)
    monkeypatch.setattr(exact, "Exact", lambda: quiet)
    with pytest.raises(UndecidedError, match=status):
        next(PseudoBooleanSolver().least_elements(INEQUALITIES.encode(CELL)))


def test_exact_solvers_that_give_no_cycle_contradict_themselves():
    """A model without the map: n_0 = 5 is no cycle of the cell."""
    rows = (Row(((0, 1),), 5, 5),)
    with pytest.raises(ContradictionError):
        next(PseudoBooleanSolver().least_elements(LinearModel(CELL, (IntegerVariable("n[0]", 1, 9),), rows, {}, 0)))
    draft = ModelDraft(CELL, "without the map")
    with pytest.raises(ContradictionError):
        next(ConstraintSolver().least_elements(draft.finished(draft.integer(5, 5, "n[0]"))))


@pytest.mark.parametrize(
    ("solver", "encoding", "library"),
    [
        (PseudoBooleanSolver(), INEQUALITIES, "exact"),
        (IntegerSolver("highs"), INEQUALITIES, "ortools.linear_solver.python"),
        (ConstraintSolver(), CONSTRAINTS, "ortools.sat.python"),
    ],
    ids=lambda value: getattr(value, "name", value),
)
def test_a_missing_library_is_said_when_the_back_end_is_used(solver, encoding, library, monkeypatch):
    model, load = encoding.encode(CELL), builtins.__import__

    def refuse(name, *arguments):
        if name == library:
            raise ImportError(name)
        return load(name, *arguments)

    monkeypatch.setattr(builtins, "__import__", refuse)
    with pytest.raises(MissingPartError, match="install"):
        next(solver.least_elements(model))


@pytest.mark.parametrize(
    ("encoding", "solver"),
    [("constraints", "cpsat"), ("inequalities", "exact"), ("inequalities", "scip"), ("inequalities", "highs")],
)
def test_a_process_that_has_used_the_solver_ends_when_told(encoding, solver):
    """Exact catches SIGTERM; a program that had used it would wait for its child for ever."""
    process = SolverProcess()
    try:
        assert sorted(process.answer(CELL, encoding, solver, None, None).least) == CYCLES
        process._process.terminate()
        process._process.join(10)
        assert process._process.exitcode == -signal.SIGTERM
    finally:
        process.close()


def test_back_ends_are_listed_with_versions():
    there = {part.name: part.value for part in parts("solvers")}
    assert {"cpsat": "cp", "scip": "mip", "highs": "mip", "exact": "pb"}.items() <= {
        name: str(back_end.kind) for name, back_end in there.items()
    }.items()
    assert all(there[name].version for name in ("cpsat", "scip", "highs", "exact"))


def test_wild_options_are_refused():
    with pytest.raises(InputError, match="workers"):
        ConstraintSolver(workers=0)
    with pytest.raises(InputError, match="solver"):
        IntegerSolver("nobody")
