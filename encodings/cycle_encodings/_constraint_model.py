"""What an encoding for constraint programming gives: a CP-SAT model, its condition groups, and the least element."""

from __future__ import annotations

from dataclasses import dataclass
from hashlib import sha256
from typing import TYPE_CHECKING, Any

from solverkit.errors import CapacityError

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

    from solverkit.window import Cell

__all__ = ["LARGEST", "ConstraintModel", "ModelDraft", "check_elements"]

#: No sum that a model states may exceed this in absolute value; CP-SAT keeps sums and their slack in int64.
LARGEST = 1 << 61


def check_elements(encoding: str, size: int, what: str = "q times the least element") -> None:
    """Refuse a model with a sum of more than 61 bits.

    Args:
        encoding: its name, for the message.
        size: the largest absolute value of the sum.
        what: the sum, for the message.

    Raises:
        CapacityError: ``size`` is too large.
    """
    if size > LARGEST:
        raise CapacityError(encoding, f"{what} needs {size.bit_length()} bits, more than CP-SAT's 61")


@dataclass(frozen=True, slots=True)
class ConstraintModel:
    """A CP-SAT model whose solutions are the cycles of one cell, each once up to auxiliary variables.

    Args:
        cell: of positive elements.
        model: an OR-Tools ``CpModel``; not to be changed, solvers work on a clone.
        groups: name of a condition -> ranges [start, stop) of the constraints that state it; together they are all.
        least: index of the variable that is the least element.
        names: index of a variable -> what it means.
    """

    cell: Cell
    model: Any
    groups: Mapping[str, tuple[tuple[int, int], ...]]
    least: int
    names: Mapping[int, str]

    def sizes(self) -> dict[str, int]:
        """Return the numbers of variables and constraints."""
        proto = self.model.Proto()
        return {"variables": len(proto.variables), "constraints": len(proto.constraints)}

    def digest(self) -> str:
        """Return the SHA-256 of the model as protocol buffer text."""
        return sha256(str(self.model.Proto()).encode()).hexdigest()

    def decode(self, values: Sequence[int]) -> int:
        """Return the least element that a solution stands for; the caller substitutes it into the map.

        Args:
            values: of the variables, in the order of the model.
        """
        return int(values[self.least])


class ModelDraft:
    """A CP-SAT model in the making, which keeps the names of variables and the groups of constraints.

    Args:
        cell: of positive elements.
        encoding: name of the encoding, for error messages.
    """

    def __init__(self, cell: Cell, encoding: str) -> None:
        from ortools.sat.python import cp_model  # noqa: PLC0415 - heavy; loaded when a model is built

        self.model = cp_model.CpModel()
        self.names: dict[int, str] = {}
        self._cell, self._encoding = cell, encoding
        self._domains = cp_model.Domain
        self._first, self._largest = cp_model.CHOOSE_FIRST, cp_model.SELECT_MAX_VALUE
        self._groups: dict[str, list[tuple[int, int]]] = {}
        self._current, self._start = "", 0

    def integer(self, low: int, high: int, name: str) -> Any:  # noqa: ANN401 - a variable of OR-Tools
        """Return a new variable with values low … high.

        Raises:
            CapacityError: the range leaves what CP-SAT can hold.
        """
        self.check(max(abs(low), abs(high)), name)
        variable = self.model.new_int_var(low, high, name)
        self.names[variable.index] = name
        return variable

    def boolean(self, name: str) -> Any:  # noqa: ANN401 - a variable of OR-Tools
        """Return a new variable with values 0 and 1."""
        variable = self.model.new_bool_var(name)
        self.names[variable.index] = name
        return variable

    def check(self, size: int, what: str) -> None:
        """Refuse a model with a sum of more than 61 bits.

        Raises:
            CapacityError: ``size`` is too large.
        """
        check_elements(self._encoding, size, what)

    def between(self, expression: Any, low: int, high: int) -> Any:  # noqa: ANN401 - a constraint of OR-Tools
        """State low ≤ expression ≤ high and return the constraint."""
        return self.model.add_linear_expression_in_domain(expression, self._domains(low, high))

    def clause(self, literals: Iterable[Any]) -> None:
        """State that one of the literals holds."""
        self.model.add_bool_or(list(literals))

    def decide_in_order(self, literals: Iterable[Any]) -> None:
        """Ask for a search that decides these first to last, true before false."""
        self.model.add_decision_strategy(list(literals), self._first, self._largest)

    def group(self, name: str) -> None:
        """Begin or resume the group of constraints that state ``name``; every constraint lies in a group."""
        self._close()
        self._current = name

    def _close(self) -> None:
        stop = len(self.model.Proto().constraints)
        if stop > self._start:
            self._groups.setdefault(self._current, []).append((self._start, stop))
        self._start = stop

    def finished(self, least: Any) -> ConstraintModel:  # noqa: ANN401 - a variable of OR-Tools
        """Return the model, with the variable of its least element."""
        self._close()
        groups = {name: tuple(ranges) for name, ranges in self._groups.items()}
        return ConstraintModel(self._cell, self.model, groups, least.index, self.names)
