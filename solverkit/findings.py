"""What was found: cycles, verdicts on cells and the evidence for them. Frozen; the constructors check themselves."""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import IntEnum, StrEnum
from math import gcd

from solverkit.errors import ContradictionError
from solverkit.maps import Map
from solverkit.window import Cell, Sign
from solverkit.words import circuits

__all__ = ["CellFinding", "Cycle", "Evidence", "Verdict"]


class Verdict(StrEnum):
    """Answer for one cell."""

    NONE = "none"
    FOUND = "found"
    OPEN = "open"


class Evidence(IntEnum):
    """How sure an answer is, weakest first.

    COMPUTED: one method. CONFIRMED: methods of two families gave the same complete list. PROVED: an auditor can
    check a proof object.
    """

    COMPUTED = 1
    CONFIRMED = 2
    PROVED = 3

    @property
    def word(self) -> str:
        """The name that options and tables use."""
        return self.name.lower()


@dataclass(frozen=True, slots=True)
class Cycle:
    """One cycle, checked by iterating the map when it is made.

    Args:
        multiplier: q.
        offset: d.
        least: the element of least absolute value, with its sign.
        length: k, the number of distinct elements.

    Attributes:
        word: parity word from the least element.
        odd: x, number of odd elements.
        largest: the element of largest absolute value, with its sign.
        gcd: greatest common divisor of all elements and d; 1 for a primitive cycle.
        total: sum of the elements.

    Raises:
        ContradictionError: iteration from ``least`` does not first return after exactly ``length`` steps, or meets a
            smaller element, or leaves the sign of ``least``.
    """

    multiplier: int
    offset: int
    least: int
    length: int
    word: str = field(init=False)
    odd: int = field(init=False)
    largest: int = field(init=False)
    gcd: int = field(init=False)
    total: int = field(init=False)

    def __post_init__(self) -> None:
        step = Map(self.multiplier, self.offset).step
        if self.length < 1 or self.least == 0:
            raise self._refused("a cycle has at least one element, and 0 has no sign")
        value, largest, common, total, marks = self.least, self.least, self.offset, 0, bytearray()
        for _ in range(self.length):
            marks.append(49 if value & 1 else 48)
            common, total = gcd(common, value), total + value
            if abs(value) > abs(largest):
                largest = value
            value = step(value)
            if value * self.least <= 0 or abs(value) < abs(self.least):
                raise self._refused(f"iteration meets {value}")
            if value == self.least and len(marks) < self.length:
                raise self._refused(f"it returns after {len(marks)} steps")
        if value != self.least:
            raise self._refused(f"after {self.length} steps it stands at {value}")
        word = marks.decode("ascii")
        for name, content in (
            ("word", word),
            ("odd", word.count("1")),
            ("largest", largest),
            ("gcd", common),
            ("total", total),
        ):
            object.__setattr__(self, name, content)

    def _refused(self, why: str) -> ContradictionError:
        return ContradictionError(
            f"{self.least} is not the least element of a cycle of length {self.length} of "
            f"({self.multiplier}, {self.offset}): {why}"
        )

    @property
    def map(self) -> Map:
        """The map (q, d)."""
        return Map(self.multiplier, self.offset)

    @property
    def sign(self) -> Sign:
        """Sign of the elements."""
        return Sign.POSITIVE if self.least > 0 else Sign.NEGATIVE

    @property
    def circuits(self) -> int:
        """Number of local minima."""
        return circuits(self.word)

    @property
    def is_primitive(self) -> bool:
        """Whether the elements and d have no common factor."""
        return self.gcd == 1

    def elements(self) -> list[int]:
        """Return the elements in the order of iteration, the least first."""
        return self.map.orbit(self.least, self.length - 1)

    def sort_key(self) -> tuple[int, int, int, int, int, int]:
        """Return the order of published lists: multiplier, offset, length, odd, |least|, least."""
        return (self.multiplier, self.offset, self.length, self.odd, abs(self.least), self.least)

    def lies_in(self, cell: Cell) -> bool:
        """Tell whether this cycle belongs to ``cell``, its bound and sign included."""
        same = (self.multiplier, self.offset, self.length) == (cell.multiplier, cell.offset, cell.length)
        return same and self.odd == cell.odd and self.least * cell.sign > cell.above


@dataclass(frozen=True, slots=True)
class CellFinding:
    """The answer for one cell, with what it rests on.

    Args:
        cell: the cell, unreduced.
        verdict: none, found or open.
        cycles: the complete list for ``found``; what is known so far for ``open``; empty for ``none``.
        evidence: None exactly for ``open``.
        methods: names of the methods whose complete lists agree, sorted.
        seconds: computing time spent on the cell.
        reason: for ``open``, why; else what excluded the cell, or empty.
        total: exact number of cycles when they were counted and ``cycles`` is only a sample, else None.
        contradiction: whether complete lists of two methods differ; the cell is then open and has the cycles of both.

    Raises:
        ContradictionError: the parts do not fit each other.
    """

    cell: Cell
    verdict: Verdict
    cycles: tuple[Cycle, ...] = ()
    evidence: Evidence | None = None
    methods: tuple[str, ...] = ()
    seconds: float = 0.0
    reason: str = ""
    total: int | None = None
    contradiction: bool = False

    def __post_init__(self) -> None:
        if self.verdict is Verdict.FOUND and not self.cycles:
            raise ContradictionError(f"{self.cell}: found, but no cycle is named")
        if self.verdict is Verdict.NONE and self.cycles:
            raise ContradictionError(f"{self.cell}: none, but {len(self.cycles)} cycles are named")
        if (self.evidence is None) != (self.verdict is Verdict.OPEN):
            raise ContradictionError(f"{self.cell}: verdict {self.verdict} with evidence {self.evidence}")
        if self.contradiction and self.verdict is not Verdict.OPEN:
            raise ContradictionError(f"{self.cell}: contradictory lists, yet the verdict is {self.verdict}")
        if self.verdict is not Verdict.OPEN and not self.methods:
            raise ContradictionError(f"{self.cell}: verdict {self.verdict} without a method")
        if self.evidence is Evidence.CONFIRMED and len(self.methods) < 2:
            raise ContradictionError(f"{self.cell}: confirmed by {self.methods} alone")
        for cycle in self.cycles:
            if not cycle.lies_in(self.cell):
                raise ContradictionError(f"{cycle} does not lie in {self.cell}")
