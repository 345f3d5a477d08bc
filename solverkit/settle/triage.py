"""Triage: what arithmetic alone excludes from a window, and the live cells that are left."""

from __future__ import annotations

from bisect import bisect_left, bisect_right
from collections import Counter
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from enum import StrEnum
from itertools import islice

from solverkit.exact.bounds import EXACT_LENGTH, balanced_bound, balanced_interval, product_bound
from solverkit.exact.chances import Forecast, forecast
from solverkit.exact.cone import ThinCone
from solverkit.exact.reduction import Reduction, reduced
from solverkit.maps import Map
from solverkit.window import Cell, Side, Window

__all__ = ["LIST_LIMIT", "Criterion", "LiveCell", "Region", "Triage", "count_cells", "triage"]

#: A side with more cells than this under the product bound is counted, not listed.
LIST_LIMIT = 200_000


class Criterion(StrEnum):
    """Which upper bound of the least element decides whether a cell is live."""

    PRODUCT = "product"
    BALANCED = "balanced"


@dataclass(frozen=True, slots=True)
class LiveCell:
    """A cell that arithmetic alone does not exclude.

    Args:
        cell: as the window states it.
        reduction: its reduced cell and the factor back.
        bound: U of the cell, unreduced.
        balanced: U' of the cell, unreduced; None beyond the length where it is computed exactly.
    """

    cell: Cell
    reduction: Reduction
    bound: int
    balanced: int | None

    def forecast(self) -> Forecast:
        """Return expected number of cycles and chance of one."""
        return forecast(self.cell)


@dataclass(frozen=True, slots=True)
class Region:
    """The live cells of one side that are too many to list.

    Args:
        side: map and sign.
        cone: the cells under the product bound.
        count: how many they are.
    """

    side: Side
    cone: ThinCone
    count: int

    def cells(self, window: Window) -> Iterator[Cell]:
        """Yield the cells, by length and odd count; O(log K) work each."""
        for length, odd in self.cone.cells():
            yield window.cell(self.side, length, odd)


@dataclass(frozen=True, slots=True)
class Triage:
    """What triage says of a window.

    Args:
        window: the window.
        criterion: which bound decided.
        cells: live cells, in the order of the window's maps, then by length and odd count.
        regions: sides whose live cells are only counted.
        excluded: reason -> number of cells; reasons are sign, bound, words, imprimitive, residues.
        total: number of cells of the window.
    """

    window: Window
    criterion: Criterion
    cells: tuple[LiveCell, ...]
    regions: tuple[Region, ...]
    excluded: Mapping[str, int]
    total: int

    @property
    def live(self) -> int:
        """Number of live cells."""
        return len(self.cells) + sum(region.count for region in self.regions)

    def first_live(self) -> tuple[int, int] | None:
        """Return (k, x) of the first live cell by length, then odd count; None when there is none."""
        heads = [(live.cell.length, live.cell.odd) for live in self.cells]
        heads += [pair for region in self.regions for pair in islice(region.cone.cells(), 1)]
        return min(heads, default=None)


def triage(window: Window, criterion: Criterion = Criterion.BALANCED, list_limit: int = LIST_LIMIT) -> Triage:
    """Return the triage of ``window``.

    Args:
        window: the window.
        criterion: a cell is live when its reduced form has room above its bound by this criterion. The product bound
            is weaker and never wrong. Both are proved for every map; regions use the product bound.
        list_limit: when the window has more cells than this to look at, sides with more than their share are counted
            only.

    Reduction comes first: a cell whose multiples of |d|/gcd(|d|, |D|) leave no room is excluded by its bound.
    """
    excluded: Counter[str] = Counter({"sign": 0, "bound": 0, "words": 0, "imprimitive": 0, "residues": 0})
    cells: list[LiveCell] = []
    regions: list[Region] = []
    sides = [
        (side, ThinCone(side.positive_map, window.bound, window.lengths, window.odd_range)) for side in window.sides()
    ]
    choices = [_whole_only(window, side, cone) for side, cone in sides]
    sizes = [cone.count() if pairs is None else len(pairs) for (_, cone), pairs in zip(sides, choices, strict=True)]
    share = list_limit if sum(sizes) <= list_limit else list_limit // len(sides)
    shared: dict[tuple[Map, int, int], tuple[int, int | None]] = {}
    for (side, cone), pairs, size in zip(sides, choices, sizes, strict=True):
        count = cone.count()
        excluded["sign"] += cone.total - cone.sign_fits
        excluded["bound"] += cone.sign_fits - count
        if size > share:
            regions.append(Region(side, cone, count))
            continue
        if pairs is not None:
            excluded["imprimitive"] += count - len(pairs)
        for length, odd in cone.cells() if pairs is None else pairs:
            verdict = _examined(window.cell(side, length, odd), window, criterion, shared)
            if isinstance(verdict, str):
                excluded[verdict] += 1
            else:
                cells.append(verdict)
    total = sum(cone.total for _, cone in sides)
    return Triage(window, criterion, tuple(cells), tuple(regions), dict(excluded), total)


def count_cells(window: Window) -> int:
    """Return the number of cells of ``window``, live or not, without looking at them."""
    side = next(window.sides())
    cone = ThinCone(side.positive_map, window.bound, window.lengths, window.odd_range)
    return cone.total * len(window.maps) * len(window.signs)


def _whole_only(window: Window, side: Side, cone: ThinCone) -> list[tuple[int, int]] | None:
    """Return the cells under the product bound with d | D, ascending, for a primitive window; else None.

    Other cells have only cycles with a factor in common with d. The lengths k are grouped by 2^k mod d, so only the
    cells returned are looked at one by one.
    """
    size = abs(side.map.offset)
    if not window.primitive or size == 1 or cone.lengths.high > EXACT_LENGTH or cone.empty_range:
        return None
    by_residue: dict[int, list[int]] = {}
    power = pow(2, cone.lengths.low, size)
    for k in cone.lengths:
        by_residue.setdefault(power, []).append(k)
        power = power * 2 % size
    pairs = []
    power = pow(side.map.multiplier, cone.odd.low, size)
    for x in cone.odd:
        ks = by_residue.get(power)
        span = cone.lengths_at(x) if ks else None
        if ks and span is not None:
            pairs += [(k, x) for k in ks[bisect_left(ks, span.low) : bisect_right(ks, span.high)]]
        power = power * side.map.multiplier % size
    return sorted(pairs)


def _examined(
    cell: Cell, window: Window, criterion: Criterion, shared: dict[tuple[Map, int, int], tuple[int, int | None]]
) -> LiveCell | str:
    """Return the live cell, or the reason that excludes it; ``shared`` keeps the bounds of reduced cells."""
    if cell.odd == cell.length > 1:
        return "words"
    reduction = reduced(cell)
    small = reduction.cell
    if window.primitive and abs(reduction.factor) > 1:
        return "imprimitive"
    key = (small.map, small.length, small.odd)
    if key not in shared:
        exact = small.length <= EXACT_LENGTH
        shared[key] = (product_bound(small), balanced_bound(small) if exact else None)
    product, balanced = shared[key]
    deciding = product if criterion is Criterion.PRODUCT or balanced is None else balanced
    if deciding <= small.above:
        return "bound"
    if balanced is None and criterion is Criterion.BALANCED and balanced_interval(small)[1] <= small.above:
        return "bound"
    positive = replace(cell.positive(), above=0)
    whole = positive == replace(small, above=0)
    return LiveCell(
        cell,
        reduction,
        product if whole else product_bound(positive),
        balanced if whole or balanced is None else balanced_bound(positive),
    )
