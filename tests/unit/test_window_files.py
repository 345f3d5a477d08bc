"""Windows from files and options: what is read, and what every complaint names."""

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from solverkit.errors import InputError
from solverkit.maps import Map
from solverkit.numerals import Span, json_integer, parse_integer, parse_span
from solverkit.window import Assumption, Cell, Sign, Window
from solverkit.window_file import read_window, window_digest, window_from_table, window_table

FULL = """
title = "Table 4, second printing"
[map]
multiplier = 3
offsets = [5, 7, "11..49"]
[cycle]
lengths = "1..60"
odd_steps = "2..40"
above = "2^20"
sign = "both"
primitive = true
[assume]
no_cycle_below = "2^71"
source = "a published verification"
"""


def _from(text, tmp_path, overrides=None):
    path = tmp_path / "window.toml"
    path.write_text(text, encoding="utf-8")
    return window_from_table(read_window(path), overrides)


def test_a_full_file_is_read(tmp_path):
    window = _from(FULL, tmp_path)
    assert window.maps == tuple(Map(3, d) for d in [5, 7, *range(11, 50, 2)])
    assert (window.lengths, window.odd, window.above) == (Span(1, 60), Span(2, 40), 2**20)
    assert window.signs == (Sign.POSITIVE, Sign.NEGATIVE)
    assert window.assumption == Assumption(2**71, "a published verification")
    assert window.bound == 2**71 - 1
    assert window.primitive


def test_options_replace_what_the_file_says(tmp_path):
    window = _from(FULL, tmp_path, {"cycle.lengths": "7", "map": ["5,1,3", "7,-5..-1"], "cycle.primitive": False})
    assert window.lengths == Span(7, 7)
    assert window.maps == (Map(5, 1), Map(5, 3), Map(7, -5), Map(7, -3), Map(7, -1))
    assert not window.primitive


def test_several_map_tables_are_read(tmp_path):
    text = "[[map]]\nmultiplier = 3\noffsets = 1\n[[map]]\nmultiplier = 5\noffsets = [-1]\n[cycle]\nlengths = 9\n"
    assert _from(text, tmp_path).maps == (Map(3, 1), Map(5, -1))


@pytest.mark.parametrize(
    ("old", "new", "field"),
    [
        ("multiplier = 3", "multiplier = 4", "map.multiplier"),
        ("multiplier = 3", "multiplier = 1", "map.multiplier"),
        ("multiplier = 3", "multiplier = 3.0", "map.multiplier"),
        ("multiplier = 3", "multiplier = true", "map.multiplier"),
        ("multiplier = 3", "factor = 3", "map.factor"),
        ("multiplier = 3", "", "map.multiplier"),
        ('[5, 7, "11..49"]', "[6]", "map.offsets"),
        ('[5, 7, "11..49"]', "[0]", "map.offsets"),
        ('[5, 7, "11..49"]', "[]", "map.offsets"),
        ('[5, 7, "11..49"]', '["49..11"]', "map.offsets"),
        ('[5, 7, "11..49"]', '["8..8"]', "map.offsets"),
        ('[5, 7, "11..49"]', '["1..10^9"]', "map.offsets"),
        ('"1..60"', '"60..1"', "cycle.lengths"),
        ('"1..60"', '"0..60"', "cycle.lengths"),
        ('"1..60"', '"1..10^19"', "cycle.lengths"),
        ('"1..60"', '"1...60"', "cycle.lengths"),
        ('"1..60"', '".."', "cycle.lengths"),
        ('"1..60"', "-3", "cycle.lengths"),
        ('"1..60"', "1.5", "cycle.lengths"),
        ('"1..60"', "[1, 60]", "cycle.lengths"),
        ('"2..40"', '"0..40"', "cycle.odd_steps"),
        ('"2..40"', '"some"', "cycle.odd_steps"),
        ('"2^20"', '"-1"', "cycle.above"),
        ('"2^20"', '"2^99999999"', "cycle.above"),
        ('"both"', '"either"', "cycle.sign"),
        ("primitive = true", 'primitive = "yes"', "cycle.primitive"),
        ("primitive = true", "primitve = true", "cycle.primitve"),
        ("[assume]", "[asume]", "asume"),
        ('no_cycle_below = "2^71"', "", "assume.no_cycle_below"),
        ('source = "a published verification"', 'source = ""', "assume.source"),
        ('title = "Table 4, second printing"', "title = 4", "title"),
        ("[map]", "map = 3\n[maps]", "maps"),
    ],
)
def test_complaints_name_field_value_and_what_is_allowed(old, new, field, tmp_path):
    assert old in FULL
    with pytest.raises(InputError) as caught:
        _from(FULL.replace(old, new), tmp_path)
    assert caught.value.field == field
    assert "allowed: " in str(caught.value)
    assert "\n" not in str(caught.value)


