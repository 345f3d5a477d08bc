"""Side conditions against definitions made code, on all short words, random cycles, patterns and tables."""

import json
import re
from fractions import Fraction
from itertools import product

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from solverkit.errors import InputError
from solverkit.findings import Cycle
from solverkit.maps import Map
from solverkit.numerals import Span
from solverkit.shape import Among, ResidueCondition, Shape, shape_from_table, shape_table
from solverkit.shape_pattern import Pattern
from solverkit.shape_words import (
    avoiding,
    begins_with,
    discrepancy,
    has_factor,
    is_balanced,
    is_palindromic,
    leaves_a_word,
    longest_run,
)
from solverkit.words import balanced_word, beta, circuits, is_aperiodic, rotations

WORDS = ["".join(symbols) for k in range(1, 11) for symbols in product("01", repeat=k) if "1" in symbols]
FACTORS = ["".join(symbols) for k in range(1, 6) for symbols in product("01", repeat=k)]


def occurs(word, factor):
    """The parities from some element on are those of the factor."""
    k = len(word)
    return any(all(word[(i + j) % k] == symbol for j, symbol in enumerate(factor)) for i in range(k))


def runs(word, symbol):
    """The lengths of the cyclic runs of the symbol."""
    k = len(word)
    if set(word) == {symbol}:
        return [k]
    found = []
    for i in range(k):
        if word[i] == symbol != word[i - 1]:
            length = 1
            while word[(i + length) % k] == symbol:
                length += 1
            found.append(length)
    return found


def windows(word):
    """All (length, ones) of factors up to one turn."""
    k = len(word)
    for length in range(1, k + 1):
        for i in range(k):
            yield length, sum(word[(i + j) % k] == "1" for j in range(length))


def test_factors_and_prefixes_of_all_short_words():
    for word in WORDS[:500]:
        for factor in FACTORS:
            assert has_factor(word, factor) == occurs(word, factor)
            assert begins_with(word, factor) == all(word[j % len(word)] == s for j, s in enumerate(factor))


def test_runs_of_all_short_words_add_up():
    for word in WORDS:
        for symbol in "01":
            found = runs(word, symbol)
            assert sum(found) == word.count(symbol)
            assert longest_run(word, symbol) == max(found, default=0)
        assert len(runs(word, "1")) == circuits(word)


def test_a_run_limit_forbids_one_more_odd_step_unless_the_cycle_is_a_fixed_point():
    for word in filter(is_aperiodic, WORDS):
        for most in range(1, 5):
            limited = longest_run(word, "1") <= most
            assert limited == (word == "1" or not has_factor(word, "1" * (most + 1)))


def test_balance_and_discrepancy_of_all_short_words():
    for word in WORDS:
        k, x, counts = len(word), word.count("1"), {}
        worst = Fraction(0)
        for length, ones in windows(word):
            counts.setdefault(length, set()).add(ones)
            worst = max(worst, abs(ones - Fraction(length * x, k)))
        assert discrepancy(word) == worst
        assert is_balanced(word) == all(max(each) - min(each) <= 1 for each in counts.values())
        # The balanced word of given length and odd count is unique up to rotation (Christoffel).
        assert is_balanced(word) == (word in rotations(balanced_word(k, x)))


def test_palindromic_words_are_products_of_two_palindromes():
    """A word is a rotation of its reversal exactly if it is a product of two palindromes (from memory)."""
    for word in WORDS:
        parts = ((word[:i], word[i:]) for i in range(len(word)))
        assert is_palindromic(word) == any(a == a[::-1] and b == b[::-1] for a, b in parts)


PATTERNS = st.recursive(
    st.sampled_from(["0", "1", "01", "10", "110", ""]),
    lambda inner: st.one_of(
        st.builds("({}|{})".format, inner, inner),
        st.builds("{}{}".format, inner, inner),
        st.builds("({}){}".format, inner, st.sampled_from(["*", "+", "?", "{0}", "{2}", "{1,3}", "{0,2}", "{2,}"])),
    ),
    max_leaves=6,
).filter(bool)


@settings(max_examples=1500, deadline=None)
@given(PATTERNS, st.lists(st.text("01", min_size=1, max_size=9), min_size=1, max_size=8))
def test_patterns_agree_with_the_standard_library(text, words):
    pattern, standard = Pattern(text), re.compile(text)
    for word in words:
        assert pattern.matches(word) == bool(standard.fullmatch(word))
        assert pattern.matches_rotation(word) == any(standard.fullmatch(each) for each in rotations(word))


@pytest.mark.parametrize(
    "text", ["(10|110)*", "(1+0){2,4}", "1(0|1)*11", "((10)*1)+", "(1{2,}0{1,2})*", "(|1)0(1|10)*"]
)
def test_patterns_agree_with_the_standard_library_on_all_short_words(text):
    pattern, standard = Pattern(text), re.compile(text)
    for word in WORDS:
        assert pattern.matches_rotation(word) == any(standard.fullmatch(each) for each in rotations(word))


