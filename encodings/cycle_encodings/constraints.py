"""The default CP-SAT model: the orbit with halves, prefix classes of the least element, and a search order.

Variables for each step i: the element n_i within its exact window, its half h_i and its parity b_i, n_i = 2·h_i + b_i;
n_{i+1} = h_i when b_i = 0 and n_{i+1} = q·h_i + (q + d)/2 when b_i = 1, indices mod k. n_i > n_0 for 0 < i < k gives
leastness, and excludes repeated words. On top of that:

* *classes*: the first m parities are the class of n_0 mod 2^m (Terras, Acta Arith. 30 (1976) 241-252). A class that
  holds no least element is one clause. Each class r that is left has a truth value, which says n_0 = 2^m·u + r and
  n_m = q^j·u + T^m(r), j its odd count, with the exact range of u: the congruence mod q^j that propagation of bounds
  alone would never see. m leaves ``spare`` bits of U' free and makes at most ``leaves`` classes.
* *order*: parities are decided first to last, odd before even. Then a conflict is a class of n_0, and there are about
  as many as classes that survive the sieve.
* *counts*: the least and largest odd count of every prefix; on request *states*, a truth value for each admissible
  (i, j) with the exact ranges of n_0 and n_i there.
* *equation* (on request): n_0·D = d·β on truth values "step i is the j-th odd one", divided by gcd(d, D) and cut into
  limbs of ``limb`` bits, so that no sum leaves int64 whatever D is.

Size: 3·k + 1 + L variables and 5·k + C + 5·L − 1 constraints for L classes left and C classes excluded, 1 variable less
when L = 0, k − 1 constraints less without counts, and one less for each class whose form of n_m would leave int64; for
a cell whose windows are empty, 1 and 1. Elements need q·n_i + |d| ≤ 2^61.

Good for U' up to about 10^6. What each part is worth, seconds on (3, −3191, 45, 29) and (7, −7857, 40, 16), both empty,
with one worker: default 0.24 and 0.21; without order, or without classes, over 6 (they pay together only); without
halves 3.6 and 1.5; without counts 0.24 and 0.17; with states 1.0 and 0.4; with equation 0.4 and 0.3. States and
equation together help a search without order and classes: 1.6 against 5.5 on the second cell.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import gcd
from typing import TYPE_CHECKING, Any

from cycle_encodings._constraint_model import LARGEST, ConstraintModel, ModelDraft, check_elements
from cycle_encodings._formula import Form
from solverkit.errors import InputError
from solverkit.exact.bounds import balanced_bound
from solverkit.exact.windows import Windows, element_windows
from solverkit.residues.sieve import prefix_tree

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = ["ENCODING", "Constraints"]


@dataclass(frozen=True, slots=True)
class Constraints:
    """The default CP-SAT model with its options.

    Args:
        halves: whether n_i = 2·h_i + b_i is stated; without, 2·n_{i+1} is n_i or q·n_i + d, as in the plain model.
        counts: whether prefixes have their least and largest odd count.
        order: whether the model asks for parities to be decided in order.
        leaves: at most so many classes of n_0 mod 2^m, 0 … 65,536; 0 for none.
        spare: bits of U' that the classes leave free, 0 … 64.
        states: whether each admissible (i, j) has a truth value that guards the exact ranges.
        equation: whether the cycle equation is stated.
        limb: bits of one limb of it, 4 … 24.

    Raises:
        InputError: an option outside its range.
    """

    halves: bool = True
    counts: bool = True
    order: bool = True
    leaves: int = 256
    spare: int = 6
    states: bool = False
    equation: bool = False
    limb: int = 12
    name: str = "constraints"
    form: Form = Form.CONSTRAINTS
    summary: str = "CP-SAT: orbit with halves, prefix classes and a search order; for U' up to about 10^6"

    def __post_init__(self) -> None:
        for field, low, high in (("leaves", 0, 1 << 16), ("spare", 0, 64), ("limb", 4, 24)):
            if not low <= getattr(self, field) <= high:
                raise InputError(field, getattr(self, field), f"an integer from {low} to {high}")

    def size(self, cell: Cell) -> int:
        """Return a rough number of constraints; a count over a long prefix counts for its length.

        Raises:
            CapacityError: elements may leave 61 bits.
        """
        check_elements(self.name, cell.multiplier * balanced_bound(cell) + abs(cell.offset))
        classes = min(self.leaves, balanced_bound(cell) >> self.spare)
        return 5 * cell.length + cell.length**2 // 20 + 3 * classes

    def encode(self, cell: Cell) -> ConstraintModel:
        """Return the model of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
            CapacityError: elements, or with ``equation`` the product U'·2^limb, may leave 61 bits.
        """
        if cell.sign != 1:
            raise InputError("cell", cell.sign.word, "a cell of positive elements; reflect it first")
        windows = element_windows(cell)
        draft = ModelDraft(cell, self.name)
        if windows.empty:
            least = draft.integer(0, 0, "n[0]")
            draft.group("ranges")
            draft.clause([])
            return draft.finished(least)
        elements, odd = self._orbit(draft, windows)
        draft.group("order")
        for element in elements[1:-1]:
            draft.model.add(element >= elements[0] + 1)
        draft.group("odd count")
        draft.model.add(sum(odd) == cell.odd)
        if self.counts:
            for i in range(1, cell.length):
                counts = windows.odd_counts(i)
                draft.between(sum(odd[:i]), counts[0], counts[-1])
        if self.states or self.equation:
            states = _states(draft, windows, odd)
        if self.states:
            _ranges(draft, windows, elements, states)
        if self.equation:
            _equation(draft, windows, elements[0], _odd_steps(draft, odd, states), self.limb)
        self._classes(draft, windows, elements, odd)
        if self.order:
            draft.decide_in_order(odd)
        return draft.finished(elements[0])

    def _orbit(self, draft: ModelDraft, windows: Windows) -> tuple[list[Any], list[Any]]:
        """State the map, and the closing by giving n_k the variable of n_0; return the n_i and the b_i."""
        q, d, k = windows.cell.multiplier, windows.cell.offset, windows.cell.length
        spans = [windows.elements(i) for i in range(k)]
        draft.check(q * max(span.high for span in spans) + abs(d), "q times the largest element")
        elements = [draft.integer(span.low, span.high, f"n[{i}]") for i, span in enumerate(spans)]
        elements.append(elements[0])
        odd = [draft.boolean(f"odd[{i}]") for i in range(k)]
        draft.group("step")
        for i, span in enumerate(spans):
            element, image = elements[i], elements[i + 1]
            if self.halves:
                half = draft.integer(span.low // 2, span.high // 2, f"half[{i}]")
                draft.model.add(element == 2 * half + odd[i])
                draft.model.add(image == q * half + (q + d) // 2).only_enforce_if(odd[i])
                draft.model.add(image == half).only_enforce_if(~odd[i])
            else:
                draft.model.add(2 * image == q * element + d).only_enforce_if(odd[i])
                draft.model.add(2 * image == element).only_enforce_if(~odd[i])
        return elements, odd

    def _classes(self, draft: ModelDraft, windows: Windows, elements: list[Any], odd: list[Any]) -> None:
        """State which classes mod 2^m hold no least element, and the affine forms of n_0 and n_m in the others."""
        depth = windows.bound.bit_length() - self.spare
        if not self.leaves or depth < 1:
            return
        draft.group("residues")
        cell, tree = windows.cell, prefix_tree(windows, depth, self.leaves)
        for steps, residue in tree.dead:
            draft.clause(~literal for literal in _prefix(cell, odd, steps, residue))
        if not tree.live:
            return
        steps = tree.live[0][0]
        most = max(span.high for _, _, span in tree.live) >> steps
        high = draft.integer(0, most, "high")
        for _, residue, span in tree.live:
            prefix = _prefix(cell, odd, steps, residue)
            orbit = cell.map.orbit(residue, steps)
            slope = cell.multiplier ** sum(value & 1 for value in orbit[:-1])
            chosen = draft.boolean(f"class[{residue} mod 2^{steps}]")
            draft.model.add_bool_and(prefix).only_enforce_if(chosen)
            draft.clause([chosen, *(~literal for literal in prefix)])
            draft.between(high, span.low >> steps, span.high >> steps).only_enforce_if(chosen)
            draft.model.add(elements[0] == (1 << steps) * high + residue).only_enforce_if(chosen)
            if slope * most + abs(orbit[-1]) <= LARGEST // 2:
                draft.model.add(elements[steps] == slope * high + orbit[-1]).only_enforce_if(chosen)


def _prefix(cell: Cell, odd: list[Any], steps: int, residue: int) -> list[Any]:
    """Return the literals "the first parities are those of the class", which hold together just for its members."""
    values = cell.map.orbit(residue, steps)[:-1]
    return [parity if value & 1 else ~parity for parity, value in zip(odd, values, strict=False)]


def _states(draft: ModelDraft, windows: Windows, odd: list[Any]) -> dict[tuple[int, int], Any]:
    """State which odd counts the prefixes have; return (i, j) -> literal of the state."""
    states: dict[tuple[int, int], Any] = {}
    for i in range(windows.cell.length + 1):
        counts = windows.odd_counts(i)
        for j in counts:
            states[i, j] = draft.boolean(f"odd[:{i}]={j}")
        draft.model.add_exactly_one([states[i, j] for j in counts])
    for (i, j), state in states.items():
        if i < windows.cell.length:
            draft.clause([~state, odd[i], *_there(states, i + 1, j)])
            draft.clause([~state, ~odd[i], *_there(states, i + 1, j + 1)])
    return states


def _there(states: dict[tuple[int, int], Any], i: int, j: int) -> list[Any]:
    return [states[i, j]] if (i, j) in states else []


def _ranges(draft: ModelDraft, windows: Windows, elements: list[Any], states: dict[tuple[int, int], Any]) -> None:
    """State the exact ranges of the least element and of each element, state by state."""
    draft.group("ranges")
    for (i, j), state in states.items():
        room = windows.rooms[i, j]
        draft.between(elements[i], room.element.low, room.element.high).only_enforce_if(state)
        draft.between(elements[0], room.least.low, room.least.high).only_enforce_if(state)


def _odd_steps(draft: ModelDraft, odd: list[Any], states: dict[tuple[int, int], Any]) -> dict[tuple[int, int], Any]:
    """Return (i, j) -> literal "step i is odd, with j odd steps before it"."""
    found: dict[tuple[int, int], Any] = {}
    for (i, j), state in states.items():
        if (i + 1, j + 1) in states:
            found[i, j] = step = draft.boolean(f"step {i} after {j} odd")
            draft.model.add_implication(step, state)
            draft.model.add_implication(step, odd[i])
            draft.clause([step, ~state, ~odd[i]])
    return found


def _equation(
    draft: ModelDraft,
    windows: Windows,
    least: Any,  # noqa: ANN401 - a variable of OR-Tools
    steps: dict[tuple[int, int], Any],
    limb: int,
) -> None:
    """State |D'|·t = β and n_0 = |d'|·t with D/d = D'/d' in lowest terms, limb by limb with exact carries."""
    draft.group("equation")
    cell, span = windows.cell, windows.elements(0)
    common = gcd(cell.determinant, cell.offset)
    gap, scale = abs(cell.determinant) // common, abs(cell.offset) // common
    low, high = -(-span.low // scale), span.high // scale
    if low > high:
        draft.clause([])
        return
    quotient = draft.integer(low, high, f"n[0]/{scale}")
    draft.model.add(least == scale * quotient)
    ordinals: list[list[tuple[int, Any]]] = [[] for _ in range(cell.odd)]
    for (i, j), step in steps.items():
        ordinals[j].append((cell.multiplier ** (cell.odd - 1 - j) << i, step))
    for choice in ordinals:
        draft.model.add_exactly_one([step for _, step in choice])
    most = max(gap * high, sum(max(weight for weight, _ in choice) for choice in ordinals))
    places = -(-most.bit_length() // limb)
    carry: Any = 0
    for place in range(places):
        below, digit = 1 << (limb * (place + 1)), (1 << limb) - 1
        terms = [(weight >> limb * place & digit) * step for choice in ordinals for weight, step in choice]
        total = sum(terms) - (gap >> limb * place & digit) * quotient + carry
        if place == places - 1:
            draft.model.add(total == 0)
            continue
        least_sum = sum(min(weight % below for weight, _ in choice) for choice in ordinals) - gap % below * high
        largest_sum = sum(max(weight % below for weight, _ in choice) for choice in ordinals) - gap % below * low
        draft.check(((cell.odd + 1) << limb) + (high << limb), "a limb of the cycle equation")
        following = draft.integer(
            -(-least_sum // below), max(-(-least_sum // below), largest_sum // below), f"carry[{place}]"
        )
        draft.model.add(total == (digit + 1) * following)
        carry = following


ENCODING = Constraints()
