"""Counting and listing live cells."""

from itertools import islice

import pytest
from hypothesis import given
from hypothesis import strategies as st

from solverkit.exact.bounds import product_bound
from solverkit.exact.cone import ThinCone, floor_sum, tallest
from solverkit.maps import Map
from solverkit.numerals import Span
from solverkit.window import Cell
from tests.published import published
from tests.strategies import multipliers

offsets = st.sampled_from([1, -1, 5, -5, 7, 101, -101, 2047, -2047])
bounds = st.sampled_from([0, 0, 1, 2, 3, 6, 20, 500])


@given(st.integers(0, 60), st.integers(1, 50), st.integers(0, 200), st.integers(0, 200))
def test_floor_sum_equals_its_definition(count, modulus, factor, shift):
    assert floor_sum(count, modulus, factor, shift) == sum((factor * i + shift) // modulus for i in range(count))


@given(
    multipliers | st.just(181),
    offsets,
    bounds,
    st.integers(1, 24),
    st.integers(0, 12),
    st.integers(1, 24),
    st.integers(0, 12),
)
def test_counts_and_cells_equal_a_walk_through_all_cells(q, d, above, k, more_k, x, more_x):
    lengths, odd = Span(k, k + more_k), Span(x, x + more_x)
    cone = ThinCone(Map(q, d), above, lengths, odd)
    cells = [(i, j) for i in lengths for j in odd if j <= i]
    fits = [(i, j) for i, j in cells if (2**i > q**j) == (d > 0)]
    live = [(i, j) for i, j in fits if product_bound(Cell(q, d, i, j)) > above]
    assert (cone.total, cone.sign_fits, cone.count()) == (len(cells), len(fits), len(live))
    assert list(cone.cells()) == live
    top = tallest(Map(q, d), lengths, odd)
    best = max((product_bound(Cell(q, d, i, j)) for i, j in fits), default=0)
    assert (top[0] if top else 0) == best


@pytest.mark.parametrize("name", ["LB-01", "LB-11"])
def test_first_live_cell_above_a_verified_limit_is_the_published_one(name):
    """Eliahou (1993) for 2^40; for 2^68 the value quoted with Barina, J. Supercomput. 77 (2021)."""
    data = published(name)
    base, exponent = data["B"].split("^")
    cone = ThinCone(Map(3, 1), int(base) ** int(exponent), Span(1, 10**12), Span(1, 10**12))
    assert next(cone.cells()) == (data["k"], data["x"])


def test_the_published_range_of_limits_for_one_length_is_exact_at_both_ends():
    """Eliahou's length 17,087,915 is right exactly for limits in this range."""
    low, high = published("LB-01")["valid_for_n0"]

    def first(limit):
        return next(ThinCone(Map(3, 1), limit - 1, Span(1, 10**9), Span(1, 10**9)).cells())[0]

    assert [first(low - 1) == 17087915, first(low), first(high), first(high + 1) == 17087915] == [
        False,
        17087915,
        17087915,
        False,
    ]


def test_best_approximations_from_above_are_the_lengths_where_the_bound_jumps():
    """OEIS A206788 in part: each is the first live cell for the limit just below its own bound."""
    for k, x in islice(published("CF-03"), 2, 38):
        top = product_bound(Cell(3, 1, k, x))
        assert next(ThinCone(Map(3, 1), top - 1, Span(1, 10**9), Span(1, 10**9)).cells()) == (k, x)


@pytest.mark.parametrize(("q", "name"), [(5, "CF-09"), (7, "CF-12")])
def test_best_approximations_for_other_multipliers_give_the_first_live_cells(q, name):
    """Computed independently from the continued fraction, both sides."""
    for side, d in (("above", 1), ("below", -1)):
        for k, x in published(name)[side][6:20]:
            top = product_bound(Cell(q, d, k, x))
            assert next(ThinCone(Map(q, d), top - 1, Span(1, 10**10), Span(1, 10**10)).cells()) == (k, x)