SHORT_FACTORS = FACTORS[:14]  # of 1 to 3 symbols


def factors_present(word):
    return frozenset(factor for factor in SHORT_FACTORS if occurs(word, factor))


@pytest.fixture(scope="module")
def collections():
    """The sets of factors of up to 3 symbols that words of up to 12 symbols with an odd step have."""
    words = ("".join(s) for k in range(1, 13) for s in product("01", repeat=k))
    return {factors_present(word) for word in words if "1" in word}


@settings(max_examples=1000, deadline=None)
@given(
    forbidden=st.sets(st.sampled_from(SHORT_FACTORS), max_size=5),
    required=st.sets(st.sampled_from(SHORT_FACTORS), max_size=2),
)
def test_leaving_a_word_agrees_with_search_through_short_words(collections, forbidden, required):
    # Factors of 3 symbols are edges of the de Bruijn graph on 4 vertices. A shortest closed walk through two
    # given edges and one with an odd step has these three and three paths of at most 3 edges: 12 symbols.
    by_search = any(forbidden.isdisjoint(each) and required <= each for each in collections)
    assert leaves_a_word(forbidden, sorted(required)) == by_search


@settings(max_examples=300, deadline=None)
@given(
    language=st.sets(st.text("01", min_size=1, max_size=12), min_size=1, max_size=5),
    repeated=st.booleans(),
    forbidden=st.sets(st.sampled_from(FACTORS[2:]), min_size=1, max_size=4),
)
def test_a_pattern_closes_a_walk_if_one_of_its_words_avoids_the_factors(language, repeated, forbidden):
    # A word occurs repeated exactly where it occurs once, read cyclically.
    text = "|".join(f"({word}){{2,}}" if repeated else word for word in language)
    served = any("1" in word and not any(occurs(word, each) for each in forbidden) for word in language)
    assert Pattern(text).has_closed_walk(avoiding(forbidden)) == served


def cycles_up_to(length):
    """Cycles of all words up to ``length`` for q = 3 and 5, d = D: the elements are β of the rotations."""
    for word in WORDS:
        if len(word) > length or not is_aperiodic(word):
            continue
        for q in (3, 5):
            determinant = 2 ** len(word) - q ** word.count("1")
            orbit = [beta(each, q) for each in rotations(word)]
            offset = abs(determinant)
            sign = 1 if determinant > 0 else -1
            for d, s in ((offset, sign), (-offset, -sign)):
                yield Cycle(q, d, s * min(orbit), len(word))


CYCLES = list(cycles_up_to(7))


def test_the_cycles_to_test_with_have_both_signs():
    assert {cycle.sign for cycle in CYCLES} == {1, -1}
    assert len(CYCLES) > 100


RESIDUES = st.integers(2, 9).flatmap(
    lambda m: st.builds(
        ResidueCondition,
        st.sampled_from(Among),
        st.just(m),
        st.sets(st.integers(0, m - 1), min_size=1, max_size=m - 1).map(tuple),
        st.booleans(),
    )
)
FACTOR_SETS = st.sets(st.sampled_from(FACTORS[2:]), min_size=1, max_size=2).map(tuple)
NUMBERS = st.sets(st.integers(-40, 40).filter(bool), min_size=1, max_size=3).map(tuple)
CONDITIONS = {
    "circuits": st.integers(1, 3).flatmap(lambda low: st.builds(Span, st.just(low), st.integers(low, 4))),
    "longest_odd_run": st.integers(1, 5),
    "longest_even_run": st.integers(0, 5),
    "forbid": FACTOR_SETS,
    "require": FACTOR_SETS,
    "pattern": st.sampled_from(["(10|110)*", "1*0*", "(1*0){2}", "(11)*0+(10)?", "(0|1)*1100(0|1)*"]),
    "balanced": st.booleans(),
    "palindromic": st.booleans(),
    "discrepancy_at_most": st.fractions(0, 2, max_denominator=7),
    "prefix": st.sampled_from(FACTORS).map(lambda word: "1" + word),
    "largest_at_most": st.integers(1, 500),
    "ratio_at_most": st.fractions(1, 20, max_denominator=9),
    "sum_at_most": st.integers(1, 2000),
    "contains": NUMBERS,
    "excludes": NUMBERS,
    "residues": st.lists(RESIDUES, min_size=1, max_size=2).map(tuple),
}
SHAPES = st.lists(st.sampled_from(sorted(CONDITIONS)), min_size=1, max_size=3, unique=True).flatmap(
    lambda names: st.fixed_dictionaries({name: CONDITIONS[name] for name in names})
)


