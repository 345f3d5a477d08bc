"""Side conditions: what each one means, how tables are read and what is refused."""

import json
import pickle
import tomllib
from fractions import Fraction

import pytest

from solverkit.errors import InputError
from solverkit.findings import Cycle
from solverkit.numerals import Span
from solverkit.shape import Among, ResidueCondition, Shape, shape_from_table, shape_table
from solverkit.shape_pattern import MAX_EXPANDED, MAX_NESTING, MAX_PATTERN, MAX_REPEAT, Pattern
from solverkit.shape_words import leaves_a_word

ONE = Cycle(3, 1, 1, 2)  # 1 2
MINUS_ONE = Cycle(3, 1, -1, 1)  # -1
MINUS_FIVE = Cycle(3, 1, -5, 3)  # -5 -7 -10
MINUS_17 = Cycle(3, 1, -17, 11)  # -17 -25 -37 -55 -82 -41 -61 -91 -136 -68 -34, word 11110111000

#: Every key, in the forms that a window file may use.
EVERYTHING = """
circuits = "1..3"
longest_odd_run = 4
longest_even_run = 2
forbid = ["000", "1111"]
require = ["1101"]
pattern = "(10|110)*"
balanced = true
palindromic = true
discrepancy_at_most = "3/2"
prefix = "1101"
largest_at_most = 10000
ratio_at_most = "7/2"
sum_at_most = 100000
contains = [187]
excludes = [-5, "2^71"]
residues = [{ of = "all", modulus = 5, not_in = [0] }, { of = "least", modulus = 8, in = [7, 3] }]
"""


def test_words_of_the_examples():
    assert [c.word for c in (ONE, MINUS_ONE, MINUS_FIVE, MINUS_17)] == ["10", "1", "110", "11110111000"]


@pytest.mark.parametrize(
    ("cycle", "circuits"),
    [
        # Steiner (1977): the circuits of 3x+1 are 1 on positives, -1 and -5 on negatives.
        (ONE, 1),
        (MINUS_ONE, 1),
        (MINUS_FIVE, 1),
        # Counted from the published cycles: 17 of 3x-1; 1, 13 and 17 of 5x+1; 27 and 35 of 181x+1.
        (MINUS_17, 2),
        (Cycle(3, -1, 17, 11), 2),
        (Cycle(5, 1, 1, 5), 1),
        (Cycle(5, 1, 13, 7), 1),
        (Cycle(5, 1, 17, 7), 2),
        (Cycle(181, 1, 27, 15), 2),
        (Cycle(181, 1, 35, 15), 2),
    ],
)
def test_circuits_of_published_cycles(cycle, circuits):
    assert Shape(circuits=Span(circuits, circuits)).holds(cycle)
    assert not Shape(circuits=Span(circuits + 1, circuits + 9)).holds(cycle)
    assert Shape(circuits=Span(1, 2)).holds(cycle)


