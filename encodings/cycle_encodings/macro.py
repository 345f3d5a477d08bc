"""Macro-steps: m steps at once over the pruned residue transition graph.

Only the elements n_0, n_m, n_2m, … have bits. The class r of n_i mod 2^m, a literal, decides the next m parities, so
n_(i+m) = q^j·u + T^m(r) with n_i = 2^m·u + r and j the odd steps among the m (Terras, Acta Arith. 30 (1976) 241-252);
q^j·u is formed once for each j and chosen. The classes are the vertices of the residue transition graph mod 2^m, pruned
to closed walks of length k with x odd steps from the residues that the least-element sieve leaves. The last macro-step
is shorter when m does not divide k.

Inside a macro-step an element can be the least only when it is odd, since an even one is followed by a smaller one; it
is compared with n_0 unless q^j'·n_i + d·β ≥ 2^t·n_i on the whole range of n_i, when it cannot be smaller than n_i.

Condition groups: ``step``, ``closing``, ``odd count``, ``order``, ``lower bound``, ``upper bound``, ``ranges``.

Size, with W the mean width of an element and o the number of ones of q after the first: for m = 3 about
k·W·(5·o + 4) variables and k·W·(50·o + 20) clauses. A larger m has fewer blocks, each with more products and
comparisons.

Good for: comparison. It is steady, but on six cells of the benchmark with Glucose 4 it takes 1.3 times as long as
``serial``, and three times as long as ``composed``, which jumps once.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from cycle_encodings._formula import Encoding, Form
from cycle_encodings._gates import Builder
from cycle_encodings._orbit_draft import checked_option, empty_formula, member_literals, windows_of
from cycle_encodings._prefix_classes import walked
from cycle_encodings._sizes import excluded_by_bounds, mean_width, states_per_step
from solverkit.exact.windows import in_order

if TYPE_CHECKING:
    from collections.abc import Sequence

    from solverkit.exact.windows import Windows
    from solverkit.window import Cell

__all__ = ["ENCODING", "MacroSteps"]


@dataclass(frozen=True, slots=True)
class MacroSteps:
    """The encoding by macro-steps.

    Args:
        steps: m, 1 … 8.

    Raises:
        InputError: an option outside its range.
    """

    steps: int = 3
    name: str = "macro"
    form: Form = Form.CNF
    summary: str = "m steps at once over the pruned residue transition graph mod 2^m; for comparison"

    def __post_init__(self) -> None:
        checked_option("steps", self.steps, 1, 8)

    def size(self, cell: Cell) -> int:
        """Return a rough number of clauses."""
        if excluded_by_bounds(cell):
            return 2
        width, ones = mean_width(cell), cell.multiplier.bit_count() - 1
        blocks = -(-cell.length // self.steps)
        adders = ones * (self.steps + (1 << self.steps >> 1)) + 2
        return blocks * (width * 20 * adders + 8 * states_per_step(cell))

    def encode(self, cell: Cell) -> Encoding:
        """Return the formula of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        windows = windows_of(cell)
        if windows.empty:
            return empty_formula(cell)
        residues = sorted(walked(windows, self.steps))
        if not residues:
            return empty_formula(cell, "step")
        return _Blocks(windows, self.steps, residues).encoding()


@dataclass(frozen=True, slots=True)
class _Prefix:
    """The first t steps of a class: their odd count, β and the image of the residue."""

    odd: int
    beta: int
    image: int


