"""The linear model of the orbit, judged by its full solution sets in exact arithmetic."""

from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from cycle_encodings.inequalities import ENCODING, Inequalities
from solverkit.errors import InputError
from solverkit.exact.windows import element_windows
from solverkit.solvers.pseudo_boolean import PseudoBooleanSolver
from solverkit.window import Cell, Sign
from tests.encoders.test_constraints import drawn_cells
from tests.reference import cycles_of_cell
from tests.strategies import cells

SOLVER = PseudoBooleanSolver()


def test_solution_sets_of_200_random_cells_equal_brute_force():
    total = 0
    for cell, expected in drawn_cells(200, seed=51, longest=11, most=15):
        found = list(SOLVER.least_elements(ENCODING.encode(cell)))
        assert sorted(found) == expected, cell
        total += len(found)
    assert total > 60


@settings(max_examples=40)
@given(cells(longest=9))
def test_the_list_is_the_same_without_counts(cell):
    expected = cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)
    if len(expected) < 15:
        assert sorted(SOLVER.least_elements(Inequalities(counts=False).encode(cell))) == expected


def point_of(model, least):
    """The values that the cycle with this least element gives the variables."""
    cell = model.cell
    orbit = cell.map.orbit(least, cell.length)[:-1]
    values = {}
    for i, n in enumerate(orbit):
        odd = n & 1
        gain = odd * ((cell.multiplier - 1) * (n // 2) + (cell.multiplier + cell.offset) // 2)
        values |= {f"n[{i}]": n, f"odd[{i}]": odd, f"half[{i}]": n // 2, f"gain[{i}]": gain}
    return [values[variable.name] for variable in model.variables]


def test_every_cycle_is_a_point_and_its_exclusion_excludes_it_alone():
    model = ENCODING.encode(Cell(3, 13, 8, 5))
    cycles = cycles_of_cell(3, 13, 8, 5)
    assert all(model.holds(point_of(model, n)) and model.decode(point_of(model, n)) == n for n in cycles)
    without = model.excluding(cycles[2])
    for n in cycles:
        extended = [[*point_of(model, n), side] for side in (0, 1)]
        assert any(map(without.holds, extended)) == (n != cycles[2])


@given(cells(longest=14))
def test_sizes_groups_and_digest(cell):
    model, k = ENCODING.encode(cell), cell.length
    empty = element_windows(cell).empty
    assert model.sizes() == ({"variables": 1, "rows": 1} if empty else {"variables": 4 * k, "rows": 8 * k - 1})
    assert model == ENCODING.encode(replace(cell))
    assert model.digest() == ENCODING.encode(replace(cell)).digest()
    covered = sorted(i for ranges in model.groups.values() for start, stop in ranges for i in range(start, stop))
    assert covered == list(range(len(model.rows)))
    assert len(model.names) == len(set(model.names.values())) == len(model.variables)


@given(cells(longest=10), st.data())
def test_every_point_in_the_box_that_keeps_the_rows_is_a_cycle(cell, data):
    """Any values that keep the rows must be those of the cycle that their n_0 stands for."""
    model = ENCODING.encode(cell)
    span = model.variables[model.least]
    if span.high:
        least = data.draw(st.integers(span.low, span.high))
        expected = cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)
        assert model.holds(point_of(model, least)) == (least in expected)


def test_negative_elements_are_refused():
    with pytest.raises(InputError, match="cell"):
        ENCODING.encode(Cell(3, 1, 3, 2, sign=Sign.NEGATIVE))
