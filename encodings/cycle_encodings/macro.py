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
from itertools import pairwise
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._orbit_draft import OrbitDraft, checked_option, empty_formula, encoded, member_literals
from cycle_encodings._prefix_classes import walked
from cycle_encodings._sizes import excluded_by_bounds, mean_width, states_per_step
from solverkit.exact.windows import in_order

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from cycle_encodings._formula import Encoding
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
        return encoded(cell, self._formula)

    def _formula(self, windows: Windows) -> Encoding:
        residues = walked(windows, self.steps)
        if not residues:
            return empty_formula(windows.cell, "step")
        length = windows.cell.length
        draft = OrbitDraft(windows, [*range(0, length, self.steps), length])
        draft.close()
        draft.count_odd()
        for start, stop in pairwise(draft.positions):
            _MacroStep(draft, start, stop - start, residues).state()
        draft.put_least_first()
        draft.bound()
        draft.guard()
        return draft.finished()


@dataclass(frozen=True, slots=True)
class _Prefix:
    """The first t steps of a class: their odd count, β and the image of the residue."""

    odd: int
    beta: int
    image: int


class _MacroStep:
    """The macro-step of ``steps`` steps from the element after ``start`` of them, in a draft that keeps both ends.

    Args:
        draft: after `OrbitDraft.count_odd`.
        start: where it begins.
        steps: how many steps it has.
        residues: which residues elements can have, modulo 2^steps or a higher power.
    """

    def __init__(self, draft: OrbitDraft, start: int, steps: int, residues: Iterable[int]) -> None:
        self.draft, self.builder, self.cell = draft, draft.builder, draft.cell
        self.start, self.steps = start, steps
        self.bits, self.least = draft.elements[start], draft.elements[0]
        left = sorted({residue % (1 << steps) for residue in residues})
        self.classes = {r: self.builder.variable(f"n[{start}]={r} mod {1 << steps}") for r in left}
        self.prefixes = {residue: self._prefixes(residue, steps) for residue in left}

    def state(self) -> None:
        """State the classes, the image, the odd counts and the order."""
        builder = self.builder
        builder.group("step")
        padded = [*self.bits, *[-builder.true] * self.steps]
        for residue in range(1 << self.steps):
            member = member_literals(padded, self.steps, residue)
            chosen = self.classes.get(residue, -builder.true)
            builder.add(chosen, *(-literal for literal in member))
            for literal in member if residue in self.classes else ():
                builder.add(-chosen, literal)
        self._image()
        builder.group("odd count")
        for residue, chosen in self.classes.items():
            self._follow(chosen, self.prefixes[residue])
        builder.group("order")
        self._compare()

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

    def _image(self) -> None:
        builder, high = self.builder, self.bits[self.steps :]
        image = self.draft.elements[self.start + self.steps]
        ends = {residue: path[-1] for residue, path in self.prefixes.items()}
        counts = sorted({end.odd for end in ends.values()})
        reach = (self.cell.multiplier ** counts[-1] << len(high)) + max(abs(end.image) for end in ends.values())
        width = max(reach, 1 << len(image)).bit_length() + 1
        product = [builder.variable() for _ in range(width)]
        constant = [builder.variable() for _ in range(width)]
        for j in counts:
            active = [chosen for residue, chosen in self.classes.items() if ends[residue].odd == j]
            of_count = builder.variable()
            builder.add(-of_count, *active)
            for chosen in active:
                builder.add(-chosen, of_count)
            for bit, value in zip(product, self._times(high, j, width), strict=True):
                builder.add(-of_count, -value, bit)
                builder.add(-of_count, value, -bit)
        for residue, chosen in self.classes.items():
            for place, bit in enumerate(constant):
                builder.add(-chosen, bit if ends[residue].image >> place & 1 else -bit)
        builder.equal_numbers(builder.add_numbers(product, constant, -builder.true, width), image)

    def _follow(self, chosen: int, path: Sequence[_Prefix]) -> None:
        """State which states follow in this class, and that those inside the macro-step are admissible."""
        windows, states, start = self.draft.windows, self.draft.states, self.start
        for j in windows.odd_counts(start):
            inside = all((start + t, j + prefix.odd) in windows.rooms for t, prefix in enumerate(path))
            after = states[start + self.steps, j + path[-1].odd] if inside else -self.builder.true
            self.builder.add(-chosen, -states[start, j], after)

    def _compare(self) -> None:
        """State that the elements inside the macro-step are above n_0, as far as they could be below."""
        for t in range(1, self.steps):
            sharing: dict[int, list[int]] = {}
            for residue, path in self.prefixes.items():
                if path[t].image & 1:
                    sharing.setdefault(residue % (1 << (t + 1)), []).append(residue)
            for residues in sharing.values():
                self._compare_after(t, residues)

    def _compare_after(self, t: int, residues: Sequence[int]) -> None:
        """State it for the element after t steps in the classes ``residues``, which share these steps."""
        builder, cell, span = self.builder, self.cell, self.draft.spans[self.start]
        prefix = self.prefixes[residues[0]][t]
        slope, shift = cell.multiplier**prefix.odd, cell.offset * prefix.beta
        if self.start == 0:
            self._bound_first(slope, shift, t, residues)
            return
        if in_order(slope, shift, 1 << t, span.low, span.high) == span:
            return
        when = builder.variable()
        for residue in residues:
            builder.add(-self.classes[residue], when)
        # The image of r mod 2^t itself, not of r: the higher bits of r are among the bits from t on.
        lowest = self._prefixes(residues[0] % (1 << t), t)[t].image
        high = self.bits[t:]
        width = max((slope << len(high)) + abs(lowest), 1 << len(self.least)).bit_length() + 1
        value = builder.add_numbers(
            self._times(high, prefix.odd, width), builder.constant(lowest, width), -builder.true, width
        )
        # Negative values have their top bit set and would count as large.
        builder.add(-when, -value[-1])
        builder.less(self.least, value[:-1], when)

    def _bound_first(self, slope: int, shift: int, t: int, residues: Sequence[int]) -> None:
        """State, class by class, the exact interval of n_0 with T^t(n_0) > n_0."""
        span = self.draft.spans[0]
        left = in_order(slope, shift, 1 << t, span.low, span.high, 1 << t)
        for chosen in (self.classes[residue] for residue in residues):
            if left is None:
                self.builder.add(-chosen)
            else:
                self.builder.at_least(self.least, left.low, [-chosen])
                self.builder.at_most(self.least, left.high, [-chosen])


ENCODING = MacroSteps()