@pytest.mark.parametrize(
    ("condition", "cycle", "holds"),
    [
        ({"longest_odd_run": 4}, MINUS_17, True),
        ({"longest_odd_run": 3}, MINUS_17, False),
        ({"longest_odd_run": 1}, MINUS_ONE, True),  # one element, one run of length 1
        ({"longest_even_run": 0}, MINUS_ONE, True),
        ({"longest_even_run": 0}, ONE, False),
        ({"longest_even_run": 3}, MINUS_17, True),
        ({"longest_even_run": 2}, MINUS_17, False),
        ({"forbid": ["0001111"]}, MINUS_17, False),  # across the end of the word
        ({"forbid": ["0101"]}, MINUS_17, True),
        ({"forbid": ["1101"]}, MINUS_FIVE, False),  # longer than the word 110, which repeats
        ({"forbid": ["11"]}, MINUS_ONE, False),
        ({"require": ["0001", "0111"]}, MINUS_17, True),
        ({"require": ["0001", "11111"]}, MINUS_17, False),
        ({"pattern": "(1+0+){2}"}, MINUS_17, True),
        ({"pattern": "1+0+"}, MINUS_17, False),
        ({"pattern": "01110001111"}, MINUS_17, True),
        ({"pattern": "(10|110)*"}, MINUS_FIVE, True),
        ({"pattern": "11"}, MINUS_ONE, False),  # a pattern takes exactly k symbols
        ({"balanced": True}, MINUS_FIVE, True),
        ({"balanced": True}, MINUS_17, False),
        ({"palindromic": True}, MINUS_17, False),
        ({"palindromic": True}, Cycle(3, 5, 19, 5), True),
        ({"discrepancy_at_most": 0}, MINUS_ONE, True),
        ({"discrepancy_at_most": "1/2"}, ONE, True),
        ({"discrepancy_at_most": "2/3"}, MINUS_FIVE, True),
        ({"discrepancy_at_most": "13/20"}, MINUS_FIVE, False),
        ({"prefix": "11110111000111"}, MINUS_17, True),  # the orbit goes on after 11 steps
        ({"prefix": "1110"}, MINUS_17, False),
        ({"largest_at_most": 136}, MINUS_17, True),
        ({"largest_at_most": 135}, MINUS_17, False),
        ({"ratio_at_most": 8}, MINUS_17, True),
        ({"ratio_at_most": "7999/1000"}, MINUS_17, False),
        ({"ratio_at_most": 1}, MINUS_ONE, True),
        ({"sum_at_most": 647}, MINUS_17, True),
        ({"sum_at_most": 646}, MINUS_17, False),
        ({"contains": [-34, -91]}, MINUS_17, True),
        ({"contains": [-34, -90]}, MINUS_17, False),
        ({"contains": [34]}, MINUS_17, False),
        ({"contains": [34]}, Cycle(3, -1, 17, 11), True),
        ({"excludes": [34, -35]}, MINUS_17, True),
        ({"excludes": [-35, -136]}, MINUS_17, False),
        ({"residues": [{"of": "least", "modulus": 5, "in": [3]}]}, MINUS_17, True),
        ({"residues": [{"of": "least", "modulus": 5, "in": [2]}]}, MINUS_17, False),
        ({"residues": [{"of": "largest", "modulus": 5, "in": [4]}]}, MINUS_17, True),
        ({"residues": [{"of": "all", "modulus": 3, "not_in": [0]}]}, MINUS_17, True),
        ({"residues": [{"of": "all", "modulus": 5, "not_in": [0]}]}, MINUS_17, False),
        ({"residues": [{"of": "all", "modulus": 5, "not_in": [0]}]}, ONE, True),
        ({"residues": [{"of": "some", "modulus": 11, "in": [0]}]}, MINUS_17, True),
        ({"residues": [{"of": "some", "modulus": 97, "in": [0]}]}, MINUS_17, False),
        ({"residues": [{"of": "some", "modulus": 3, "not_in": [2]}]}, Cycle(3, 1, -1, 1), False),
    ],
)
def test_each_condition_on_known_cycles(condition, cycle, holds):
    shape = shape_from_table(condition)
    assert shape.holds(cycle) is holds
    assert shape.failures(cycle) == (() if holds else tuple(condition))


def test_failures_come_in_the_order_of_the_conditions():
    shape = shape_from_table(
        {
            "sum_at_most": 1,
            "prefix": "10",
            "circuits": 1,
            "contains": [-1],
            "excludes": [-25],
            "balanced": True,
        }
    )
    assert shape.failures(MINUS_17) == (
        "circuits",
        "balanced",
        "prefix",
        "sum_at_most",
        "contains",
        "excludes",
    )


def test_conditions_on_the_word_leave_the_elements_aside():
    shape = Shape(circuits=Span(2, 2), prefix="1111", largest_at_most=1)
    assert shape.holds_for_word(MINUS_17.word)
    assert not shape.holds_for_word(MINUS_17.word[1:] + "1")
    assert not shape.holds(MINUS_17)


def test_a_table_with_every_key_is_read():
    shape = shape_from_table(tomllib.loads(EVERYTHING))
    assert shape == Shape(
        circuits=Span(1, 3),
        longest_odd_run=4,
        longest_even_run=2,
        forbid=("1111", "000"),
        require=("1101",),
        pattern="(10|110)*",
        balanced=True,
        palindromic=True,
        discrepancy_at_most=Fraction(3, 2),
        prefix="1101",
        largest_at_most=10_000,
        ratio_at_most=Fraction(7, 2),
        sum_at_most=100_000,
        contains=(187,),
        excludes=(2**71, -5),
        residues=(
            ResidueCondition(Among.ALL, 5, (0,), inside=False),
            ResidueCondition(Among.LEAST, 8, (3, 7)),
        ),
    )


