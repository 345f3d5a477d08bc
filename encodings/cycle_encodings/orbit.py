"""The orbit encoding: bits of every element, one addition a step, exact prefix counters, "least element first".

A step is out = h + p·(((q − 1)/2)·n + (d + 1)/2) with n = 2h + p, in two's complement, wide enough to be exact: for
(3, 1) and (3, −1) this is one adder a step, in general one for each one in (q − 1)/2 and one for the constant. A state
(i, j), "j odd steps among the first i", is a literal; only states that `element_windows` admits exist, and each guards
the exact range of its element. Every element after the first is strictly larger than the first, so each cycle is one
model, and a word that repeats a shorter one is none.

Condition groups: ``step`` (the map), ``closing`` (the last image is the first element), ``odd count`` (the prefix
counters), ``order`` (least element first), ``lower bound`` (above B), ``upper bound`` (at most U'), ``ranges`` (exact
range of the element for each state), ``residues`` (classes mod 2^m that hold no least element).

With w the width of the largest element, a cell has about k·w·(1 + 2·a) variables, a the additions a step, and about 20
clauses for each full adder. Good for U' up to about 10^4; it is the plain member of the family, against which others
are compared.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

from cycle_encodings._formula import Encoding, Form
from cycle_encodings._gates import Builder
from solverkit.errors import InputError
from solverkit.exact.bounds import balanced_bound
from solverkit.exact.windows import Windows, element_windows
from solverkit.residues.sieve import prefix_tree

if TYPE_CHECKING:
    from solverkit.numerals import Span
    from solverkit.window import Cell

__all__ = ["ENCODING", "Orbit"]


@dataclass(frozen=True, slots=True)
class Orbit:
    """The orbit encoding with its options.

    Args:
        depth: the sieve clauses exclude classes mod 2^m for m up to this, 0 … 24; capped two bits below U'.
        guards: whether each state guards the exact range of its element.

    Raises:
        InputError: an option outside its range.
    """

    depth: int = 12
    guards: bool = True
    name: str = "orbit"
    form: Form = Form.CNF
    summary: str = "bits of every element, one addition a step; plain and exact, for U' up to about 10^4"

    def __post_init__(self) -> None:
        if not 0 <= self.depth <= 24:
            raise InputError("depth", self.depth, "an integer from 0 to 24")

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses."""
        additions = ((cell.multiplier - 1) // 2).bit_count() + (cell.offset not in (1, -1))
        width = balanced_bound(cell).bit_length() + 4 + cell.multiplier.bit_length()
        return cell.length * width * (20 * additions + 8)

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        if cell.sign != 1:
            raise InputError("cell", cell.sign.word, "a cell of positive elements; reflect it first")
        windows = element_windows(cell)
        builder = Builder()
        if windows.empty:
            builder.group("ranges")
            builder.clauses.append((-builder.true,))
            return Encoding(cell, builder.variables, tuple(builder.clauses), builder.finished(), (), builder.names)
        spans = [windows.elements(i) for i in range(cell.length + 1)]
        elements = [
            [builder.variable(f"n[{i}].{place}") for place in range(span.high.bit_length())]
            for i, span in enumerate(spans)
        ]
        self._steps(builder, cell, elements)
        builder.group("closing")
        _identify(builder, elements[-1], elements[0])
        states = _counters(builder, windows, [bits[0] for bits in elements[:-1]])
        builder.group("order")
        for bits in elements[1:-1]:
            builder.less(elements[0], bits)
        _bounds(builder, windows, elements, spans)
        if self.guards:
            _ranges(builder, windows, elements, states, spans)
        self._residues(builder, windows, elements[0])
        return Encoding(
            cell, builder.variables, tuple(builder.clauses), builder.finished(), tuple(elements[0]), builder.names
        )

    def _steps(self, builder: Builder, cell: Cell, elements: list[list[int]]) -> None:
        builder.group("step")
        factor, constant = (cell.multiplier - 1) // 2, (cell.offset + 1) // 2
        for bits, image in pairwise(elements):
            odd = bits[0]
            # The exact value lies in [−|d|, q·2^w + |d|]; with this width only the true image agrees mod 2^width.
            reach = max((cell.multiplier << len(bits)) + abs(cell.offset), (1 << len(image)) + abs(cell.offset))
            width = reach.bit_length() + 1
            masked = [builder.both(odd, bit) for bit in bits]
            carry, rest = (odd, constant - 1) if constant & 1 else (-builder.true, constant)
            total = bits[1:]
            for place in range(factor.bit_length()):
                if factor >> place & 1:
                    total = builder.add_numbers(total, [-builder.true] * place + masked, carry, width)
                    carry = -builder.true
            if rest:
                mask = [odd if rest >> place & 1 else -builder.true for place in range(width)]
                total = builder.add_numbers(total, mask, -builder.true, width)
            _identify(builder, total, image)

    def _residues(self, builder: Builder, windows: Windows, least: list[int]) -> None:
        builder.group("residues")
        depth = min(self.depth, len(least) - 2)
        if depth > 0:
            for steps, residue in prefix_tree(windows, depth).dead:
                builder.add(*(-least[i] if residue >> i & 1 else least[i] for i in range(steps)))


def _identify(builder: Builder, one: list[int], two: list[int]) -> None:
    """State that two numbers are equal; the shorter one has zeros above."""
    for place in range(max(len(one), len(two))):
        a = one[place] if place < len(one) else -builder.true
        b = two[place] if place < len(two) else -builder.true
        builder.equal(a, b)


def _counters(builder: Builder, windows: Windows, parities: list[int]) -> dict[tuple[int, int], int]:
    """State which odd counts the prefixes have; return (i, j) -> literal of the state."""
    builder.group("odd count")
    length, states = windows.cell.length, {}
    for i in range(length + 1):
        counts = windows.odd_counts(i)
        for j in counts:
            states[i, j] = builder.true if len(counts) == 1 else builder.variable(f"odd[{i}]={j}")
        if len(counts) > 1:
            builder.exactly_one([states[i, j] for j in counts])
    missing = -builder.true
    for (i, j), state in states.items():
        if i < length:
            builder.add(-state, parities[i], states.get((i + 1, j), missing))
            builder.add(-state, -parities[i], states.get((i + 1, j + 1), missing))
        if i > 0:
            builder.add(-state, parities[i - 1], states.get((i - 1, j), missing))
            builder.add(-state, -parities[i - 1], states.get((i - 1, j - 1), missing))
    return states


def _bounds(builder: Builder, windows: Windows, elements: list[list[int]], spans: list[Span]) -> None:
    builder.group("lower bound")
    builder.at_least(elements[0], windows.cell.above + 1)
    builder.group("upper bound")
    builder.at_most(elements[0], windows.bound)
    builder.group("ranges")
    for bits, span in zip(elements, spans, strict=True):
        builder.at_least(bits, span.low)
        builder.at_most(bits, span.high)


def _ranges(
    builder: Builder,
    windows: Windows,
    elements: list[list[int]],
    states: dict[tuple[int, int], int],
    spans: list[Span],
) -> None:
    """State the exact ranges of the least element and of each element, state by state."""
    for (i, j), state in states.items():
        room = windows.rooms[i, j]
        for bits, inner, outer in ((elements[i], room.element, spans[i]), (elements[0], room.least, spans[0])):
            if inner.low > outer.low:
                builder.at_least(bits, inner.low, unless=-state)
            if inner.high < outer.high:
                builder.at_most(bits, inner.high, unless=-state)


ENCODING = Orbit()
