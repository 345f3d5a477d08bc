"""Word side by accumulation: the bits of β, summed up step by step, joined to the orbit by n·D = d·β.

β = Σ q^(x−1−j)·2^i over the odd steps i, the j-th odd one counted from 0, and n_0·D = d·β (Böhm & Sontacchi 1978). The
state (i, j) selects what an odd step adds. Two forms:

- *modular*, the default: n_0 ≡ Σ (d/D)·q^(x−1−j)·2^i mod 2^b, b the width of n_0 plus ``extra``; d/D is taken mod 2^b,
  where D is a unit, so no multiplier is left, and only the first b steps add anything. It follows from the orbit, which
  settles the same bits one step at a time; here each bit of n_0 depends on the parities through constants only.
- *exact*: with g = gcd(d, D), m = |D|/g, s = |d|/g, the integers n_0 = s·t and β = m·t, by shift and add. The sum
  never wraps: what exceeds its largest value, known from the windows, is stated to be zero. The closing then follows
  from step and word side, since (q^x·n_0 + d·β)/2^k = n_0, and may be left out.

The sums run from the first step to the last, or backwards (``suffixes``), β = γ_0, γ_i = 2·γ_(i+1) + p_i·q^(x−1−j).
The orbit: one serial multiplier a step, exact windows to a fixpoint, the order, guards in every state. A form without
the orbit would have to state n_i > n_0 through β of every rotation, k sums instead of one; it is not offered.

Condition groups: those of the orbit (``step``, ``closing``, ``odd count``, ``order``, ``lower bound``, ``upper bound``,
``ranges``), ``word`` (the sum) and ``join`` (to n_0).

Size, with W the mean width of an element, S the mean number of admissible odd counts at a step, c_i the number of those
from which step i can be odd:

- orbit: about k·W·(q + 3) variables and k·(W·(7·q + 4 + S) + 8·S) clauses;
- modular word: at most Σ 3·(b − i) variables and Σ (b − i)·(c_i + 21) + 2·b clauses more, over i < min(b, k), and
  because constants fold usually half to three quarters of that;
- exact word, with h_i the bits of the largest term q^(x−1−j) and a_i the bits of the sum it is added to, at most
  Σ (h_i + 2·a_i) variables and Σ (h_i·(c_i + 14) + 7·a_i) clauses over i < k, and for the join 20 clauses for each one
  of m and s after the first and each bit of t.

Good for: any cell; of the word sides the modular one is the one that pays, on MiniSat and Glucose. Geometric means of
process time for the full list of solutions, encoding included, against the same orbit without a word side:

- modular, 24 cells with U' from 2·10^3 to 10^6 that had no part in choosing the form: 0.62 on MiniSat 2.2 (0.44 of the
  conflicts), 0.80 on Glucose 4; at worst 1.15 times;
- modular, the twelve cells on which the form was chosen: 0.44 on MiniSat, 0.65 on Glucose, 0.98 on CaDiCaL 1.9.5, at
  worst 1.4 times (0.36, 0.43 and 0.58 of the plain orbit encoding);
- exact, the same twelve: 0.79 on MiniSat, 1.27 on Glucose, at worst 5 times: fewer conflicts, up to twice the formula.

Part of it is steadiness: when variables are renumbered at random the orbit alone is often as lucky, and the modular
gain on MiniSat (six of the twelve, three numberings) is 0.77 instead of 0.45.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import gcd
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._orbit_draft import checked_option, encoded
from cycle_encodings._sizes import guarded_orbit_size, sixteenths, states_per_step
from cycle_encodings.serial import guarded_orbit
from solverkit.errors import InputError
from solverkit.exact.bounds import balanced_bound
from solverkit.exact.reduction import reduced_offset

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from cycle_encodings._formula import Encoding
    from cycle_encodings._gates import Builder
    from cycle_encodings._orbit_draft import OrbitDraft
    from solverkit.exact.windows import Windows
    from solverkit.window import Cell

__all__ = ["ENCODING", "Accumulation", "join_modular_word"]


@dataclass(frozen=True, slots=True)
class Accumulation:
    """The orbit with the word side by accumulation, and its options.

    Args:
        exact: whether integers are summed and joined; else residues modulo 2^b.
        extra: what b exceeds the width of n_0 by, 0 … 4096; of no effect when ``exact``.
        suffixes: whether the sums run from the last step to the first; else from the first to the last.
        closing: whether the closing of the orbit is stated; may be left out when ``exact``, which implies it.

    Raises:
        InputError: an option outside its range.
    """

    exact: bool = False
    extra: int = 0
    suffixes: bool = False
    closing: bool = True
    name: str = "accumulation"
    form: Form = Form.CNF
    summary: str = "orbit and its word side: the bits of n_0 as a sum of constants that the prefix counters select"

    def __post_init__(self) -> None:
        checked_option("extra", self.extra, 0, 4096)
        if not (self.closing or self.exact):
            raise InputError("closing", self.closing, "true, unless the word side is exact")

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses, from the lengths of U', d and D alone."""
        top, k, x = balanced_bound(cell), cell.length, cell.odd
        if top <= cell.above:
            return 2
        states, orbit = states_per_step(cell), guarded_orbit_size(cell)
        if not self.exact:
            bits = top.bit_length() + self.extra
            steps = min(bits, k)
            return orbit + (steps * bits - steps * (steps - 1) // 2) * (states // 2 + 20)
        height = x * sixteenths(cell.multiplier) // 16
        common = abs(reduced_offset(cell.multiplier, cell.offset, k, x))
        scale = abs(cell.offset) // common
        ones = max(0, max(k, height) - common.bit_length() + 1) // 2 + scale.bit_count()
        word = height * k // 2 * (states + 1) + 7 * k * k
        return orbit + word + 18 * ones * max(1, (top // scale).bit_length())

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        return encoded(cell, self._formula)

    def _formula(self, windows: Windows) -> Encoding:
        draft = guarded_orbit(windows, closing=self.closing)
        if self.exact:
            draft.builder.group("word")
            beta = _exact_sum(draft, self.suffixes)
            draft.builder.group("join")
            _join_exactly(draft, beta)
        else:
            join_modular_word(draft, len(draft.elements[0]) + self.extra, self.suffixes)
        return draft.finished()


def join_modular_word(draft: OrbitDraft, width: int, suffixes: bool = False) -> None:
    """State n_0 ≡ Σ (d/D)·q^(x−1−j)·2^i mod 2^``width`` over the odd steps; implied by the orbit.

    Args:
        draft: with all its steps, after `OrbitDraft.count_odd`.
        width: b ≥ 0, bits of the modulus.
        suffixes: whether the last of the first b steps is added first.
    """
    builder, cell = draft.builder, draft.cell
    modulus = 1 << width
    unit = cell.offset * pow(cell.determinant, -1, modulus) % modulus
    builder.group("word")
    total = [-builder.true] * width
    steps = range(min(width, cell.length))
    for i in reversed(steps) if suffixes else steps:
        rest = 1 << (width - i)
        terms = {j: unit * pow(cell.multiplier, cell.odd - 1 - j, rest) % rest for j in _odd_starts(draft, i)}
        total[i:] = builder.add_numbers(total[i:], _selected(draft, i, terms), -builder.true, width - i)
    builder.group("join")
    least = draft.elements[0]
    for place, bit in enumerate(total):
        builder.equal(bit, least[place] if place < len(least) else -builder.true)


def _odd_starts(draft: OrbitDraft, step: int) -> list[int]:
    """Return the odd counts before ``step`` from which an odd step leads to an admissible state."""
    return [j for j in draft.windows.odd_counts(step) if (step + 1, j + 1) in draft.states]


def _selected(draft: OrbitDraft, step: int, terms: Mapping[int, int]) -> list[int]:
    """Return the bits of ``terms[j]`` when ``step`` is odd and j odd steps precede it, of 0 when it is even."""
    builder, states = draft.builder, draft.states
    always = not any((step + 1, j) in states for j in draft.windows.odd_counts(step))
    odd = builder.true if always else draft.elements[step][0]
    bits = []
    for place in range(max(terms.values(), default=0).bit_length()):
        ones = sum(term >> place & 1 for term in terms.values())
        if ones in (0, len(terms)):
            bits.append(odd if ones else -builder.true)
            continue
        bit = builder.variable()
        builder.add(-bit, odd)
        for j, term in terms.items():
            builder.add(-odd, -states[step, j], bit if term >> place & 1 else -bit)
        bits.append(bit)
    return bits


def _exact_sum(draft: OrbitDraft, suffixes: bool) -> list[int]:
    """Return the bits of β.

    From the first step on, the sum is q^(x−j)·β_i in state (i, j), and its lowest i bits are settled; from the last
    step back, it is 2^i·γ_i.
    """
    builder, cell, rooms = draft.builder, draft.cell, draft.windows.rooms
    total: list[int] = []
    for i in reversed(range(cell.length)) if suffixes else range(cell.length):
        terms = {j: cell.multiplier ** (cell.odd - 1 - j) for j in _odd_starts(draft, i)}
        if suffixes:
            most = max(rooms[i, j].gamma.high for j in draft.windows.odd_counts(i))
        else:
            after = draft.windows.odd_counts(i + 1)
            most = max(cell.multiplier ** (cell.odd - j) * rooms[i + 1, j].beta.high for j in after) >> i
        total += [-builder.true] * (i - len(total))
        total[i:] = _sum(builder, total[i:], _selected(draft, i, terms))
        limit = i + most.bit_length()
        for bit in total[limit:]:
            builder.add(-bit)
        del total[limit:]
    return total


def _sum(builder: Builder, one: Sequence[int], two: Sequence[int]) -> list[int]:
    """Return one + two, with room for every carry."""
    width = max(len(one), len(two)) + (1 if one and two else 0)
    return builder.add_numbers(one, two, -builder.true, width)


def _join_exactly(draft: OrbitDraft, beta: Sequence[int]) -> None:
    """State n_0 = s·t and β = m·t."""
    builder, least = draft.builder, draft.elements[0]
    size, determinant = abs(draft.cell.offset), abs(draft.cell.determinant)
    common = gcd(size, determinant)
    scale, share = size // common, list(least)
    if scale > 1:
        share = [builder.variable(f"t.{place}") for place in range((draft.spans[0].high // scale).bit_length())]
        builder.equal_numbers(_multiple(builder, share, scale), least)
    builder.equal_numbers(_multiple(builder, share, determinant // common), beta)


def _multiple(builder: Builder, bits: Sequence[int], factor: int) -> list[int]:
    """Return factor·number by shift and add, one adder for each one of the factor after the first."""
    total: list[int] = []
    for place in range(factor.bit_length()):
        if factor >> place & 1:
            total += [-builder.true] * (place - len(total))
            total[place:] = _sum(builder, total[place:], bits)
    return total


ENCODING = Accumulation()