def test_a_table_with_every_key_comes_back_canonical():
    table = shape_table(shape_from_table(tomllib.loads(EVERYTHING)))
    assert table["excludes"] == [-5, str(2**71)]
    assert table["residues"][1] == {"of": "least", "modulus": 8, "in": [3, 7]}
    assert table["ratio_at_most"] == "7/2"
    assert list(table) == list(tomllib.loads(EVERYTHING))
    assert shape_from_table(json.loads(json.dumps(table))) == shape_from_table(tomllib.loads(EVERYTHING))


def test_values_that_state_nothing_are_left_out_and_zeros_are_kept():
    assert shape_table(shape_from_table({"balanced": False, "palindromic": False})) == {} == shape_table(Shape())
    assert shape_table(Shape(longest_even_run=0, discrepancy_at_most=Fraction(0))) == {
        "longest_even_run": 0,
        "discrepancy_at_most": 0,
    }


def test_integers_beyond_any_machine_word_come_back():
    table = {"circuits": f"1..{10**40}", "sum_at_most": "2^200", "ratio_at_most": f"{10**30}/3"}
    shape = shape_from_table(table)
    assert shape_from_table(shape_table(shape)) == shape
    assert shape_table(shape)["sum_at_most"] == str(2**200)


def test_order_and_repeats_do_not_matter():
    one = shape_from_table({"forbid": ["000", "1111", "000"], "excludes": [5, 1, 5]})
    other = shape_from_table({"excludes": [1, 5], "forbid": ["1111", "000"]})
    assert one == other
    assert hash(one) == hash(other)
    assert shape_table(one) == shape_table(other)


def test_a_shape_can_be_pickled():
    shape = shape_from_table(tomllib.loads(EVERYTHING))
    assert pickle.loads(pickle.dumps(shape)) == shape


