"""An orbit encoding in the making: what every technique of the family reads and adds to.

`started` states what all members share: the bits of every element, the step from each to the next, that the last image
is the first element, the states "j odd steps among the first i", the bounds of the least element and the range of each
element. A technique is a function that adds clauses to a `Draft`; `finished` turns it into an encoding.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

from cycle_encodings._formula import Encoding
from cycle_encodings._gates import Builder
from solverkit.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Callable

    from solverkit.exact.windows import Windows
    from solverkit.numerals import Span
    from solverkit.window import Cell

__all__ = ["Draft", "StepRule", "checked_option", "finished", "started"]

#: States image = T(element) for two lists of bits; `Builder` and map as given.
StepRule = "Callable[[Builder, Cell, list[int], list[int]], None]"


@dataclass(frozen=True, slots=True)
class Draft:
    """The shared part of an orbit encoding.

    Args:
        windows: the admissible states and their ranges; not empty.
        builder: holds the clauses so far.
        spans: range of the element after i steps, 0 ≤ i ≤ k.
        elements: its bits; the last list stands for the first element too.
        states: (i, j) -> literal "j odd steps among the first i".
    """

    windows: Windows
    builder: Builder
    spans: tuple[Span, ...]
    elements: tuple[list[int], ...]
    states: dict[tuple[int, int], int]

    @property
    def cell(self) -> Cell:
        """The cell."""
        return self.windows.cell


def checked_option(name: str, value: int, low: int, high: int) -> None:
    """Refuse an option outside its range.

    Raises:
        InputError: it is.
    """
    if not isinstance(value, int) or not low <= value <= high:
        raise InputError(name, value, f"an integer from {low} to {high}")


def started(windows: Windows, step: Callable[[Builder, Cell, list[int], list[int]], None], first: int = 0) -> Draft:
    """Return the shared part.

    Args:
        windows: of a cell of positive elements, not empty.
        step: states one step of the map.
        first: the elements after 1 … ``first`` − 1 steps are left out, and so are the steps before ``first``.
    """
    cell, builder = windows.cell, Builder()
    spans = tuple(windows.elements(i) for i in range(cell.length + 1))
    elements = tuple(
        [] if 0 < i < first else [builder.variable(f"n[{i}].{place}") for place in range(span.high.bit_length())]
        for i, span in enumerate(spans)
    )
    builder.group("step")
    for bits, image in pairwise(elements[first:] if first else elements):
        step(builder, cell, bits, image)
    builder.group("closing")
    _identify(builder, elements[-1], elements[0])
    builder.group("lower bound")
    builder.at_least(elements[0], cell.above + 1)
    builder.group("upper bound")
    builder.at_most(elements[0], windows.bound)
    builder.group("ranges")
    for bits, span in zip(elements, spans, strict=True):
        if bits:
            builder.at_least(bits, span.low)
            builder.at_most(bits, span.high)
    states = _counters(builder, windows, elements, first)
    return Draft(windows, builder, spans, elements, states)


def _identify(builder: Builder, one: list[int], two: list[int]) -> None:
    for place in range(max(len(one), len(two))):
        a = one[place] if place < len(one) else -builder.true
        b = two[place] if place < len(two) else -builder.true
        builder.equal(a, b)


def _counters(
    builder: Builder, windows: Windows, elements: tuple[list[int], ...], first: int
) -> dict[tuple[int, int], int]:
    """State which odd counts the prefixes have; return (i, j) -> literal of the state."""
    builder.group("odd count")
    length, states = windows.cell.length, {}
    for i in range(first, length + 1):
        counts = windows.odd_counts(i)
        for j in counts:
            states[i, j] = builder.true if len(counts) == 1 else builder.variable(f"odd[{i}]={j}")
        if len(counts) > 1:
            builder.exactly_one([states[i, j] for j in counts])
    missing = -builder.true
    for (i, j), state in states.items():
        if i < length:
            odd = elements[i][0]
            builder.add(-state, odd, states.get((i + 1, j), missing))
            builder.add(-state, -odd, states.get((i + 1, j + 1), missing))
        if i > first:
            odd = elements[i - 1][0]
            builder.add(-state, odd, states.get((i - 1, j), missing))
            builder.add(-state, -odd, states.get((i - 1, j - 1), missing))
    return states


def order(draft: Draft, after: int = 0) -> None:
    """State that each element after more than ``after`` steps is above the first, most significant bits first."""
    draft.builder.group("order")
    for bits in draft.elements[max(1, after + 1) : -1]:
        draft.builder.less(draft.elements[0], bits)


def finished(draft: Draft) -> Encoding:
    """Return the encoding, once nothing is added any more."""
    builder = draft.builder
    return Encoding(
        draft.cell,
        builder.variables,
        tuple(builder.clauses),
        builder.finished(),
        tuple(draft.elements[0]),
        builder.names,
    )


def excluded(cell: Cell) -> Encoding:
    """Return the formula of a cell whose ranges leave no room: one clause that fails."""
    builder = Builder()
    builder.group("ranges")
    builder.clauses.append((-builder.true,))
    return Encoding(cell, builder.variables, tuple(builder.clauses), builder.finished(), (), builder.names)