class _Blocks:
    """The formula in the making; ``bits[i]`` are those of the element after i steps, at block borders only."""

    def __init__(self, windows: Windows, steps: int, residues: Sequence[int]) -> None:
        self.windows, self.cell, self.builder = windows, windows.cell, Builder()
        length = self.cell.length
        self.borders = [*range(0, length, steps), length]
        self.residues = residues
        self.spans = {i: windows.elements(i) for i in self.borders}
        self.bits = {
            i: [self.builder.variable(f"n[{i}].{place}") for place in range(span.high.bit_length())]
            for i, span in self.spans.items()
        }
        self.states: dict[tuple[int, int], int] = {}

    def encoding(self) -> Encoding:
        """State everything and return the encoding."""
        builder, length = self.builder, self.cell.length
        self._count()
        for start, stop in zip(self.borders, self.borders[1:], strict=False):
            self._block(start, stop - start)
        builder.group("closing")
        self._identify(self.bits[length], self.bits[0])
        builder.group("order")
        for i in self.borders[1:-1]:
            builder.less(self.bits[0], self.bits[i])
        self._bounds()
        return Encoding(
            self.cell, builder.variables, tuple(builder.clauses), builder.finished(), tuple(self.bits[0]), builder.names
        )

    def _count(self) -> None:
        builder = self.builder
        builder.group("odd count")
        for i in self.borders:
            counts = self.windows.odd_counts(i)
            for j in counts:
                self.states[i, j] = builder.true if len(counts) == 1 else builder.variable(f"odd[{i}]={j}")
            if len(counts) > 1:
                builder.exactly_one([self.states[i, j] for j in counts])

    def _block(self, start: int, steps: int) -> None:
        """State the macro-step of ``steps`` steps from the element after ``start``."""
        builder = self.builder
        builder.group("step")
        bits = [*self.bits[start], *[-builder.true] * steps]
        left = sorted({residue % (1 << steps) for residue in self.residues})
        classes: dict[int, int] = {}
        for residue in range(1 << steps):
            member = member_literals(bits, steps, residue)
            if residue not in left:
                builder.add(*(-literal for literal in member))
                continue
            classes[residue] = chosen = builder.variable(f"n[{start}]={residue} mod {1 << steps}")
            builder.add(chosen, *(-literal for literal in member))
            for literal in member:
                builder.add(-chosen, literal)
        prefixes = {residue: self._prefixes(residue, steps) for residue in classes}
        self._image(start, steps, classes, {r: path[-1] for r, path in prefixes.items()})
        builder.group("odd count")
        for residue, chosen in classes.items():
            self._follow(start, chosen, prefixes[residue])
        builder.group("order")
        self._compare(start, steps, classes, prefixes)

    def _prefixes(self, residue: int, steps: int) -> list[_Prefix]:
        path = [_Prefix(0, 0, residue)]
        for t in range(steps):
            odd, beta, image = path[-1].odd, path[-1].beta, path[-1].image
            grown = self.cell.multiplier * beta + (1 << t) if image & 1 else beta
            path.append(_Prefix(odd + (image & 1), grown, self.cell.map.step(image)))
        return path

    def _times(self, bits: Sequence[int], times: int, width: int) -> list[int]:
        """Return the bits of q^times·number, mod 2^width."""
        builder, q = self.builder, self.cell.multiplier
        total = [*bits, *[-builder.true] * width][:width]
        for _ in range(times):
            factor = total
            for place in range(1, q.bit_length()):
                if q >> place & 1:
                    shifted = [*[-builder.true] * place, *factor]
                    total = builder.add_numbers(total, shifted, -builder.true, width)
        return total

    def _image(self, start: int, steps: int, classes: dict[int, int], ends: dict[int, _Prefix]) -> None:
        builder, high, image = self.builder, self.bits[start][steps:], self.bits[start + steps]
        counts = sorted({end.odd for end in ends.values()})
        reach = (self.cell.multiplier ** counts[-1] << len(high)) + max(abs(end.image) for end in ends.values())
        width = max(reach, 1 << len(image)).bit_length() + 1
        product = [builder.variable() for _ in range(width)]
        constant = [builder.variable() for _ in range(width)]
        for j in counts:
            active = [chosen for residue, chosen in classes.items() if ends[residue].odd == j]
            of_count = builder.variable()
            builder.add(-of_count, *active)
            for chosen in active:
                builder.add(-chosen, of_count)
            for bit, value in zip(product, self._times(high, j, width), strict=True):
                builder.add(-of_count, -value, bit)
                builder.add(-of_count, value, -bit)
        for residue, chosen in classes.items():
            for place, bit in enumerate(constant):
                builder.add(-chosen, bit if ends[residue].image >> place & 1 else -bit)
        self._identify(builder.add_numbers(product, constant, -builder.true, width), image)

    def _follow(self, start: int, chosen: int, path: Sequence[_Prefix]) -> None:
        """State which states follow in this class, and that those inside the macro-step are admissible."""
        rooms, stop = self.windows.rooms, start + len(path) - 1
        for j in self.windows.odd_counts(start):
            inside = all((start + t, j + prefix.odd) in rooms for t, prefix in enumerate(path))
            after = self.states[stop, j + path[-1].odd] if inside else -self.builder.true
            self.builder.add(-chosen, -self.states[start, j], after)

    def _compare(self, start: int, steps: int, classes: dict[int, int], prefixes: dict[int, list[_Prefix]]) -> None:
        """State that the elements inside the macro-step are above n_0, as far as they could be below."""
        builder, cell, span = self.builder, self.cell, self.spans[start]
        for t in range(1, steps):
            sharing: dict[int, list[int]] = {}
            for residue in classes:
                if prefixes[residue][t].image & 1:
                    sharing.setdefault(residue % (1 << (t + 1)), []).append(residue)
            for residues in sharing.values():
                prefix = prefixes[residues[0]][t]
                slope, shift = cell.multiplier**prefix.odd, cell.offset * prefix.beta
                if start == 0:
                    self._bound_first(slope, shift, t, [classes[r] for r in residues])
                    continue
                if in_order(slope, shift, 1 << t, span.low, span.high) == span:
                    continue
                when = builder.variable()
                for residue in residues:
                    builder.add(-classes[residue], when)
                # The image of r mod 2^t itself, not of r: the higher bits of r are among the bits from t on.
                lowest = self._prefixes(residues[0] % (1 << t), t)[t].image
                high = self.bits[start][t:]
                width = max((slope << len(high)) + abs(lowest), 1 << len(self.bits[0])).bit_length() + 1
                value = builder.add_numbers(
                    self._times(high, prefix.odd, width), builder.constant(lowest, width), -builder.true, width
                )
                # Negative values have their top bit set and would count as large.
                builder.add(-when, -value[-1])
                builder.less(self.bits[0], value[:-1], when)

    def _bound_first(self, slope: int, shift: int, t: int, classes: Sequence[int]) -> None:
        """State, class by class, the exact interval of n_0 with T^t(n_0) > n_0."""
        span = self.spans[0]
        left = in_order(slope, shift, 1 << t, span.low, span.high, 1 << t)
        for chosen in classes:
            if left is None:
                self.builder.add(-chosen)
            else:
                self.builder.at_least(self.bits[0], left.low, [-chosen])
                self.builder.at_most(self.bits[0], left.high, [-chosen])

    def _identify(self, one: Sequence[int], two: Sequence[int]) -> None:
        for place in range(max(len(one), len(two))):
            a = one[place] if place < len(one) else -self.builder.true
            b = two[place] if place < len(two) else -self.builder.true
            self.builder.equal(a, b)

    def _bounds(self) -> None:
        builder = self.builder
        builder.group("lower bound")
        builder.at_least(self.bits[0], self.cell.above + 1)
        builder.group("upper bound")
        builder.at_most(self.bits[0], self.windows.bound)
        builder.group("ranges")
        for i, span in self.spans.items():
            builder.at_least(self.bits[i], span.low)
            builder.at_most(self.bits[i], span.high)
        for (i, j), state in self.states.items():
            room = self.windows.rooms[i, j]
            for bits, inner in ((self.bits[i], room.element), (self.bits[0], room.least)):
                builder.at_least(bits, inner.low, [-state])
                builder.at_most(bits, inner.high, [-state])


ENCODING = MacroSteps()
