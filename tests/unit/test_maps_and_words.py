"""Maps and parity words."""

from itertools import product

import pytest
from hypothesis import given
from hypothesis import strategies as st

from solverkit.errors import InputError
from solverkit.maps import Map
from solverkit.words import (
    balanced_word,
    beta,
    circuits,
    is_aperiodic,
    lyndon_count,
    lyndon_words,
    moebius,
    rotations,
)
from tests.published import published
from tests.strategies import maps, words


@pytest.mark.parametrize(
    ("q", "d", "field"),
    [(4, 1, "multiplier"), (1, 1, "multiplier"), (-3, 1, "multiplier"), (3, 0, "offset"), (3, 2, "offset")],
)
def test_even_or_small_values_are_refused_by_name(q, d, field):
    with pytest.raises(InputError) as caught:
        Map(q, d)
    assert caught.value.field == field


@given(maps, st.integers(-(10**9), 10**9), st.integers(0, 40))
def test_affine_form_of_the_own_parity_word_gives_the_orbit(map_, n, steps):
    assert map_.affine(map_.parity_word(n, steps))(n) == map_.orbit(n, steps)[-1]


@given(maps, st.integers(-(10**6), 10**6))
def test_reflection_carries_one_map_to_the_other(map_, n):
    assert map_.reflected().step(-n) == -map_.step(n)


@given(maps, words)
def test_shift_of_the_affine_form_is_offset_times_beta(map_, word):
    assert map_.affine(word).shift == map_.offset * beta(word, map_.multiplier)


def test_affine_form_refuses_another_parity_word():
    with pytest.raises(ValueError, match="parity word"):
        Map(3, 1).affine("0")(7)


@given(words)
def test_a_word_is_aperiodic_exactly_when_its_rotations_differ(word):
    assert is_aperiodic(word) == (len(set(rotations(word))) == len(word))


@given(words)
def test_circuits_do_not_change_under_rotation(word):
    assert {circuits(each) for each in rotations(word)} == {circuits(word)}


@pytest.mark.parametrize("length", range(1, 13))
def test_lyndon_words_of_fixed_density_are_all_least_aperiodic_rotations(length):
    for odd in range(length + 1):
        expected = sorted(
            w
            for w in map("".join, product("01", repeat=length))
            if w.count("1") == odd and is_aperiodic(w) and w == min(rotations(w))
        )
        assert sorted(lyndon_words(length, odd)) == expected
        assert lyndon_count(length, odd) == len(expected)


def test_lyndon_counts_equal_the_published_triangle():
    """OEIS A051168, rows 0 … 12; row 0 counts the empty word, which is no cycle."""
    rows = [lyndon_count(k, x) for k in range(1, 13) for x in range(k + 1)]
    assert rows == published("CT-02")[1:]


def test_words_by_length_add_up_to_the_published_numbers():
    """OEIS A001037, lengths 1 … 25."""
    assert [sum(lyndon_count(k, x) for x in range(k + 1)) for k in range(1, 26)] == published("CT-03")


def test_generation_takes_a_bounded_number_of_steps_for_each_word():
    """Ruskey & Sawada (1999): constant amortised time; counted here in executed lines, far below any linear growth."""
    import sys

    def lines_per_word(length, odd):
        seen = 0

        def count(frame, event, _):
            nonlocal seen
            seen += event == "line" and frame.f_code.co_name in {"_extend", "latest"}
            return count

        before = sys.gettrace()
        sys.settrace(count)
        try:
            words_ = sum(1 for _ in lyndon_words(length, odd))
        finally:
            sys.settrace(before)
        return seen / words_

    small, large = lines_per_word(12, 6), lines_per_word(20, 10)
    assert large < 1.5 * small


@given(st.integers(1, 30), st.data())
def test_balanced_word_has_its_counts_and_least_discrepancy(length, data):
    odd = data.draw(st.integers(1, length))
    word = balanced_word(length, odd)
    assert (len(word), word.count("1")) == (length, odd)
    assert all(word[:i].count("1") * length >= i * odd for i in range(length + 1))


def test_moebius_equals_sympy():
    """Against an independent library."""
    from sympy import mobius

    assert [moebius(n) for n in range(1, 400)] == [mobius(n) for n in range(1, 400)]
