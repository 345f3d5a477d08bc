"""What an encoding as linear inequalities gives: bounded integers, rows, condition groups, and the least element."""

from __future__ import annotations

from dataclasses import dataclass, replace
from hashlib import sha256
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from solverkit.window import Cell

__all__ = ["IntegerVariable", "LinearDraft", "LinearModel", "Row"]


@dataclass(frozen=True, slots=True)
class IntegerVariable:
    """An integer with low ≤ value ≤ high."""

    name: str
    low: int
    high: int


@dataclass(frozen=True, slots=True)
class Row:
    """A condition low ≤ Σ weight·variable ≤ high.

    Args:
        terms: (index of a variable, weight), each variable once.
        low: least value of the sum, or None.
        high: largest value of the sum, or None.
    """

    terms: tuple[tuple[int, int], ...]
    low: int | None
    high: int | None

    def holds(self, values: Sequence[int]) -> bool:
        """Tell, in exact arithmetic, whether these values keep the condition."""
        total = sum(weight * values[index] for index, weight in self.terms)
        return (self.low is None or total >= self.low) and (self.high is None or total <= self.high)


@dataclass(frozen=True, slots=True)
class LinearModel:
    """Bounded integers and rows whose integer points are the cycles of one cell, each once.

    Args:
        cell: of positive elements.
        variables: the integers, in order.
        rows: the conditions, in order.
        groups: name of a condition -> ranges [start, stop) of the rows that state it; together they are all.
        least: index of the variable that is the least element.
    """

    cell: Cell
    variables: tuple[IntegerVariable, ...]
    rows: tuple[Row, ...]
    groups: Mapping[str, tuple[tuple[int, int], ...]]
    least: int

    @property
    def names(self) -> dict[int, str]:
        """Index of a variable -> what it means."""
        return {index: variable.name for index, variable in enumerate(self.variables)}

    def sizes(self) -> dict[str, int]:
        """Return the numbers of variables and rows."""
        return {"variables": len(self.variables), "rows": len(self.rows)}

    def digest(self) -> str:
        """Return the SHA-256 of a text that writes the variables, the rows and the index of the least element."""
        lines = [f"{each.name} {each.low} {each.high}" for each in self.variables]
        lines += [f"{row.low} {' '.join(f'{w}*{i}' for i, w in row.terms)} {row.high}" for row in self.rows]
        return sha256("\n".join([*lines, str(self.least)]).encode()).hexdigest()

    def decode(self, values: Sequence[int]) -> int:
        """Return the least element that a point stands for; the caller substitutes it into the map.

        Args:
            values: of the variables, in order.
        """
        return values[self.least]

    def holds(self, values: Sequence[int]) -> bool:
        """Tell, in exact arithmetic, whether these values are a point of the model."""
        inside = all(each.low <= value <= each.high for each, value in zip(self.variables, values, strict=True))
        return inside and all(row.holds(values) for row in self.rows)

    def excluding(self, least: int) -> LinearModel:
        """Return the model without the cycle that has this least element: one more variable and two more rows.

        The new variable tells whether n_0 lies above ``least`` (1) or below it (0).
        """
        side, low, high = len(self.variables), self.variables[self.least].low, self.variables[self.least].high
        below = Row(((self.least, 1), (side, -(high - least + 1))), None, least - 1)
        above = Row(((self.least, 1), (side, -(least + 1 - low))), low, None)
        stop = len(self.rows) + 2
        return replace(
            self,
            variables=(*self.variables, IntegerVariable(f"n[0]>{least}", 0, 1)),
            rows=(*self.rows, below, above),
            groups={**self.groups, "found": (*self.groups.get("found", ()), (stop - 2, stop))},
        )

    def largest(self) -> int:
        """Return the largest absolute value of a weight, a bound or any partial sum of a row."""
        reach = [max(abs(each.low), abs(each.high)) for each in self.variables]
        found = max(reach, default=0)
        for row in self.rows:
            total = sum(abs(weight) * max(1, reach[index]) for index, weight in row.terms)
            found = max(found, total, abs(row.low or 0), abs(row.high or 0))
        return found


class LinearDraft:
    """A linear model in the making.

    Args:
        cell: of positive elements.
    """

    def __init__(self, cell: Cell) -> None:
        self._cell = cell
        self._variables: list[IntegerVariable] = []
        self._rows: list[Row] = []
        self._groups: dict[str, list[tuple[int, int]]] = {}
        self._current, self._start = "", 0

    def integer(self, low: int, high: int, name: str) -> int:
        """Return the index of a new variable with values low … high."""
        self._variables.append(IntegerVariable(name, low, high))
        return len(self._variables) - 1

    def row(self, terms: Sequence[tuple[int, int]], low: int | None, high: int | None) -> None:
        """State low ≤ Σ weight·variable ≤ high; terms of one variable are added up."""
        weights: dict[int, int] = {}
        for index, weight in terms:
            weights[index] = weights.get(index, 0) + weight
        self._rows.append(Row(tuple((index, weight) for index, weight in weights.items() if weight), low, high))

    def group(self, name: str) -> None:
        """Begin or resume the group of rows that state ``name``; every row lies in a group."""
        if len(self._rows) > self._start:
            self._groups.setdefault(self._current, []).append((self._start, len(self._rows)))
        self._current, self._start = name, len(self._rows)

    def finished(self, least: int) -> LinearModel:
        """Return the model, with the index of the variable that is its least element."""
        self.group("")
        groups = {name: tuple(ranges) for name, ranges in self._groups.items()}
        return LinearModel(self._cell, tuple(self._variables), tuple(self._rows), groups, least)
