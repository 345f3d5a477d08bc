"""An orbit formula in the making: what every member of the family states, and what some add.

`OrbitDraft` begins with the bits of every element and the range of the element after each step. Members then state the
step in one of the ways of `_steps`, the closing, the odd counts, the order, and whatever they are there for; each
method is one condition group. `finished` makes an encoding of it.
"""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING

from cycle_encodings._formula import Encoding
from cycle_encodings._gates import Builder
from solverkit.errors import InputError
from solverkit.exact.windows import element_windows

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

    from solverkit.exact.windows import Windows
    from solverkit.window import Cell

__all__ = ["OrbitDraft", "checked_option", "empty_formula", "encoded", "member_literals", "windows_of"]


def checked_option(name: str, value: int, low: int, high: int) -> None:
    """Refuse an option outside its range.

    Raises:
        InputError: it is.
    """
    if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
        raise InputError(name, value, f"an integer from {low} to {high}")


def windows_of(cell: Cell, rounds: int = 30) -> Windows:
    """Return the windows of a cell that an encoding is asked for.

    Raises:
        InputError: the cell asks for negative elements.
    """
    if cell.sign != 1:
        raise InputError("cell", cell.sign.word, "a cell of positive elements; reflect it first")
    return element_windows(cell, rounds=rounds)


def empty_formula(cell: Cell, group: str = "ranges") -> Encoding:
    """Return the formula of a cell that the condition ``group`` alone excludes: one clause that fails."""
    builder = Builder()
    builder.group(group)
    builder.clauses.append((-builder.true,))
    return Encoding(cell, builder.variables, tuple(builder.clauses), builder.finished(), (), builder.names)


def encoded(cell: Cell, build: Callable[[Windows], Encoding], rounds: int = 30) -> Encoding:
    """Return what ``build`` makes of the windows of a cell, or the formula that fails when they are empty.

    Raises:
        InputError: the cell asks for negative elements.
    """
    windows = windows_of(cell, rounds)
    return empty_formula(cell) if windows.empty else build(windows)


def member_literals(bits: Sequence[int], steps: int, residue: int) -> list[int]:
    """Return the literals that hold together just when the number is ≡ ``residue`` mod 2^``steps``."""
    return [bits[i] if residue >> i & 1 else -bits[i] for i in range(steps)]


class OrbitDraft:
    """A formula over the bits of the elements of a cycle.

    Args:
        windows: of a cell of positive elements, not empty.
        positions: after which numbers of steps elements are kept, ascending, 0 and k among them; all by default.

    Attributes:
        builder: holds the clauses so far.
        positions: the same.
        spans: range of the element after i steps, 0 ≤ i ≤ k.
        elements: its bits, least significant first; the last list stands for the first element too. Empty when left
            out.
        states: (i, j) -> literal "j odd steps among the first i", once `count_odd` has run.
    """

    def __init__(self, windows: Windows, positions: Iterable[int] | None = None) -> None:
        self.windows, self.cell, self.builder = windows, windows.cell, Builder()
        self.positions = tuple(range(self.cell.length + 1) if positions is None else positions)
        self.spans = tuple(windows.elements(i) for i in range(self.cell.length + 1))
        self.elements: tuple[list[int], ...] = tuple([] for _ in self.spans)
        for i in self.positions:
            self.elements[i].extend(
                self.builder.variable(f"n[{i}].{place}") for place in range(self.spans[i].high.bit_length())
            )
        self.states: dict[tuple[int, int], int] = {}

    def steps(self, step: Callable[[Builder, Cell, Sequence[int], Sequence[int]], None]) -> None:
        """State, by a rule of `_steps`, each step between two elements that are kept."""
        self.builder.group("step")
        for i, following in pairwise(self.positions):
            if following == i + 1:
                step(self.builder, self.cell, self.elements[i], self.elements[following])

    def close(self) -> None:
        """State that the last image is the first element."""
        self.builder.group("closing")
        self.builder.equal_numbers(self.elements[-1], self.elements[0])

    def count_odd(self, exclusive: bool = True) -> None:
        """State which odd counts the prefixes have, one literal for each admissible state.

        Args:
            exclusive: whether the others are stated to fail; they follow from the parities in any case, and no other
                condition needs them.
        """
        builder = self.builder
        builder.group("odd count")
        for i in self.positions:
            counts = self.windows.odd_counts(i)
            for j in counts:
                self.states[i, j] = builder.true if len(counts) == 1 else builder.variable(f"odd[{i}]={j}")
            if len(counts) > 1:
                literals = [self.states[i, j] for j in counts]
                if exclusive:
                    builder.exactly_one(literals)
                else:
                    builder.add(*literals)
        kept = set(self.positions)
        for (i, j), state in self.states.items():
            if i + 1 in kept:
                odd = self.elements[i][0]
                builder.add(-state, odd, self._state(i + 1, j))
                builder.add(-state, -odd, self._state(i + 1, j + 1))
            if i - 1 in kept:
                before = self.elements[i - 1]
                builder.add(-state, before[0], self._state(i - 1, j))
                builder.add(-state, -before[0], self._state(i - 1, j - 1))

    def _state(self, i: int, j: int) -> int:
        return self.states.get((i, j), -self.builder.true)

    def put_least_first(self) -> None:
        """State that every element after the first is above it: each cycle is one model, a repeated word none."""
        self.builder.group("order")
        for i in self.positions[1:-1]:
            self.builder.less(self.elements[0], self.elements[i])

    def bound(self) -> None:
        """State the bounds of the least element, and the range of the element after each step."""
        builder = self.builder
        builder.group("lower bound")
        builder.at_least(self.elements[0], self.cell.above + 1)
        builder.group("upper bound")
        builder.at_most(self.elements[0], self.windows.bound)
        builder.group("ranges")
        for i in self.positions:
            builder.at_least(self.elements[i], self.spans[i].low)
            builder.at_most(self.elements[i], self.spans[i].high)

    def guard(self) -> None:
        """State, state by state, the exact ranges of the least element and of the element there."""
        builder = self.builder
        builder.group("ranges")
        for (i, j), state in self.states.items():
            room = self.windows.rooms[i, j]
            sides = ((self.elements[i], room.element, self.spans[i]), (self.elements[0], room.least, self.spans[0]))
            for bits, inner, outer in sides:
                if inner.low > outer.low:
                    builder.at_least(bits, inner.low, [-state])
                if inner.high < outer.high:
                    builder.at_most(bits, inner.high, [-state])

    def finished(self, cubes: Sequence[int] = ()) -> Encoding:
        """Return the encoding, once nothing is added any more.

        Args:
            cubes: see `Encoding`.
        """
        builder = self.builder
        return Encoding(
            self.cell,
            builder.variables,
            tuple(builder.clauses),
            builder.finished(),
            tuple(self.elements[0]),
            builder.names,
            tuple(cubes),
        )
