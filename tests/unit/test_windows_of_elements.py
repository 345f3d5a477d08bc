"""Exact ranges of the odd count and the elements at every step."""

from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from solverkit.exact.windows import element_windows, in_order
from solverkit.maps import Map
from solverkit.window import Cell
from tests.reference import cycles_of_cell
from tests.strategies import cells


@given(cells(longest=11), st.integers(1, 4))
def test_every_cycle_of_the_cell_stays_inside(cell, rounds):
    windows = element_windows(cell, rounds=rounds)
    for least in cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above):
        odd = 0
        for step, n in enumerate(Map(cell.multiplier, cell.offset).orbit(least, cell.length)):
            room = windows.rooms[step, odd]
            assert least in room.least
            assert n in room.element
            assert n in windows.elements(step)
            assert odd in windows.odd_counts(step)
            odd += n & 1


@given(cells(longest=11))
def test_a_bound_below_the_least_cycle_empties_or_excludes_it(cell):
    least = cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd)
    for n in least:
        windows = element_windows(replace(cell, above=n))
        assert windows.empty or all(n not in room.least for room in windows.rooms.values())


@given(
    st.integers(1, 500),
    st.integers(-4000, 4000),
    st.integers(1, 500),
    st.integers(0, 60),
    st.integers(0, 60),
    st.integers(0, 9),
)
def test_in_order_is_the_set_of_n_that_satisfy_the_inequality(slope, shift, denominator, low, more, least):
    span = in_order(slope, shift, denominator, low, low + more, least)
    expected = [n for n in range(low, low + more + 1) if slope * n + shift >= denominator * n + least]
    assert (list(span) if span else []) == expected


@pytest.mark.parametrize("cell", [Cell(3, 1, 60, 30), Cell(3, -1, 60, 59), Cell(5, 1, 30, 12)])
def test_most_cells_without_cycles_are_emptied_by_ranges_alone(cell):
    assert element_windows(cell).empty
