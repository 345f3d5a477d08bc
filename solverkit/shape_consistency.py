"""Side conditions that contradict each other, or that no cycle meets whatever the map, are refused.

Only contradictions that need no arithmetic of a map are looked for; a shape that passes may still hold for no
cycle.
"""

from __future__ import annotations

from bisect import bisect_left
from fractions import Fraction
from itertools import combinations
from typing import TYPE_CHECKING

from solverkit.errors import InputError
from solverkit.shape_pattern import compile_pattern
from solverkit.shape_residues import Among
from solverkit.shape_words import avoiding, has_factor, leaves_a_word

if TYPE_CHECKING:
    from solverkit.shape import Shape

__all__ = ["MAX_WORDS", "refuse_contradictions"]

#: Largest number of symbols in the words of one condition together.
MAX_WORDS = 2000


def refuse_contradictions(shape: Shape) -> None:
    """Raise the error of the first contradiction among the conditions of ``shape``.

    Raises:
        InputError: with the field ``shape.`` and the name of a condition.
    """
    if shape.pattern is not None and not compile_pattern(shape.pattern).has_one():
        raise InputError("shape.pattern", shape.pattern, "a pattern with a 1: every cycle has an odd element")
    _factors(shape)
    _numbers(shape)
    _classes(shape)


def _factors(shape: Shape) -> None:
    if shape.prefix.startswith("0"):
        raise InputError("shape.prefix", shape.prefix, "a word that begins with 1: the least element is odd")
    for name, words in (("require", shape.require), ("prefix", (shape.prefix,))):
        for word in words:
            for factor in shape.forbid:
                if factor in word:
                    raise InputError(f"shape.{name}", word, f"words without {factor}, which shape.forbid names")
    if _fixed_point_serves(shape):
        return
    forbidden = list(shape.forbid)
    if not leaves_a_word(forbidden, ()):
        raise InputError("shape.forbid", _listed(shape.forbid), "words that some cycle with an odd element avoids")
    for name, symbol in (("longest_odd_run", "1"), ("longest_even_run", "0")):
        most = getattr(shape, name)
        # A longer run is not worth an automaton of its length: no shape is refused for it here.
        if most is not None and most < MAX_WORDS:
            forbidden.append(symbol * (most + 1))
            if not leaves_a_word(forbidden, ()):
                raise InputError(f"shape.{name}", most, "a run that leaves some cycle beside shape.forbid")
    wanted = [("require", word) for word in shape.require] + [("prefix", shape.prefix)]
    factors = [word for _, word in wanted]
    if not leaves_a_word(forbidden, factors):
        # The first of them that does not fit to those before it.
        counts = range(1, len(factors) + 1)
        first = bisect_left(counts, 1, key=lambda count: not leaves_a_word(forbidden, factors[:count]))
        name, word = wanted[first]
        raise InputError(f"shape.{name}", word, "a word that fits the other conditions on factors and runs")
    if shape.pattern is not None and compile_pattern(shape.pattern).has_closed_walk(avoiding(forbidden)) is False:
        raise InputError("shape.pattern", shape.pattern, "a pattern of some word that the forbidden factors leave")


def _fixed_point_serves(shape: Shape) -> bool:
    """Tell whether the word 1 meets the conditions here; its run has length 1 though 11 is a factor."""
    if any(has_factor("1", each) for each in shape.forbid):
        return False
    if shape.pattern is not None and not compile_pattern(shape.pattern).matches("1"):
        return False
    return all(has_factor("1", each) for each in (*shape.require, shape.prefix))


def _listed(given: object) -> str:
    return ", ".join(map(str, given)) if isinstance(given, tuple) else str(given)


def _numbers(shape: Shape) -> None:
    for name in ("contains", "excludes"):
        if 0 in getattr(shape, name):
            raise InputError(
                f"shape.{name}", 0, "integers other than 0, which is no element of a cycle with odd elements"
            )
    if not shape.contains:
        return
    sizes = [abs(number) for number in shape.contains]
    if shape.contains[0] < 0 < shape.contains[-1]:
        raise InputError("shape.contains", _listed(shape.contains), "numbers of one sign: a cycle has only one")
    for number in shape.contains:
        if number in shape.excludes:
            raise InputError("shape.contains", number, "numbers that shape.excludes does not name")
        for condition in shape.residues:
            if condition.of is Among.ALL and not condition.admits(number):
                raise InputError("shape.contains", number, "numbers with the residues that shape.residues wants of all")
    if shape.largest_at_most is not None and max(sizes) > shape.largest_at_most:
        raise InputError("shape.contains", max(sizes), f"numbers up to shape.largest_at_most = {shape.largest_at_most}")
    if shape.ratio_at_most is not None and Fraction(max(sizes), min(sizes)) > shape.ratio_at_most:
        raise InputError(
            "shape.contains",
            _listed(shape.contains),
            f"numbers within shape.ratio_at_most = {shape.ratio_at_most}",
        )
    if shape.sum_at_most is not None and sum(sizes) > shape.sum_at_most:
        raise InputError(
            "shape.contains",
            _listed(shape.contains),
            f"numbers of sum up to shape.sum_at_most = {shape.sum_at_most}",
        )


def _classes(shape: Shape) -> None:
    for each in shape.residues:
        if each.of in (Among.LEAST, Among.ALL) and not each.admits_odd():
            raise InputError("shape.residues", str(each), "odd residues too: the least element is odd")
    for one, other in combinations(shape.residues, 2):
        # One and the same element meets both, unless each speaks of an element of its own.
        shared = one.of is other.of is not Among.SOME or Among.ALL in (one.of, other.of)
        if shared and not one.meets(other):
            raise InputError("shape.residues", f"{one}; {other}", "conditions that one element can meet")
