"""The grouped encoding: each condition of a cell in a group of its own, nothing derived, so that cores say something.

The first element is n_0 = 0 … 2^w − 1, with w the width of U* and of B + 1, whichever is more, plus ``slack`` bits.
U* is the largest product bound of any cell of this map and length: ⌊|d|/|2^(k/y) − q|⌋ at the y nearest to k·log_q 2
on the side that the sign of d allows, since |2^(k/y) − q| grows away from it (Böhm & Sontacchi 1978 for the bound).
A step is out = h + p·(c·n + e) with n = 2h + p, c = (q − 1)/2 and e = (d + 1)/2, one row of full adders for each one
in c and one for e, modulo 2^W. The width W_i of n_i grows with i: from the exact range of T^i on 0 … 2^w − 1 it is
wide enough for the image of every n_0, in two's complement when d < 0. So the groups ``constants`` and ``step`` alone
have exactly one model for each n_0 < 2^w, the first k elements of its orbit, and no bound hides in a width but 2^w.

Condition groups: ``step`` (the map), ``closing`` (n_k = n_0), ``odd count`` (x of n_0 … n_(k−1) are odd), ``order``
(n_i > n_0 for 0 < i < k), ``lower bound`` (n_0 > B), ``upper bound`` (n_0 ≤ U'), and ``constants``, which says of one
variable that it holds. A group left out frees what it states: no two elements share a variable. Classes of residues
follow from the map, the closing condition and the odd count, so they are no condition of their own.

What 2^w > U* is enough for: a positive number that meets ``step`` and ``closing`` lies on a cycle whose length divides
k, and the least element m of that cycle is at most U*, whatever its odd count, meets them as well and has the same odd
count over k steps. So when these two, with or without ``odd count`` and ``upper bound``, exclude every n_0 < 2^w, they
exclude every n_0. With ``order`` the same holds beside ``lower bound``, for then n_0 is itself that m; and beside
n_0 > 0 it holds anyway. Sets without ``closing`` and ``upper bound`` are met by larger numbers than 2^w in general.

Size, with r = (ones of c) + (1 when e > 1 or e < 0), and S = Σ_(i=1…k) min(i, x + 1) counter literals:
variables 1 + w + Σ_(i<k) (W_i − 1 + r·(2·W_(i+1) − 1)) + S + Σ_(0<i<k) (w + (1 when V_i > w)), where V_i is W_i
without the sign; clauses 1 + Σ_(i<k) (3·(W_i − 1) + r·(20·W_(i+1) − 12)) for the step, w + W_k for closing,
3·S − k + Σ_(i=1…k) min(i − 1, x + 1) + 1 + (1 when x < k) for the odd count,
Σ_(0<i<k) (3·w + (1 when V_i > w) + 1 + (1 when d < 0)) for the order, the ones of B + 1 and the w-bit zeros of U'.
Good for cores of cells with U* up to about 10^4; nothing else.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from cycle_encodings._formula import Encoding, Form
from cycle_encodings._gates import Builder
from solverkit.errors import InputError
from solverkit.exact.bounds import balanced_bound, product_bound

if TYPE_CHECKING:
    from collections.abc import Iterable

    from solverkit.window import Cell

__all__ = ["ENCODING", "Grouped", "elements_of"]


@dataclass(frozen=True, slots=True)
class Grouped:
    """The grouped encoding with its option.

    Args:
        slack: bits of n_0 beyond the wider of U* and B + 1, 0 … 64.

    Raises:
        InputError: an option outside its range.
    """

    slack: int = 1
    name: str = "grouped"
    form: Form = Form.CNF
    summary: str = "conditions kept apart, nothing derived, no bound in the widths; for cores, U* up to about 10^4"

    def __post_init__(self) -> None:
        if not 0 <= self.slack <= 64:
            raise InputError("slack", self.slack, "an integer from 0 to 64")

    def widths(self, cell: Cell) -> tuple[int, ...]:
        """Return W_0 … W_k, the sign of n_1 … n_k included when d < 0."""
        q, d = cell.multiplier, cell.offset
        width = max(_largest_bound(cell), cell.above + 1).bit_length() + self.slack
        low, high = 0, (1 << width) - 1
        widths = [width]
        for _ in range(cell.length):
            low = min(low >> 1, (q * low + d) >> 1) if d < 0 else 0
            high = max(high >> 1, (q * high + d) >> 1)
            needed = max(high.bit_length(), (~low).bit_length()) + 1 if d < 0 else high.bit_length()
            width = max(width, needed)
            widths.append(width)
        return tuple(widths)

    def size(self, cell: Cell) -> int:
        """Return the number of clauses, by the formula of this module; every clause is counted."""
        k, x, width, rows = cell.length, cell.odd, self.widths(cell), _rows(cell)
        signed = cell.offset < 0
        step = sum(3 * (width[i] - 1) + rows * (20 * width[i + 1] - 12) for i in range(k))
        states = sum(min(i, x + 1) for i in range(1, k + 1))
        count = 3 * states - k + sum(min(i - 1, x + 1) for i in range(1, k + 1)) + 1 + (x < k)
        order = sum(3 * width[0] + (width[i] - signed > width[0]) + 1 + signed for i in range(1, k))
        bounds = (cell.above + 1).bit_count()
        top = balanced_bound(cell)
        if top < (1 << width[0]) - 1:
            bounds += width[0] - top.bit_count()
        return 1 + step + width[0] + width[k] + count + order + bounds

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        if cell.sign != 1:
            raise InputError("cell", cell.sign.word, "a cell of positive elements; reflect it first")
        builder = Builder()
        widths = self.widths(cell)
        elements = [[builder.variable(f"n[0].{place}") for place in range(widths[0])]]
        builder.group("step")
        for i in range(cell.length):
            signed = cell.offset < 0 and i > 0
            elements.append(_image(builder, cell, elements[i], signed, widths[i + 1], i + 1))
        least = elements[0]
        builder.group("closing")
        for place, bit in enumerate(elements[-1]):
            builder.equal(bit, least[place] if place < len(least) else -builder.true)
        builder.group("odd count")
        _odd_count(builder, [bits[0] for bits in elements[:-1]], cell.odd)
        builder.group("order")
        for bits in elements[1:-1]:
            if cell.offset < 0:
                builder.add(-bits[-1])
            builder.less(least, bits[:-1] if cell.offset < 0 else bits)
        builder.group("lower bound")
        builder.at_least(least, cell.above + 1)
        builder.group("upper bound")
        builder.at_most(least, balanced_bound(cell))
        return Encoding(
            cell, builder.variables, tuple(builder.clauses), builder.finished(), tuple(least), builder.names
        )


def _largest_bound(cell: Cell) -> int:
    """Return U*: no cycle of positive elements whose length divides k has a larger least element."""
    odd, power = 0, 1
    while power < 1 << cell.length:
        odd, power = odd + 1, power * cell.multiplier
    odd -= cell.offset > 0
    return product_bound(replace(cell, odd=odd)) if odd else 0


def _constant(cell: Cell) -> tuple[bool, int]:
    """Return e = (d + 1)/2 as a carry into the first row and what a row of its own adds."""
    constant = (cell.offset + 1) // 2
    return bool(constant & 1), constant - (constant & 1)


def _rows(cell: Cell) -> int:
    return ((cell.multiplier - 1) // 2).bit_count() + (_constant(cell)[1] != 0)


def _image(builder: Builder, cell: Cell, bits: list[int], signed: bool, width: int, step: int) -> list[int]:
    """State the step and return the bits of the image, variables that only this step constrains."""
    odd, fill = bits[0], bits[-1] if signed else -builder.true
    masked = [odd, *(builder.both(odd, bit) for bit in bits[1:])]
    masked += [masked[-1] if signed else -builder.true] * (width - len(bits))
    carries, rest = _constant(cell)
    factor = (cell.multiplier - 1) // 2
    addends = [
        ([-builder.true] * place + masked)[:width] for place in range(factor.bit_length()) if factor >> place & 1
    ]
    if rest:
        addends.append([odd if rest >> place & 1 else -builder.true for place in range(width)])
    total = bits[1:] + [fill] * (width - len(bits) + 1)
    for index, addend in enumerate(addends):
        carry = odd if carries and index == 0 else -builder.true
        name = f"n[{step}]." if index == len(addends) - 1 else None
        total = _row(builder, total, addend, carry, name)
    return total


def _row(builder: Builder, one: list[int], two: list[int], carry: int, name: str | None) -> list[int]:
    """Return the bits of (one + two + carry) mod 2^width, all of them new variables, whatever the inputs are."""
    result = []
    for place, (a, b) in enumerate(zip(one, two, strict=True)):
        c = carry
        total = builder.variable(None if name is None else f"{name}{place}")
        result.append(total)
        clauses: list[tuple[int, ...]] = [
            (-total, a, b, c), (-total, a, -b, -c), (-total, -a, b, -c), (-total, -a, -b, c),
            (total, -a, -b, -c), (total, -a, b, c), (total, a, -b, c), (total, a, b, -c),
        ]  # fmt: skip
        if place < len(one) - 1:
            carry = builder.variable()
            clauses += [
                (-carry, a, b), (-carry, a, c), (-carry, b, c), (carry, -a, -b), (carry, -a, -c), (carry, -b, -c),
                (-carry, -total, a), (-carry, -total, b), (-carry, -total, c),
                (carry, total, -a), (carry, total, -b), (carry, total, -c),
            ]  # fmt: skip
        builder.clauses.extend(clauses)
    return result


def _odd_count(builder: Builder, parities: list[int], odd: int) -> None:
    """State that exactly ``odd`` of the parities hold: literals "at least j of the first i", 1 ≤ j ≤ odd + 1."""
    before: list[int] = []
    for i, parity in enumerate(parities, 1):
        states = [builder.variable(f"odd[{i}]>={j}") for j in range(1, min(i, odd + 1) + 1)]
        for j, state in enumerate(states):
            old = before[j] if j < len(before) else -builder.true
            one_less = before[j - 1] if j else builder.true
            builder.add(-old, state)
            builder.add(-parity, -one_less, state)
            builder.add(-state, old, parity)
            builder.add(-state, one_less)
        before = states
    builder.add(before[odd - 1])
    if odd < len(before):
        builder.add(-before[odd])


def elements_of(encoding: Encoding, model: Iterable[int]) -> tuple[int, ...]:
    """Return n_0 … n_k as a model of a grouped encoding has them, whichever groups it satisfies."""
    true = set(model)
    values = [0] * (encoding.cell.length + 1)
    tops = [-1] * len(values)
    for variable, name in encoding.names.items():
        if name.startswith("n["):
            step, _, place = name[2:].partition("].")
            i, shift = int(step), int(place)
            values[i] += (variable in true) << shift
            tops[i] = max(tops[i], shift)
    if encoding.cell.offset < 0:
        values[1:] = [v - (1 << top + 1) if v >> top else v for v, top in zip(values[1:], tops[1:], strict=True)]
    return tuple(values)


ENCODING = Grouped()