def by_definition(name, value, q, d, least):
    """Decide one condition by iterating the map, from the words of the docstring alone."""
    step, elements = Map(q, d).step, [least]
    while (following := step(elements[-1])) != least:
        elements.append(following)
    word = "".join(str(element % 2) for element in elements)
    k, x = len(word), word.count("1")
    sizes = [abs(element) for element in elements]
    largest = max(elements, key=abs)

    def admitted(condition):
        tested = {"least": [least], "largest": [largest]}.get(condition.of.value, elements)
        found = [any((element - r) % condition.modulus == 0 for r in condition.residues) for element in tested]
        found = found if condition.inside else [not each for each in found]
        return any(found) if condition.of is Among.SOME else all(found)

    return {
        "circuits": lambda: value.low <= len(runs(word, "1")) <= value.high,
        "longest_odd_run": lambda: max(runs(word, "1"), default=0) <= value,
        "longest_even_run": lambda: max(runs(word, "0"), default=0) <= value,
        "forbid": lambda: not any(occurs(word, each) for each in value),
        "require": lambda: all(occurs(word, each) for each in value),
        "pattern": lambda: any(re.fullmatch(value, word[i:] + word[:i]) for i in range(k)),
        "balanced": lambda: (
            not value or all(abs(a - b) <= 1 for m, a in windows(word) for n, b in windows(word) if m == n)
        ),
        "palindromic": lambda: not value or any(word[i:] + word[:i] == word[::-1] for i in range(k)),
        "discrepancy_at_most": lambda: all(abs(ones - Fraction(m * x, k)) <= value for m, ones in windows(word)),
        "prefix": lambda: all(symbol == word[i % k] for i, symbol in enumerate(value)),
        "largest_at_most": lambda: all(size <= value for size in sizes),
        "ratio_at_most": lambda: max(sizes) * value.denominator <= value.numerator * min(sizes),
        "sum_at_most": lambda: sum(sizes) <= value,
        "contains": lambda: all(number in elements for number in value),
        "excludes": lambda: not any(number in elements for number in value),
        "residues": lambda: all(admitted(each) for each in value),
    }[name]()


def made(conditions):
    """The shape, or None where the conditions contradict each other."""
    try:
        return Shape(**conditions)
    except InputError:
        return None


@pytest.mark.parametrize("name", sorted(CONDITIONS))
def test_each_condition_alone_means_what_it_says(name):
    seen = set()

    @settings(max_examples=60, deadline=None, database=None)
    @given(CONDITIONS[name], st.lists(st.sampled_from(CYCLES), min_size=20, max_size=20))
    def check(value, cycles):
        shape = made({name: value})
        for cycle in cycles:
            expected = by_definition(name, value, cycle.multiplier, cycle.offset, cycle.least)
            seen.add(expected)
            if shape is None:
                assert not expected, "a condition that holds for a cycle was refused"
            else:
                assert shape.holds(cycle) == expected
                assert shape.failures(cycle) == (() if expected else (name,))

    if name == "contains":
        # Numbers drawn at random are seldom elements of the cycles drawn.
        check = example((CYCLES[0].least,), CYCLES[:20])(check)
    check()
    assert seen == {True, False}


@settings(max_examples=400, deadline=None)
@given(SHAPES, st.lists(st.sampled_from(CYCLES), min_size=10, max_size=10))
def test_conditions_combine_by_and_and_only_contradictions_are_refused(conditions, cycles):
    shape = made(conditions)
    for cycle in cycles:
        at = (cycle.multiplier, cycle.offset, cycle.least)
        failed = {name for name, value in conditions.items() if not by_definition(name, value, *at)}
        if shape is None:
            assert failed, "conditions that a cycle meets were refused"
        else:
            assert set(shape.failures(cycle)) == failed
            assert shape.holds(cycle) == (not failed)


@settings(max_examples=300, deadline=None)
@given(SHAPES)
def test_tables_come_back_through_json(conditions):
    shape = made(conditions)
    if shape is not None:
        text = json.dumps(shape_table(shape), sort_keys=True)
        again = shape_from_table(json.loads(text))
        assert again == shape
        assert json.dumps(shape_table(again), sort_keys=True) == text


@settings(max_examples=300, deadline=None)
@given(RESIDUES, RESIDUES)
def test_residue_conditions_meet_as_a_search_through_one_period_says(one, other):
    period = range(one.modulus * other.modulus)
    assert one.meets(other) == any(one.admits(n) and other.admits(n) for n in period)
    assert one.admits_odd() == any(one.admits(n) for n in period if n % 2)


@settings(max_examples=200, deadline=None)
@given(SHAPES, st.sampled_from(CYCLES))
def test_reflection_carries_shapes_along(conditions, cycle):
    """n -> -n carries (q, d) to (q, -d); only numbers and residues change sign with it."""
    mirrored = dict(conditions)
    for name in {"contains", "excludes"} & set(conditions):
        mirrored[name] = tuple(-number for number in conditions[name])
    if "residues" in conditions:
        mirrored["residues"] = tuple(
            ResidueCondition(c.of, c.modulus, tuple(-r % c.modulus for r in c.residues), c.inside)
            for c in conditions["residues"]
        )
    here, there = made(conditions), made(mirrored)
    assert (here is None) == (there is None)
    if here is not None and there is not None:
        image = Cycle(cycle.multiplier, -cycle.offset, -cycle.least, cycle.length)
        assert here.failures(cycle) == there.failures(image)
