"""Bounds, reduction, chances: exact arithmetic on cells."""

from dataclasses import replace
from decimal import Decimal
from fractions import Fraction

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from solverkit.exact import bounds
from solverkit.exact.bounds import balanced_beta, balanced_bound, product_bound, product_holds
from solverkit.exact.chances import forecast
from solverkit.exact.enclosures import log2_bounds, power_of_two_exponent
from solverkit.exact.reduction import reduced
from solverkit.window import Cell, Sign
from solverkit.words import beta, lyndon_words, rotations
from tests.published import published
from tests.reference import cycles_of_cell
from tests.strategies import cells, multipliers


@given(cells(longest=60))
def test_product_bound_is_the_last_n_that_passes_the_integer_inequality(cell):
    top = product_bound(cell)
    assert top == 0 or product_holds(cell, top)
    assert not product_holds(cell, top + 1)


@given(cells(longest=60))
def test_a_wrong_sign_of_the_determinant_leaves_nothing(cell):
    other = replace(cell, offset=-cell.offset)
    assert product_bound(other) == balanced_bound(other) == 0


@given(cells(longest=11))
def test_no_cycle_exceeds_either_bound(cell):
    least = cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd)
    assert all(n <= balanced_bound(cell) for n in least)
    assert balanced_bound(cell) <= product_bound(cell)


@given(multipliers, st.integers(2, 11), st.data())
def test_balanced_beta_is_the_largest_least_rotation(q, length, data):
    """Halbeisen & Hungerbühler (1997), for every q and both signs of D, by enumeration."""
    odd = data.draw(st.integers(1, length - 1))
    all_words = list(lyndon_words(length, odd))
    assume(all_words)
    largest = max(min(beta(r, q) for r in rotations(w)) for w in all_words)
    assert largest <= balanced_beta(q, length, odd)
    if any(beta(r, q) == balanced_beta(q, length, odd) for w in all_words for r in rotations(w)):
        assert largest == balanced_beta(q, length, odd)


@given(cells(longest=80))
def test_closed_interval_holds_the_balanced_bound(cell):
    low, high = bounds.balanced_interval(cell)
    assert low <= balanced_bound(cell) <= high


def test_closed_interval_is_tight_where_the_bound_is_large():
    """Halbeisen & Hungerbühler (1997): 212366032807210 where the product bound is 294401824310229."""
    low, high = bounds.balanced_interval(Cell(3, 1, 17087915, 10781274))
    assert low <= 212366032807210 <= high
    assert (high - low) * 10**7 < low
    exact = balanced_bound(Cell(3, -101, 1054, 665))
    low, high = bounds.balanced_interval(Cell(3, -101, 1054, 665))
    assert low <= exact <= high
    assert (high - low) * 1000 < low


def test_balanced_beta_equals_the_published_examples():
    """Halbeisen & Hungerbühler, Acta Arith. 78 (1997)."""
    for pair, value in published("HB-01")["examples"].items():
        length, odd = (int(part) for part in pair.strip("()").split(","))
        assert balanced_beta(3, length, odd) == value


@pytest.mark.parametrize(("key", "length", "odd"), [("LB-05", 17087915, 10781274)])
def test_product_bound_of_a_cell_that_integers_can_not_reach(key, length, odd):
    """Halbeisen & Hungerbühler (1997) quote this value of Eliahou's criterion."""
    assert product_bound(Cell(3, 1, length, odd)) == published(key)["n"]


def test_both_ways_to_the_product_bound_agree_at_their_border(monkeypatch):
    """The enclosure alone gives what the integer inequality gives."""
    near = [(485, 306), (84, 53), (1054, 665), (1539, 971), (12, 8), (6, 3)]
    known = [product_bound(Cell(3, d, k, x)) for k, x in near for d in (1, -1, 35, -101)]
    monkeypatch.setattr(bounds, "EXACT_LENGTH", 1)
    assert [product_bound(Cell(3, d, k, x)) for k, x in near for d in (1, -1, 35, -101)] == known


@given(cells(longest=11), st.integers(1, 30).map(lambda i: 2 * i + 1))
def test_reduction_keeps_the_cycles_up_to_its_factor(cell, common):
    cell = replace(cell, offset=cell.offset * common)
    small = reduced(cell)
    inner = small.cell
    whole = cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)
    parts = cycles_of_cell(inner.multiplier, inner.offset, inner.length, inner.odd, inner.above)
    assert whole == [n * small.factor for n in parts]
    assert inner.determinant % inner.offset == 0


def test_reduction_of_a_negative_side_has_a_negative_factor():
    cell = Cell(3, 5, 11, 7, above=12, sign=Sign.NEGATIVE)
    small = reduced(cell)
    assert (small.cell, small.factor) == (Cell(3, -1, 11, 7, above=2), -5)


@given(cells(longest=40))
def test_expected_number_and_chance_follow_their_formulas(cell):
    """1 − (1 − g/|D|)^N in exact fractions."""
    told = forecast(cell)
    share = Fraction(abs(reduced(cell).cell.offset), abs(cell.determinant))
    assert abs(Fraction(told.expected) - told.words * share) <= told.words * share * Fraction(1, 10**8)
    if told.words < 3000:
        chance = 1 - (1 - share) ** told.words
        assert abs(Fraction(told.chance) - chance) <= chance * Fraction(1, 10**8)


def test_chances_of_the_well_known_cells():
    """30 words at |D| = 139, and 40 at 2465 (common practice, no source)."""
    first, second = forecast(Cell(3, -1, 11, 7)), forecast(Cell(3, -1, 12, 8))
    assert (first.words, second.words) == (30, 40)
    assert Decimal("0.19") < first.chance < Decimal("0.20")
    assert Decimal("0.015") < second.chance < Decimal("0.025")


def test_forecast_of_a_vast_cell_agrees_with_the_exact_one_where_both_apply(monkeypatch):
    from solverkit.exact import chances

    exact = forecast(Cell(3, 1, 4701, 2966))
    monkeypatch.setattr(chances, "EXACT_LENGTH", 10)
    vast = forecast(Cell(3, 1, 4701, 2966))
    assert vast.words is None
    assert abs(vast.expected / exact.expected - 1) < Decimal("1e-8")


@given(st.fractions(min_value=Fraction(1, 50), max_value=50), st.sampled_from([64, 200]))
def test_enclosures_of_logarithms_hold_and_are_tight(value, bits):
    """2^(low·t) ≤ value^t ≤ 2^(high·t), checked by integers at t = 64."""
    low, high = log2_bounds(value, bits)
    assert low <= high
    assert high - low < Fraction(1, 2 ** (bits - 16))
    power = value**64
    below, above = (low * 64).__floor__(), (high * 64).__ceil__()
    assert Fraction(2) ** below <= power <= Fraction(2) ** above


@given(st.integers(-40, 40), st.integers(1, 10**6))
def test_powers_of_two_are_told_from_other_fractions(exponent, other):
    assert power_of_two_exponent(Fraction(2) ** exponent) == exponent
    odd = Fraction(2 * other + 1, 2 ** abs(exponent))
    assert power_of_two_exponent(odd) is None
