"""Windows and cells: what is to be settled."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from enum import IntEnum
from typing import TYPE_CHECKING

from solverkit.errors import InputError
from solverkit.maps import Map
from solverkit.numerals import Span

if TYPE_CHECKING:
    from collections.abc import Iterator

    from solverkit.shape import Shape

__all__ = ["MAX_LENGTH", "MAX_MAPS", "Assumption", "Cell", "Side", "Sign", "Window"]

#: Largest cycle length that a window may name.
MAX_LENGTH = 10**18
#: Largest number of maps in one window.
MAX_MAPS = 1_000_000


class Sign(IntEnum):
    """Sign of the elements of a cycle; no cycle has elements of both signs."""

    POSITIVE = 1
    NEGATIVE = -1

    @property
    def word(self) -> str:
        """The name that windows and tables use."""
        return self.name.lower()


@dataclass(frozen=True, slots=True, order=True)
class Cell:
    """All cycles of the map (q, d) of exactly this length and odd count with one sign and least element above a bound.

    A word that repeats a shorter word belongs to the shorter cell.

    Args:
        multiplier: q, odd, at least 3.
        offset: d, odd.
        length: k, number of steps, at least 1.
        odd: x, number of odd elements, 1 … k.
        above: B ≥ 0; the least element is above B in absolute value.
        sign: of the elements.

    Raises:
        InputError: a value outside these ranges.
    """

    multiplier: int
    offset: int
    length: int
    odd: int
    above: int = 0
    sign: Sign = Sign.POSITIVE

    def __post_init__(self) -> None:
        Map(self.multiplier, self.offset)
        if self.length < 1:
            raise InputError("length", self.length, "an integer of at least 1")
        if not 1 <= self.odd <= self.length:
            raise InputError("odd", self.odd, f"an integer from 1 to the length {self.length}")
        if self.above < 0:
            raise InputError("above", self.above, "an integer of at least 0")

    @property
    def map(self) -> Map:
        """The map (q, d)."""
        return Map(self.multiplier, self.offset)

    @property
    def determinant(self) -> int:
        """D = 2^k − q^x; n·D = d·β for every element n."""
        return (1 << self.length) - int(self.multiplier**self.odd)

    def positive(self) -> Cell:
        """Return the cell of positive elements that reflection carries this one to."""
        if self.sign is Sign.POSITIVE:
            return self
        return replace(self, offset=-self.offset, sign=Sign.POSITIVE)


@dataclass(frozen=True, slots=True)
class Side:
    """One map of a window together with one sign.

    Args:
        map: the map as the window names it.
        sign: of the elements looked for.
    """

    map: Map
    sign: Sign

    @property
    def positive_map(self) -> Map:
        """The map whose positive elements correspond to the elements of this side."""
        return self.map if self.sign is Sign.POSITIVE else self.map.reflected()


@dataclass(frozen=True, slots=True)
class Assumption:
    """A bound taken from the literature: no cycle of the window's maps has a least element below it.

    Args:
        no_cycle_below: in absolute value, at least 1.
        source: where the bound is published; must not be empty.
    """

    no_cycle_below: int
    source: str

    def __post_init__(self) -> None:
        if self.no_cycle_below < 1:
            raise InputError("assume.no_cycle_below", self.no_cycle_below, "an integer of at least 1")
        if not self.source.strip():
            raise InputError("assume.source", self.source, "a text that says where the bound is published")


@dataclass(frozen=True, slots=True)
class Window:
    """A set of maps, lengths, odd counts, a bound, signs and side conditions.

    Args:
        maps: at least one, without repeats.
        lengths: range of k, within 1 … 10^18.
        odd: range of x, or None for any.
        above: B ≥ 0.
        signs: the signs looked for, at least one.
        primitive: only cycles whose elements have no common factor with d.
        assumption: a bound from the literature, or None.
        shape: side conditions, or None.
        title: free text.

    Raises:
        InputError: a value outside these ranges.
    """

    maps: tuple[Map, ...]
    lengths: Span
    odd: Span | None = None
    above: int = 0
    signs: tuple[Sign, ...] = (Sign.POSITIVE,)
    primitive: bool = False
    assumption: Assumption | None = None
    shape: Shape | None = None
    title: str = field(default="")

    def __post_init__(self) -> None:
        if not self.maps:
            raise InputError("map", "nothing", "at least one map Q,D with an odd offset")
        if len(self.maps) > MAX_MAPS:
            raise InputError("map", f"{len(self.maps)} maps", f"at most {MAX_MAPS} maps in one window")
        if len(set(self.maps)) != len(self.maps):
            twice = next(m for i, m in enumerate(self.maps) if m in self.maps[:i])
            raise InputError("map", f"{twice.multiplier},{twice.offset} twice", "each map once")
        if self.lengths.low < 1 or self.lengths.high > MAX_LENGTH:
            raise InputError("lengths", str(self.lengths), "lengths from 1 to 10^18")
        if self.odd is not None and self.odd.low < 1:
            raise InputError("odd", str(self.odd), "odd-step counts of at least 1")
        if self.above < 0:
            raise InputError("above", self.above, "an integer of at least 0")
        if not self.signs:
            raise InputError("sign", "nothing", "positive, negative or both")

    @property
    def bound(self) -> int:
        """The bound B in force: the window's own, or what the assumption excludes if that is more."""
        assumed = self.assumption.no_cycle_below - 1 if self.assumption else 0
        return max(self.above, assumed)

    @property
    def odd_range(self) -> Span:
        """The odd counts in force; every count from 1 to the largest length when the window says "any"."""
        return self.odd or Span(1, self.lengths.high)

    def sides(self) -> Iterator[Side]:
        """Yield every map with every sign, in the order of the window."""
        for each in self.maps:
            for sign in self.signs:
                yield Side(each, sign)

    def cell(self, side: Side, length: int, odd: int) -> Cell:
        """Return the cell of this window on ``side``; its bound is the window's."""
        return Cell(side.map.multiplier, side.map.offset, length, odd, self.bound, side.sign)