REFUSED = [
    # unknown keys and wrong types
    ("circuit", {"circuit": 1}),
    ("circuits", {"circuits": "two"}),
    ("circuits", {"circuits": "3..1"}),
    ("circuits", {"circuits": 2.0}),
    ("circuits", {"circuits": True}),
    ("longest_odd_run", {"longest_odd_run": "1..2"}),
    ("forbid", {"forbid": "000"}),
    ("forbid", {"forbid": []}),
    ("forbid", {"forbid": [0]}),
    ("forbid", {"forbid": [""]}),
    ("forbid", {"forbid": ["0a"]}),
    ("forbid", {"forbid": ["0\n"]}),
    ("require", {"require": ["²1"]}),
    ("require", {"require": ["1" * 2001]}),
    ("prefix", {"prefix": ""}),
    ("prefix", {"prefix": 1101}),
    ("prefix", {"prefix": "12"}),
    ("pattern", {"pattern": ["1"]}),
    ("balanced", {"balanced": 1}),
    ("palindromic", {"palindromic": "yes"}),
    ("ratio_at_most", {"ratio_at_most": 3.5}),
    ("ratio_at_most", {"ratio_at_most": "7/0"}),
    ("ratio_at_most", {"ratio_at_most": "7/2/2"}),
    ("ratio_at_most", {"ratio_at_most": "-7/-2"}),
    ("contains", {"contains": 187}),
    ("contains", {"contains": [1.0]}),
    ("excludes", {"excludes": []}),
    ("residues", {"residues": {"of": "all"}}),
    ("residues", {"residues": []}),
    ("residues", {"residues": [5]}),
    ("residues.off", {"residues": [{"off": "all"}]}),
    ("residues.of", {"residues": [{"modulus": 5, "in": [0]}]}),
    ("residues.of", {"residues": [{"of": "each", "modulus": 5, "in": [0]}]}),
    ("residues.of", {"residues": [{"of": ["all"], "modulus": 5, "in": [0]}]}),
    ("residues.modulus", {"residues": [{"of": "all", "in": [0]}]}),
    ("residues.modulus", {"residues": [{"of": "all", "modulus": 1, "in": [0]}]}),
    ("residues.in", {"residues": [{"of": "all", "modulus": 5, "in": []}]}),
    ("residues.in", {"residues": [{"of": "all", "modulus": 5, "in": [5]}]}),
    ("residues.not_in", {"residues": [{"of": "all", "modulus": 5, "not_in": [-1]}]}),
    ("residues.in", {"residues": [{"of": "all", "modulus": 2, "in": [0, 1]}]}),
    ("residues.not_in", {"residues": [{"of": "some", "modulus": 2, "not_in": [0, 1]}]}),
    ("residues", {"residues": [{"of": "all", "modulus": 5, "in": [1], "not_in": [0]}]}),
    ("residues", {"residues": [{"of": "all", "modulus": 5}]}),
    # values outside the range
    ("circuits", {"circuits": 0}),
    ("longest_odd_run", {"longest_odd_run": 0}),
    ("longest_even_run", {"longest_even_run": -1}),
    ("discrepancy_at_most", {"discrepancy_at_most": "-1/2"}),
    ("largest_at_most", {"largest_at_most": 0}),
    ("ratio_at_most", {"ratio_at_most": "1/2"}),
    ("sum_at_most", {"sum_at_most": -5}),
    # conditions that hold for no cycle
    ("forbid", {"forbid": ["1"]}),
    ("forbid", {"forbid": ["0", "11"]}),
    ("forbid", {"forbid": ["00", "11", "010"]}),
    ("forbid", {"forbid": ["0", "11"], "longest_odd_run": 1}),
    ("longest_odd_run", {"longest_odd_run": 1, "forbid": ["010", "00", "1111"]}),
    ("longest_even_run", {"longest_even_run": 1, "forbid": ["101", "1111"]}),
    ("prefix", {"prefix": "01"}),
    ("pattern", {"pattern": "0*"}),
    ("pattern", {"pattern": "(1{0}|)0"}),
    ("contains", {"contains": [0]}),
    ("excludes", {"excludes": [0]}),
    ("contains", {"contains": [-1, 1]}),
    ("residues", {"residues": [{"of": "least", "modulus": 4, "in": [0, 2]}]}),
    ("residues", {"residues": [{"of": "all", "modulus": 6, "not_in": [1, 3, 5]}]}),
    # conditions that contradict each other
    ("require", {"forbid": ["11"], "require": ["0110"]}),
    ("prefix", {"forbid": ["11"], "prefix": "1011"}),
    ("require", {"longest_odd_run": 2, "require": ["0111"]}),
    ("require", {"longest_even_run": 1, "require": ["1001"]}),
    ("prefix", {"longest_even_run": 1, "prefix": "1001"}),
    ("require", {"forbid": ["01"], "require": ["10"]}),
    ("require", {"forbid": ["0010", "1101", "0011", "1100"], "require": ["01", "00"]}),
    ("pattern", {"forbid": ["111"], "pattern": "(1110)*"}),
    ("pattern", {"forbid": ["0101"], "pattern": "(10)+"}),
    ("pattern", {"longest_even_run": 1, "pattern": "1*00+1*"}),
    ("contains", {"contains": [7], "excludes": [7]}),
    ("contains", {"contains": [7], "largest_at_most": 6}),
    ("contains", {"contains": [-7], "largest_at_most": 6}),
    ("contains", {"contains": [7, 29], "ratio_at_most": 4}),
    ("contains", {"contains": [7, 29], "sum_at_most": 35}),
    ("contains", {"contains": [10], "residues": [{"of": "all", "modulus": 5, "not_in": [0]}]}),
    (
        "residues",
        {
            "residues": [
                {"of": "all", "modulus": 4, "not_in": [1, 2]},
                {"of": "some", "modulus": 8, "in": [5]},
            ]
        },
    ),
    (
        "residues",
        {
            "residues": [
                {"of": "least", "modulus": 4, "in": [1]},
                {"of": "least", "modulus": 6, "not_in": [1, 3, 5]},
            ]
        },
    ),
    (
        "residues",
        {
            "residues": [
                {"of": "largest", "modulus": 3, "not_in": [0, 1]},
                {"of": "all", "modulus": 3, "not_in": [2]},
            ]
        },
    ),
]  # fmt: skip


