"""The orbit encoding, judged by its full solution sets."""

import random
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pysat.solvers import Solver

from cycle_encodings.orbit import ENCODING, Orbit
from solverkit.errors import InputError
from solverkit.window import Cell, Sign
from tests.reference import cycles_of_cell
from tests.strategies import cells


def solution_set(encoding, solver="cadical195"):
    """Least elements of all models; a least element that comes twice would never end, so it fails at once."""
    found = []
    with Solver(name=solver, bootstrap_with=encoding.clauses) as oracle:
        while oracle.solve():
            least = encoding.decode(oracle.get_model())
            assert least not in found
            found.append(least)
            oracle.add_clause(list(encoding.blocking(least)))
    return sorted(found)


def drawn_cells(count, seed):
    """Random cells with q in 3 … 13, k ≤ 14, both signs, a third of them with an offset that divides D."""
    rng = random.Random(seed)
    while count:
        q, k = rng.choice([3, 5, 7, 9, 11, 13]), rng.randint(1, 14)
        x = rng.randint(1, k)
        determinant = 2**k - q**x
        size = rng.randrange(1, 400, 2)
        if rng.random() < 0.35:
            size = abs(determinant) // rng.choice([f for f in range(1, 50, 2) if determinant % f == 0])
        cell = Cell(q, size if determinant > 0 else -size, k, x, rng.choice([0, 0, 0, 1, 5, 30]))
        expected = cycles_of_cell(q, cell.offset, k, x, cell.above)
        if len(expected) <= 150:
            count -= 1
            yield cell, expected


def test_solution_sets_of_300_random_cells_equal_brute_force():
    total = 0
    for cell, expected in drawn_cells(300, seed=20):
        assert solution_set(ENCODING.encode(cell)) == expected, cell
        total += len(expected)
    assert total > 300


@settings(max_examples=60)
@given(cells(longest=10), st.integers(0, 24), st.booleans())
def test_options_change_the_formula_but_not_its_solutions(cell, depth, guards):
    expected = cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)
    if len(expected) < 100:
        assert solution_set(Orbit(depth=depth, guards=guards).encode(cell), "glucose4") == expected


@given(cells(longest=10))
def test_the_same_cell_gives_the_same_formula(cell):
    assert ENCODING.encode(cell) == ENCODING.encode(replace(cell))
    assert ENCODING.encode(cell).digest() == Orbit().encode(cell).digest()


@given(cells(longest=10))
def test_groups_name_every_clause_once(cell):
    encoding = ENCODING.encode(cell)
    covered = sorted(i for ranges in encoding.groups.values() for start, stop in ranges for i in range(start, stop))
    assert covered == list(range(len(encoding.clauses)))
    assert all(1 <= abs(literal) <= encoding.variables for clause in encoding.clauses for literal in clause)


def test_groups_of_a_cell_with_cycles_are_the_named_conditions():
    encoding = ENCODING.encode(Cell(3, 5, 27, 17, above=3))
    assert set(encoding.groups) == {
        "constants", "step", "closing", "odd count", "order", "lower bound", "upper bound", "ranges", "residues",
    }  # fmt: skip


@pytest.mark.parametrize(
    ("group", "cell"),
    [
        ("step", Cell(3, 1, 8, 5)),
        ("closing", Cell(3, 5, 8, 5)),
        ("order", Cell(3, 35, 8, 4)),
        ("odd count", Cell(3, 17, 7, 3)),
    ],
)
def test_a_condition_left_out_is_missed(group, cell):
    """Each group does something of its own, once the ranges, which follow from all of them, are left out too."""
    encoding = Orbit(depth=0, guards=False).encode(cell)
    left_out = {group, "ranges"}
    keep = [
        clause
        for name, ranges in encoding.groups.items()
        if name not in left_out
        for start, stop in ranges
        for clause in encoding.clauses[start:stop]
    ]
    with Solver(name="cadical195", bootstrap_with=keep) as oracle:
        found = set()
        while oracle.solve() and len(found) < 400:
            least = encoding.decode(oracle.get_model())
            found.add(least)
            oracle.add_clause(list(encoding.blocking(least)))
    assert found != set(cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above))


def test_formula_survives_dimacs(tmp_path):
    """Written and read back by python-sat."""
    from pysat.formula import CNF

    encoding = ENCODING.encode(Cell(3, 5, 27, 17))
    encoding.cnf().to_file(str(tmp_path / "cell.cnf"))
    again = CNF(from_file=str(tmp_path / "cell.cnf"))
    assert (again.nv, [tuple(c) for c in again.clauses]) == (encoding.variables, list(encoding.clauses))


def test_rough_size_is_within_a_factor_of_three():
    for cell in [Cell(3, 5, 27, 17), Cell(3, -49, 30, 19), Cell(3, 13, 46, 29), Cell(3, -3191, 45, 29)]:
        assert 1 / 3 < ENCODING.size(cell) / len(ENCODING.encode(cell).clauses) < 3


def test_negative_elements_and_wild_options_are_refused():
    with pytest.raises(InputError, match="cell"):
        ENCODING.encode(Cell(3, 1, 3, 2, sign=Sign.NEGATIVE))
    with pytest.raises(InputError, match="depth"):
        Orbit(depth=25)
