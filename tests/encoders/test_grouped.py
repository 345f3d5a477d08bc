"""The grouped encoding, judged by its full solution sets, with all its groups and without some."""

import random

import pytest
from pysat.solvers import Solver

from cycle_encodings.grouped import ENCODING, Grouped, elements_of
from solverkit.errors import InputError
from solverkit.exact.bounds import balanced_bound
from solverkit.window import Cell, Sign
from tests.reference import conditions_met, cycles_of_cell

GROUPS = ("step", "closing", "odd count", "order", "lower bound", "upper bound")


def without(encoding, *groups):
    """The clauses of all groups but these."""
    return [
        clause
        for name, ranges in encoding.groups.items()
        if name not in groups
        for start, stop in ranges
        for clause in encoding.clauses[start:stop]
    ]


def solution_set(encoding, clauses, solver="cadical195"):
    """Values of n_0 over all models; each is blocked once it is found, so one that comes twice fails."""
    found = set()
    with Solver(name=solver, bootstrap_with=clauses) as oracle:
        while oracle.solve():
            n = encoding.decode(oracle.get_model())
            assert n not in found
            found.add(n)
            oracle.add_clause(list(encoding.blocking(n)))
    return found


def admitted(cell, width, *left_out):
    """The n_0 < 2^width that meet the conditions, by iterating the map from each."""
    kept = set(GROUPS) - set(left_out)
    return {n for n in range(1 << width) if kept <= conditions_met(cell, n)}


def drawn_cells(count, seed, longest=12, most=100, widest=None):
    rng = random.Random(seed)
    while count:
        q, k = rng.choice([3, 3, 5, 7, 9, 11]), rng.randint(1, longest)
        x = rng.randint(1, k)
        determinant = 2**k - q**x
        size = rng.randrange(1, 300, 2)
        if rng.random() < 0.35:
            size = abs(determinant) // rng.choice([f for f in range(1, 50, 2) if determinant % f == 0])
        wrong = rng.random() < 0.1
        cell = Cell(q, size if (determinant > 0) != wrong else -size, k, x, rng.choice([0, 0, 0, 1, 5, 30]))
        if widest is not None and ENCODING.widths(cell)[0] > widest:
            continue
        expected = cycles_of_cell(q, cell.offset, k, x, cell.above)
        if len(expected) <= most:
            count -= 1
            yield cell, expected


def test_solution_sets_of_160_random_cells_equal_brute_force():
    total = 0
    for cell, expected in drawn_cells(160, seed=31):
        encoding = ENCODING.encode(cell)
        assert solution_set(encoding, encoding.clauses) == set(expected), cell
        total += len(expected)
    assert total > 160


@pytest.mark.parametrize("slack", [0, 1, 5])
def test_slack_changes_the_formula_but_not_its_solutions(slack):
    for cell, expected in drawn_cells(12, seed=slack, longest=9):
        encoding = Grouped(slack=slack).encode(cell)
        assert solution_set(encoding, encoding.clauses, "glucose4") == set(expected), cell


@pytest.mark.parametrize("group", GROUPS[1:])
def test_without_a_group_the_solutions_are_those_of_the_other_conditions(group):
    """So no condition hides in another group nor in a width; one condition at a time, then it with the bounds."""
    for cell, _ in drawn_cells(8, seed=GROUPS.index(group), longest=9, widest=8):
        encoding = ENCODING.encode(cell)
        for left_out in ((group,), (group, "lower bound", "upper bound")):
            found = solution_set(encoding, without(encoding, *left_out))
            assert found == admitted(cell, len(encoding.least_bits), *left_out), (cell, left_out)


def test_leaving_groups_out_never_loses_a_solution():
    rng = random.Random(8)
    for cell, expected in drawn_cells(40, seed=9, longest=10, widest=10):
        encoding = ENCODING.encode(cell)
        left_out = rng.sample(GROUPS, rng.randint(1, 5))
        clauses = without(encoding, *left_out)
        with Solver(name="cadical195", bootstrap_with=clauses) as oracle:
            for least in expected:
                bits = [bit if least >> i & 1 else -bit for i, bit in enumerate(encoding.least_bits)]
                assert oracle.solve(assumptions=bits), (cell, left_out, least)


@pytest.mark.parametrize("cell", [Cell(3, -37, 9, 6), Cell(9, 5, 8, 2), Cell(5, -7, 7, 4), Cell(3, 1, 10, 6, 100)])
def test_the_step_group_has_one_model_for_each_first_element_its_orbit(cell):
    """Negative elements and the largest ones included: no image is cut off by a width."""
    encoding = ENCODING.encode(cell)
    with Solver(name="glucose4", bootstrap_with=without(encoding, *GROUPS[1:])) as oracle:
        for n in range(1 << len(encoding.least_bits)):
            bits = [bit if n >> i & 1 else -bit for i, bit in enumerate(encoding.least_bits)]
            assert oracle.solve(assumptions=bits)
            assert elements_of(encoding, oracle.get_model()) == tuple(cell.map.orbit(n, cell.length))


def test_without_the_step_elements_are_free():
    """Every element can be even, odd, all zeros and all ones, whatever the first one is."""
    encoding = ENCODING.encode(Cell(5, -1, 6, 2))
    clauses = without(encoding, *GROUPS)
    used = {abs(literal) for clause in clauses for literal in clause}
    named = {variable for variable, name in encoding.names.items() if name.startswith("n[")}
    assert len(named) == sum(ENCODING.widths(encoding.cell))
    assert not used & named


def test_size_formula_is_exact():
    for cell, _ in drawn_cells(120, seed=77, longest=14, most=10**9):
        encoding = ENCODING.encode(cell)
        assert ENCODING.size(cell) == len(encoding.clauses), cell
        q, d, k, x = cell.multiplier, cell.offset, cell.length, cell.odd
        width = ENCODING.widths(cell)
        w = width[0]
        e = (d + 1) // 2
        rows = ((q - 1) // 2).bit_count() + (e > 1 or e < 0)
        variables = 1 + w + sum(width[i] - 1 + rows * (2 * width[i + 1] - 1) for i in range(k))
        variables += sum(min(i, x + 1) for i in range(1, k + 1))
        variables += sum(w + (width[i] - (d < 0) > w) for i in range(1, k))
        assert variables == encoding.variables, cell


def test_groups_name_every_clause_once():
    for cell, _ in drawn_cells(20, seed=5):
        encoding = ENCODING.encode(cell)
        covered = sorted(i for ranges in encoding.groups.values() for a, b in ranges for i in range(a, b))
        assert covered == list(range(len(encoding.clauses)))
        assert set(encoding.groups) <= {"constants", *GROUPS}
        assert encoding == ENCODING.encode(cell)


def test_no_bound_hides_in_the_width():
    """The first element is wide enough for U' and for B + 1."""
    for cell, _ in drawn_cells(60, seed=6):
        limit = 1 << ENCODING.widths(cell)[0]
        assert limit > balanced_bound(cell)
        assert limit > cell.above + 1


def test_negative_elements_and_wild_options_are_refused():
    with pytest.raises(InputError, match="cell"):
        ENCODING.encode(Cell(3, 1, 3, 2, sign=Sign.NEGATIVE))
    with pytest.raises(InputError, match="slack"):
        Grouped(slack=65)