@pytest.mark.parametrize(("key", "table"), REFUSED)
def test_refused_with_the_name_of_the_key(key, table):
    with pytest.raises(InputError) as caught:
        shape_from_table(table)
    assert caught.value.field == f"shape.{key}"
    assert caught.value.allowed


@pytest.mark.parametrize(
    "table",
    [
        {"longest_odd_run": 1, "longest_even_run": 1},
        {"longest_odd_run": 1, "forbid": ["0"]},  # the fixed point alone
        {"longest_even_run": 0, "longest_odd_run": 5},
        {"forbid": ["000", "1111"], "require": ["0010", "1110"], "prefix": "1110"},
        {"longest_odd_run": 10**30, "longest_even_run": 10**30},
        {"residues": [{"of": "some", "modulus": 2, "in": [0]}, {"of": "some", "modulus": 2, "in": [1]}]},
        {"residues": [{"of": "largest", "modulus": 2, "in": [0]}, {"of": "least", "modulus": 2, "in": [1]}]},
        {
            "residues": [
                {"of": "all", "modulus": 10**30, "not_in": [0]},
                {"of": "all", "modulus": 2**90, "not_in": [0]},
            ]
        },
        {"contains": [7, 28], "ratio_at_most": 4, "sum_at_most": 35, "largest_at_most": 28},
        {},
    ],
)  # fmt: skip
def test_conditions_that_some_cycle_may_meet_are_accepted(table):
    assert shape_from_table(table).failures(ONE) is not None


@pytest.mark.parametrize(
    "text",
    [
        *["", "*", "1**", "1*?", "1*+", "(1", "1)", "()(", "{2}", "1{", "1{,2}", "1{a}", "1{2,1}", "1{-1}"],
        *["1|*", "2", "1 0", "[01]", "1.0", "^1$", "\\1", "(?:1)", "1{¹}"],
        "1" * (MAX_PATTERN + 1),
        f"1{{{MAX_REPEAT + 1}}}",
        "((1{100}){100}){100}",
        "(){1000}" * 9,
        "(" * (MAX_NESTING + 1) + "1" + ")" * (MAX_NESTING + 1),
    ],
)
def test_patterns_outside_the_language_are_refused(text):
    with pytest.raises(InputError) as caught:
        Shape(pattern=text)
    assert caught.value.field == "shape.pattern"


@pytest.mark.parametrize(
    ("text", "word", "matches"),
    [
        ("(1*)*", "1" * 400 + "0", False),
        ("(1*)*0", "1" * 400 + "0", True),
        ("((1|10)*|(1|01)*)*00", "1" * 400 + "0", False),
        ("(1?){1000}1{400}", "1" * 400, True),
        ("(0|1)*1(0|1){150}", "10" * 100, True),
        ("(0|1)*1(0|1){150}0{60}", "10" * 100, False),
        ("(1{40}0){5}", ("1" * 40 + "0") * 5, True),
        ("(1{40}0){4}", ("1" * 40 + "0") * 5, False),
        ("(" * MAX_NESTING + "1" + ")*" * MAX_NESTING + "0", "1" * 50 + "0", True),
        (f"1{{{MAX_REPEAT}}}" * (MAX_EXPANDED // MAX_REPEAT - 1) + "0", "1" * 100 + "0", False),
    ],
)
def test_patterns_that_overwhelm_backtracking_are_decided(text, word, matches):
    assert Pattern(text).matches_rotation(word[7:] + word[:7]) is matches


def test_factors_that_a_de_bruijn_word_has_together():
    """Some cyclic word has all 2^m factors of length m: N. G. de Bruijn (1946)."""
    every = [f"{i:04b}" for i in range(16)]
    assert leaves_a_word([], every)
    assert not leaves_a_word(["0110"], every)
    assert leaves_a_word(["0110"], [each for each in every if each != "0110"])
    # Without 0001 a run of four even steps never ends.
    assert not leaves_a_word(["0001"], ["0000"])


def test_the_first_word_that_does_not_fit_is_named():
    """Of several words the one is blamed that can't be had together with those before it."""
    with pytest.raises(InputError) as caught:
        Shape(forbid=("0011", "1011"), require=("00", "01", "1100", "11000"))
    assert (caught.value.field, caught.value.given) == ("shape.require", "1100")