def test_files_that_are_no_windows_are_refused(tmp_path):
    for content in (b"\xff\xfe", b"[map", b"x = 1\n" * 10, b"[" * 5000):
        path = tmp_path / "bad.toml"
        path.write_bytes(content)
        with pytest.raises(InputError):
            window_from_table(read_window(path))
    with pytest.raises(InputError, match="can be read"):
        read_window(tmp_path / "absent.toml")
    with pytest.raises(InputError, match="can be read"):
        read_window(tmp_path)


def test_any_offset_up_to_a_bound_means_both_signs():
    window = window_from_table({}, {"map": ["3,any"], "map.offsets_at_most": "6", "cycle.lengths": "5"})
    assert window.maps == tuple(Map(3, d) for d in range(-5, 6, 2))
    table = {"map": {"multiplier": 3, "offsets": "any", "offsets_at_most": 6}, "cycle": {"lengths": 5}}
    assert window_from_table(table) == window
    for wrong in (
        {"map": ["3,any"]},
        {"map": ["3,1"], "map.offsets_at_most": "6"},
        {"map": ["3,any"], "map.offsets_at_most": "0"},
    ):
        with pytest.raises(InputError, match="offsets-at-most"):
            window_from_table({}, wrong | {"cycle.lengths": "5"})


@pytest.mark.parametrize("text", ["3", "3,", ",1", "3,1,,5", "", "3,1..", "3;1", "3,1 5"])
def test_map_options_of_another_form_are_refused(text):
    with pytest.raises(InputError, match="--map"):
        window_from_table({}, {"map": [text], "cycle.lengths": "5"})


@pytest.mark.parametrize(
    ("text", "value"),
    [("12", 12), (" -5 ", -5), ("2^71", 2**71), ("-2^3", -8), ("10^3-1", 999), ("0^9", 0), ("1^999999", 1), (7, 7)],
)
def test_integers_are_read_in_every_form(text, value):
    assert parse_integer(text, "n") == value


@pytest.mark.parametrize("text", ["", "x", "1.5", "2^", "^2", "2^-1", "1e9", None, True, 2.0, "９x", "--1"])
def test_what_is_no_integer_is_refused(text):
    with pytest.raises(InputError, match="n: got"):
        parse_integer(text, "n")


@pytest.mark.parametrize("digits", [4001, 5000, 10**6])
def test_integers_of_more_than_4000_digits_are_refused_quickly(digits):
    for huge in ("9" * digits, f"10^{digits}", f"-2^{4 * digits}", f"2^1+{'9' * digits}"):
        with pytest.raises(InputError, match="n: got"):
            parse_integer(huge, "n")
    if digits < 10**5:
        with pytest.raises(InputError, match="n: got"):
            parse_integer(10**digits, "n")


@given(st.integers(-(10**30), 10**30), st.integers(0, 10**30))
def test_ranges_survive_their_own_text(low, more):
    span = Span(low, low + more)
    assert parse_span(str(span), "n") == span
    assert len(Span(low, low + more % 1000)) == len(list(Span(low, low + more % 1000)))


@given(st.integers(-(2**60), 2**60))
def test_json_integers_are_exact_for_every_reader(number):
    carried = json_integer(number)
    assert int(carried) == number
    assert isinstance(carried, str) == (abs(number) > 2**53)


def test_window_tables_read_back_to_the_same_window(tmp_path):
    window = _from(FULL, tmp_path)
    again = window_from_table(json.loads(json.dumps(window_table(window))))
    assert again == window
    assert window_digest(again) == window_digest(window)


def test_digest_ignores_the_title_and_nothing_else(tmp_path):
    window = _from(FULL, tmp_path)
    assert window_digest(_from(FULL.replace("Table 4", "Table 5"), tmp_path)) == window_digest(window)
    for old, new in [
        ("1..60", "1..61"),
        ("2^20", "2^21"),
        ("both", "positive"),
        ("11..49", "11..51"),
        ("2^71", "2^72"),
    ]:
        assert window_digest(_from(FULL.replace(old, new), tmp_path)) != window_digest(window)


def test_values_check_themselves():
    with pytest.raises(InputError, match="each map once"):
        Window((Map(3, 1), Map(3, 1)), Span(1, 2))
    with pytest.raises(InputError, match="at least one map"):
        Window((), Span(1, 2))
    with pytest.raises(InputError, match="odd"):
        Cell(3, 1, 2, 3)
    with pytest.raises(InputError, match="length"):
        Cell(3, 1, 0, 1)
    with pytest.raises(InputError, match="above"):
        Cell(3, 1, 2, 1, above=-1)
    with pytest.raises(InputError, match="A at most B"):
        Span(2, 1)
