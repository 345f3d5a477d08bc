"""Side conditions on cycles: values read from a window, evaluated on a cycle.

Each condition has one meaning, stated at `Shape`; every other form of it (clauses, automata, the auditor)
must agree with the evaluation here.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, fields
from fractions import Fraction
from typing import TYPE_CHECKING, Any

from solverkit.errors import InputError
from solverkit.numerals import Span, json_integer, parse_integer, parse_span
from solverkit.shape_consistency import MAX_WORDS, refuse_contradictions
from solverkit.shape_pattern import compile_pattern
from solverkit.shape_residues import Among, ResidueCondition
from solverkit.shape_words import (
    begins_with,
    discrepancy,
    has_factor,
    is_balanced,
    is_palindromic,
    longest_run,
)
from solverkit.words import circuits

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator

    from solverkit.findings import Cycle

__all__ = ["Among", "ResidueCondition", "Shape", "shape_from_table", "shape_table"]

_WORD = re.compile("[01]+")


@dataclass(frozen=True, slots=True)
class Shape:
    """Side conditions on a cycle; all that are stated must hold.

    The *word* is the parity word from the least element, repeated for ever as the orbit repeats it: a
    *factor* may begin at any element and may be longer than the word, and so may a prefix. A *run* is a
    maximal block of consecutive odd (even) elements of the cycle; its length counts elements, so a cycle of
    odd elements alone is one run of length k. *Least* and *largest* go by absolute value: cycles of negative
    elements are measured as their mirror images are.

    Args:
        circuits: the number of circuits (local minima; runs of odd elements) lies in this range.
        longest_odd_run: no run of odd elements is longer than this, at least 1.
        longest_even_run: no run of even elements is longer than this, at least 0.
        forbid: none of these words is a factor of the word.
        require: each of these words is a factor of the word.
        pattern: some rotation of the word, all k symbols of it, belongs to the language of this regular
            expression.
        balanced: any two factors of equal length differ by at most 1 in their number of ones (the word is a
            rotation of a Christoffel word). False states nothing.
        palindromic: the word read backwards is a rotation of the word. False states nothing.
        discrepancy_at_most: |ones − l·x/k| is at most this rational number ≥ 0 for every factor, l its
            length.
        prefix: the parities from the least element on begin with this word; the empty word states nothing.
        largest_at_most: the absolute value of the largest element is at most this.
        ratio_at_most: largest to least element, in absolute value, is at most this rational number ≥ 1.
        sum_at_most: the absolute value of the sum of the k elements is at most this.
        contains: each of these numbers, with its sign, is an element.
        excludes: none of these numbers, with its sign, is an element.
        residues: conditions on residues.

    Raises:
        InputError: a value outside these ranges, or conditions that contradict each other or hold for no
            cycle; the field is ``shape.`` and the name of a condition.
    """

    circuits: Span | None = None
    longest_odd_run: int | None = None
    longest_even_run: int | None = None
    forbid: tuple[str, ...] = ()
    require: tuple[str, ...] = ()
    pattern: str | None = None
    balanced: bool = False
    palindromic: bool = False
    discrepancy_at_most: Fraction | None = None
    prefix: str = ""
    largest_at_most: int | None = None
    ratio_at_most: Fraction | None = None
    sum_at_most: int | None = None
    contains: tuple[int, ...] = ()
    excludes: tuple[int, ...] = ()
    residues: tuple[ResidueCondition, ...] = ()

    def __post_init__(self) -> None:
        for name in ("forbid", "require", "contains", "excludes", "residues"):
            object.__setattr__(self, name, tuple(sorted(set(getattr(self, name)))))
        for name in ("discrepancy_at_most", "ratio_at_most"):
            if getattr(self, name) is not None:
                object.__setattr__(self, name, Fraction(getattr(self, name)))
        if self.circuits is not None and self.circuits.low < 1:
            raise InputError("shape.circuits", str(self.circuits), "circuit counts of at least 1")
        for name, least in _LEAST_VALUES.items():
            value = getattr(self, name)
            if value is not None and value < least:
                raise InputError(f"shape.{name}", str(value), f"a number of at least {least}")
        for name, words in (("forbid", self.forbid), ("require", self.require), ("prefix", (self.prefix,))):
            for word in words:
                if not _WORD.fullmatch(word) and (word or name != "prefix"):
                    raise InputError(f"shape.{name}", word, "words of the symbols 0 and 1")
            if (symbols := sum(map(len, words))) > MAX_WORDS:
                raise InputError(f"shape.{name}", f"{symbols} symbols", f"at most {MAX_WORDS} symbols in all")
        refuse_contradictions(self)

    def holds(self, cycle: Cycle) -> bool:
        """Tell whether all conditions hold for ``cycle``.

        Costs O(k) for each condition; a pattern at most O(k²) moves of its automaton.
        """
        return next(self._failures(cycle), None) is None

    def failures(self, cycle: Cycle) -> tuple[str, ...]:
        """Return the names of the conditions that ``cycle`` fails, in the order of this class."""
        return tuple(self._failures(cycle))

    def holds_for_word(self, word: str) -> bool:
        """Tell whether all conditions on the parity word hold; those on elements are not looked at.

        Args:
            word: from the least element; any rotation serves when ``prefix`` is empty.
        """
        return next(self._word_failures(word), None) is None

    def _failures(self, cycle: Cycle) -> Iterator[str]:
        yield from self._word_failures(cycle.word)
        yield from self._element_failures(cycle)

    def _word_failures(self, word: str) -> Iterator[str]:
        if self.circuits is not None and circuits(word) not in self.circuits:
            yield "circuits"
        if self.longest_odd_run is not None and longest_run(word, "1") > self.longest_odd_run:
            yield "longest_odd_run"
        if self.longest_even_run is not None and longest_run(word, "0") > self.longest_even_run:
            yield "longest_even_run"
        if any(has_factor(word, each) for each in self.forbid):
            yield "forbid"
        if not all(has_factor(word, each) for each in self.require):
            yield "require"
        if self.pattern is not None and not compile_pattern(self.pattern).matches_rotation(word):
            yield "pattern"
        if self.balanced and not is_balanced(word):
            yield "balanced"
        if self.palindromic and not is_palindromic(word):
            yield "palindromic"
        if self.discrepancy_at_most is not None and discrepancy(word) > self.discrepancy_at_most:
            yield "discrepancy_at_most"
        if not begins_with(word, self.prefix):
            yield "prefix"

    def _element_failures(self, cycle: Cycle) -> Iterator[str]:
        if self.largest_at_most is not None and abs(cycle.largest) > self.largest_at_most:
            yield "largest_at_most"
        if self.ratio_at_most is not None and Fraction(cycle.largest, cycle.least) > self.ratio_at_most:
            yield "ratio_at_most"
        if self.sum_at_most is not None and abs(cycle.total) > self.sum_at_most:
            yield "sum_at_most"
        if self.contains or self.excludes:
            elements = frozenset(cycle.elements())
            if not elements.issuperset(self.contains):
                yield "contains"
            if not elements.isdisjoint(self.excludes):
                yield "excludes"
        if not all(each.holds(cycle) for each in self.residues):
            yield "residues"


_LEAST_VALUES = {
    "longest_odd_run": 1,
    "longest_even_run": 0,
    "discrepancy_at_most": 0,
    "largest_at_most": 1,
    "ratio_at_most": 1,
    "sum_at_most": 1,
}


def shape_from_table(table: Mapping[str, Any]) -> Shape:
    """Return the shape that a table with the keys of ``[shape]`` states; an absent key states nothing.

    Args:
        table: plain values as TOML and JSON give them. Rational numbers are integers or texts such as
            ``"7/2"``; a residue condition is a table of ``of``, ``modulus`` and one of ``in``, ``not_in``.

    Raises:
        InputError: an unknown key, or a value that is not allowed; the field is ``shape.`` and the key.

    >>> shape_from_table({"circuits": "1..3", "forbid": ["1111", "000"]}).forbid
    ('000', '1111')
    """
    _only_known(table, "shape", _READERS)
    return Shape(**{key: _READERS[key](value, f"shape.{key}") for key, value in table.items()})


def shape_table(shape: Shape) -> dict[str, Any]:
    """Return the stated conditions as plain values; `shape_from_table` reads them back to an equal shape."""
    stated = ((each, getattr(shape, each.name)) for each in fields(shape))
    return {each.name: _plain(value) for each, value in stated if value != each.default}


def _plain(value: object) -> object:
    match value:
        case bool() | str():
            return value
        case int():
            return json_integer(value)
        case Span(low, high):
            return json_integer(low) if low == high else str(value)
        case Fraction():
            return json_integer(value.numerator) if value.denominator == 1 else str(value)
        case ResidueCondition(of, modulus, residues, inside):
            return {
                "of": of.value,
                "modulus": json_integer(modulus),
                "in" if inside else "not_in": [json_integer(each) for each in residues],
            }
        case tuple():
            return [_plain(each) for each in value]
    raise TypeError(f"no plain form of {value!r}")


def _only_known(table: Mapping[str, Any], name: str, known: Iterable[str]) -> None:
    for key in table:
        if key not in known:
            raise InputError(f"{name}.{key}", "an unknown key", "one of " + ", ".join(known))


def _boolean(value: object, field: str) -> bool:
    if not isinstance(value, bool):
        raise InputError(field, value, "true or false")
    return value


def _text(value: object, field: str) -> str:
    if not isinstance(value, str) or not value:
        raise InputError(field, value, "a text that is not empty")
    return value


def _rational(value: object, field: str) -> Fraction:
    if isinstance(value, str) and "/" in value:
        above, _, below = value.partition("/")
        return Fraction(parse_integer(above, field), parse_integer(below, field, 1))
    if isinstance(value, float):
        raise InputError(field, value, 'an integer, or a fraction as a text such as "7/2"')
    return Fraction(parse_integer(value, field))


def _entries(value: object, field: str) -> list[Any]:
    if not isinstance(value, list) or not value:
        raise InputError(field, value, "a list with at least one entry")
    return value


def _words(value: object, field: str) -> tuple[str, ...]:
    return tuple(_text(each, field) for each in _entries(value, field))


def _integers(value: object, field: str) -> tuple[int, ...]:
    return tuple(parse_integer(each, field) for each in _entries(value, field))


def _residues(value: object, field: str) -> tuple[ResidueCondition, ...]:
    return tuple(_residue_condition(each, field) for each in _entries(value, field))


def _residue_condition(value: object, field: str) -> ResidueCondition:
    if not isinstance(value, Mapping):
        raise InputError(field, value, 'tables such as { of = "all", modulus = 5, not_in = [0] }')
    _only_known(value, field, ("of", "modulus", "in", "not_in"))
    places = [key for key in ("in", "not_in") if key in value]
    if len(places) != 1:
        raise InputError(field, " and ".join(places) or "neither in nor not_in", "exactly one of in and not_in")
    of = value.get("of")
    if not isinstance(of, str) or of not in {each.value for each in Among}:
        raise InputError(f"{field}.of", of, ", ".join(Among))
    modulus = parse_integer(value.get("modulus"), f"{field}.modulus", 2)
    classes = _integers(value[places[0]], f"{field}.{places[0]}")
    return ResidueCondition(Among(of), modulus, classes, inside=places[0] == "in")


_READERS: dict[str, Callable[[object, str], Any]] = {
    "circuits": lambda value, field: parse_span(value, field, 1),
    "longest_odd_run": lambda value, field: parse_integer(value, field, 1),
    "longest_even_run": lambda value, field: parse_integer(value, field, 0),
    "forbid": _words,
    "require": _words,
    "pattern": _text,
    "balanced": _boolean,
    "palindromic": _boolean,
    "discrepancy_at_most": _rational,
    "prefix": _text,
    "largest_at_most": lambda value, field: parse_integer(value, field, 1),
    "ratio_at_most": _rational,
    "sum_at_most": lambda value, field: parse_integer(value, field, 1),
    "contains": _integers,
    "excludes": _integers,
    "residues": _residues,
}
