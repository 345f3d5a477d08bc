"""Regular expressions over 0 and 1, matched by some rotation of a word.

The expression becomes a nondeterministic automaton (Thompson, Comm. ACM 11 (1968) 419-422), which reads the
doubled word once for all rotations together; there is no backtracking. Sets of states are made only as they
are met.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

from solverkit.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Sequence

__all__ = ["MAX_EXPANDED", "MAX_NESTING", "MAX_PATTERN", "MAX_REPEAT", "Pattern", "compile_pattern"]

#: Largest number of characters of a pattern.
MAX_PATTERN = 1000
#: Largest count in ``{m}`` or ``{m,n}``.
MAX_REPEAT = 1000
#: Largest number of symbols and operators once all counts are written out.
MAX_EXPANDED = 5000
#: Largest depth of parentheses.
MAX_NESTING = 50
_MOST_SETS = 20_000

_FORM = "a regular expression of 0, 1, |, *, +, ?, {m}, {m,n}, {m,} and parentheses"
_COUNTS = re.compile(r"\{([0-9]+)(?:(,)([0-9]*))?\}")
_SIMPLE_COUNTS: dict[str, tuple[int, int | None]] = {"*": (0, None), "+": (1, None), "?": (0, 1)}


@dataclass(frozen=True, slots=True)
class _Symbol:
    text: str
    size: int = 1


@dataclass(frozen=True, slots=True)
class _Sequence:
    parts: tuple[_Node, ...]
    size: int


@dataclass(frozen=True, slots=True)
class _Choice:
    options: tuple[_Node, ...]
    size: int


@dataclass(frozen=True, slots=True)
class _Repeat:
    body: _Node
    least: int
    most: int | None
    size: int


_Node = _Symbol | _Sequence | _Choice | _Repeat


class _Reader:
    """Recursive descent over one pattern: choice, sequence, repeat, symbol or group."""

    def __init__(self, text: str, name: str) -> None:
        self.text, self.name, self.at, self.depth = text, name, 0, 0

    def refused(self, why: str) -> InputError:
        return InputError(self.name, self.text, f"{_FORM}; at character {self.at + 1} {why}")

    def whole(self) -> _Node:
        node = self.choice()
        if self.at < len(self.text):
            raise self.refused("stands a ) that nothing opens")
        return node

    def choice(self) -> _Node:
        options = [self.sequence()]
        while self.text.startswith("|", self.at):
            self.at += 1
            options.append(self.sequence())
        if len(options) == 1:
            return options[0]
        return _Choice(tuple(options), self.bounded(1 + sum(each.size for each in options)))

    def sequence(self) -> _Node:
        parts: list[_Node] = []
        while self.at < len(self.text) and self.text[self.at] not in "|)":
            parts.append(self.repeat())
        if len(parts) == 1:
            return parts[0]
        return _Sequence(tuple(parts), self.bounded(1 + sum(each.size for each in parts)))

    def repeat(self) -> _Node:
        node = self.symbol()
        counts = self.counts()
        if counts is None:
            return node
        least, most = counts
        copies = max(least, 1) if most is None else most
        node = _Repeat(node, least, most, self.bounded(1 + node.size * copies))
        if self.text[self.at : self.at + 1] in tuple("*+?{"):
            raise self.refused("a second repeat sign follows; parentheses say what is meant")
        return node

    def bounded(self, size: int) -> int:
        if size > MAX_EXPANDED:
            raise self.refused(f"it has over {MAX_EXPANDED} symbols and operators with its counts written out")
        return size

    def counts(self) -> tuple[int, int | None] | None:
        sign = self.text[self.at : self.at + 1]
        if sign in _SIMPLE_COUNTS:
            self.at += 1
            return _SIMPLE_COUNTS[sign]
        if sign != "{":
            return None
        found = _COUNTS.match(self.text, self.at)
        if found is None:
            raise self.refused("{ opens no count {m}, {m,n} or {m,}")
        low, comma, high = found.groups()
        least = int(low)
        most = least if comma is None else int(high) if high else None
        if max(least, most or 0) > MAX_REPEAT:
            raise self.refused(f"a count is over {MAX_REPEAT}")
        if most is not None and most < least:
            raise self.refused("a count {m,n} has m above n")
        self.at = found.end()
        return least, most

    def symbol(self) -> _Node:
        sign = self.text[self.at]
        if sign in "01":
            self.at += 1
            return _Symbol(sign)
        if sign != "(":
            raise self.refused("there is nothing to repeat" if sign in "*+?{" else "stands another sign")
        if self.depth == MAX_NESTING:
            raise self.refused(f"parentheses are over {MAX_NESTING} deep")
        opened = self.at
        self.at, self.depth = self.at + 1, self.depth + 1
        node = self.choice()
        if not self.text.startswith(")", self.at):
            self.at = opened
            raise self.refused("stands a ( that nothing closes")
        self.at, self.depth = self.at + 1, self.depth - 1
        return node


class Pattern:
    """A regular expression over 0 and 1 as an automaton.

    Args:
        text: symbols 0 and 1, alternatives ``|``, repeats ``*  +  ?  {m}  {m,n}  {m,}``, and parentheses; an
            alternative may be empty.
        name: the field that an error message gives.

    Raises:
        InputError: another sign, a form that isn't closed, or over one of the limits of this module.
    """

    __slots__ = ("_final", "_jumps", "_moves", "_reads", "_start", "text")

    def __init__(self, text: str, name: str = "shape.pattern") -> None:
        if len(text) > MAX_PATTERN:
            raise InputError(name, f"a pattern of {len(text)} characters", f"at most {MAX_PATTERN} characters")
        self.text = text
        self._jumps: list[list[int]] = []  # state -> states reached without reading
        self._reads: list[tuple[str, int] | None] = []  # state -> the symbol it reads and the state then
        self._moves: dict[tuple[frozenset[int], str], frozenset[int]] = {}
        start = self._state()
        self._final = self._build(_Reader(text, name).whole(), start)
        self._start = self._closure([start])

    def has_one(self) -> bool:
        """Tell whether some word of the language has an odd step."""
        # Every state that reads lies on a path from start to end.
        return any(read is not None and read[0] == "1" for read in self._reads)

    def has_closed_walk(self, following: Sequence[Sequence[int]], most_steps: int = 10**6) -> bool | None:
        """Tell whether some word of the language, with an odd step, labels a closed walk of an automaton.

        Args:
            following: for every state of the automaton the states after 0 and after 1, or −1.
            most_steps: cost allowed, in triples of a state here and two states there.

        Returns:
            None when it would cost more.
        """
        if len(self._reads) * len(following) ** 2 > most_steps:
            return None
        return any(self._closes(following, home) for home in range(len(following)))

    def _closes(self, following: Sequence[Sequence[int]], home: int) -> bool:
        stack = [(state, home, False) for state in self._start]
        met = set(stack)
        while stack:
            state, place, odd = stack.pop()
            if state == self._final and place == home and odd:
                return True
            read = self._reads[state]
            if read is None or (after := following[place][read[0] == "1"]) < 0:
                continue
            for reached in self._closure([read[1]]):
                step = (reached, after, odd or read[0] == "1")
                if step not in met:
                    met.add(step)
                    stack.append(step)
        return False

    def matches(self, word: str) -> bool:
        """Tell whether the pattern matches ``word`` itself, all of it. Costs k moves."""
        states = self._start
        for symbol in word:
            states = self._move(states, symbol)
        return self._final in states

    def matches_rotation(self, word: str) -> bool:
        """Tell whether the pattern matches some rotation of ``word``, all of it.

        All k rotations are read together: for every set of states met, a bit mask of the rotations that stand
        at it. Costs at most k moves for each of the k rotations, far fewer where rotations meet in one set.
        """
        length = len(word)
        standing: dict[frozenset[int], int] = {}
        for place, symbol in enumerate(word + word):
            if place < length:
                standing[self._start] = standing.get(self._start, 0) | 1 << place
            after: dict[frozenset[int], int] = {}
            for states, rotations in standing.items():
                reached = self._move(states, symbol)
                if reached:
                    after[reached] = after.get(reached, 0) | rotations
            begun = place + 1 - length
            if begun >= 0:
                if any(rotations >> begun & 1 for states, rotations in after.items() if self._final in states):
                    return True
                younger = ~((2 << begun) - 1)
                after = {states: left for states, rotations in after.items() if (left := rotations & younger)}
            standing = after
        return False

    def _move(self, states: frozenset[int], symbol: str) -> frozenset[int]:
        reached = self._moves.get((states, symbol))
        if reached is None:
            reads = (self._reads[state] for state in states)
            reached = self._closure([read[1] for read in reads if read is not None and read[0] == symbol])
            if len(self._moves) >= _MOST_SETS:
                self._moves.clear()
            self._moves[states, symbol] = reached
        return reached

    def _closure(self, states: list[int]) -> frozenset[int]:
        """Return the states reached without reading that read a symbol or are final."""
        met, stack = set(states), list(states)
        while stack:
            for state in self._jumps[stack.pop()]:
                if state not in met:
                    met.add(state)
                    stack.append(state)
        return frozenset(state for state in met if state == self._final or self._reads[state] is not None)

    def _state(self) -> int:
        self._jumps.append([])
        self._reads.append(None)
        return len(self._jumps) - 1

    def _build(self, node: _Node, start: int) -> int:
        """Add the states of ``node`` after ``start``; return the state at its end."""
        match node:
            case _Symbol(text):
                end = self._state()
                # A state of its own, so that what jumps to start keeps its other ways on.
                reading = self._state()
                self._jumps[start].append(reading)
                self._reads[reading] = (text, end)
                return end
            case _Sequence(parts):
                for part in parts:
                    start = self._build(part, start)
                return start
            case _Choice(options):
                ends = [self._build(option, start) for option in options]
                end = self._state()
                for each in ends:
                    self._jumps[each].append(end)
                return end
            case _Repeat(body, least, most):
                return self._repeat(body, least, most, start)

    def _repeat(self, body: _Node, least: int, most: int | None, start: int) -> int:
        for _ in range(least):
            start = self._build(body, start)
        end = self._state()
        if most is None:
            again = self._state()
            self._jumps[start].append(again)
            self._jumps[self._build(body, again)].append(again)
            self._jumps[again].append(end)
            return end
        for _ in range(most - least):
            self._jumps[start].append(end)
            start = self._build(body, start)
        self._jumps[start].append(end)
        return end


@lru_cache(maxsize=64)
def compile_pattern(text: str, name: str = "shape.pattern") -> Pattern:
    """Return the `Pattern` of ``text``; the last 64 are kept.

    >>> compile_pattern("(10|110)*").matches_rotation("01101")
    True
    """
    return Pattern(text, name)
