"""The orbit as a CP-SAT model without any refinement, as written in ten minutes; the measure for the default model.

An integer n_i and a truth value b_i for each step, b_i → 2·n_{i+1} = q·n_i + d and ¬b_i → 2·n_{i+1} = n_i, indices mod
k; Σ b_i = x; B < n_0 ≤ U' and n_0 < n_i for 0 < i < k, so that each cycle has one solution and a repeated word none.
Parity needs no condition of its own: an odd n_i has no half, and q·n_i + d is odd for an even one. All elements share
one upper bound, that of U' after x odd steps.

A cell has 2·k variables and 3·k + 2 constraints. Good for U' up to some hundreds.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from cycle_encodings._constraint_model import ConstraintModel, ModelDraft, check_elements
from cycle_encodings._formula import Form
from solverkit.errors import InputError
from solverkit.exact.bounds import balanced_bound

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = ["ENCODING", "PlainConstraints"]


@dataclass(frozen=True, slots=True)
class PlainConstraints:
    """The plain CP-SAT orbit model; it has no options."""

    name: str = "constraints-plain"
    form: Form = Form.CONSTRAINTS
    summary: str = "CP-SAT: the orbit as one writes it at first; what the default model is measured against"

    def size(self, cell: Cell) -> int:
        """Return the number of constraints.

        Raises:
            CapacityError: elements may leave 61 bits.
        """
        check_elements(self.name, cell.multiplier * balanced_bound(cell) + abs(cell.offset))
        return 3 * cell.length + 2

    def encode(self, cell: Cell) -> ConstraintModel:
        """Return the model of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
            CapacityError: elements may leave 61 bits.
        """
        if cell.sign != 1:
            raise InputError("cell", cell.sign.word, "a cell of positive elements; reflect it first")
        q, d, k = cell.multiplier, cell.offset, cell.length
        draft = ModelDraft(cell, self.name)
        most = top = max(balanced_bound(cell), 1)
        for _ in range(cell.odd):
            most = max(most, (q * most + d) // 2)
        draft.check(q * most + abs(d), "q times the largest element")
        elements = [draft.integer(1, most, f"n[{i}]") for i in range(k)]
        odd = [draft.boolean(f"odd[{i}]") for i in range(k)]
        draft.group("step")
        for i in range(k):
            image = elements[(i + 1) % k]
            draft.model.add(2 * image == q * elements[i] + d).only_enforce_if(odd[i])
            draft.model.add(2 * image == elements[i]).only_enforce_if(~odd[i])
        draft.group("odd count")
        draft.model.add(sum(odd) == cell.odd)
        draft.group("order")
        for element in elements[1:]:
            draft.model.add(element >= elements[0] + 1)
        draft.group("lower bound")
        draft.model.add(elements[0] >= cell.above + 1)
        draft.group("upper bound")
        draft.model.add(elements[0] <= (top if balanced_bound(cell) else 0))
        return draft.finished(elements[0])


ENCODING = PlainConstraints()
