"""Settling the live cells of a side that are too many to list: one sweep over all least elements they allow.

With U the largest product bound of the side, found by bisection on counts, every cycle of every live cell has its least
element in (B, U]. One sweep of that range lists them all; no cell is named unless it holds a cycle.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

from solverkit.exact.cone import ThinCone, tallest
from solverkit.findings import Cycle, Evidence, Verdict
from solverkit.methods import Piece
from solverkit.numerals import Span
from solverkit.settle.choice import method_named
from solverkit.window import Cell

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from solverkit.methods import PieceResult
    from solverkit.settle.triage import Region
    from solverkit.window import Window

__all__ = ["RegionFinding", "RegionWork", "conclude_region", "region_work"]

_SWEEP = "sweep"
_MOST_PIECES = 4096


@dataclass(frozen=True, slots=True)
class RegionFinding:
    """The answer for the live cells of one side together.

    Args:
        region: the cells.
        verdict: none, found or open.
        cycles: all of them, or those known so far.
        bound: U; no least element of the region exceeds it.
        swept_to: every least element up to here has been looked at.
        evidence: None exactly for ``open``.
        reason: for ``open``, why.
        seconds: computing time.
    """

    region: Region
    verdict: Verdict
    cycles: tuple[Cycle, ...]
    bound: int
    swept_to: int
    evidence: Evidence | None
    reason: str = ""
    seconds: float = 0.0


@dataclass(frozen=True, slots=True)
class RegionWork:
    """What is to be swept for a region.

    Args:
        region: the cells.
        cell: the cell with the largest product bound, of positive elements; it stands for the region in records.
        bound: that bound.
        seconds: estimated time on one core.
        refusal: why the sweep can't be done, or None.
    """

    region: Region
    cell: Cell
    bound: int
    seconds: float
    refusal: str | None

    def pieces(self, seconds: float) -> list[Piece]:
        """Cut the range into parts of about ``seconds``; ``detail`` is (first, last, largest k, largest x).

        Cuts also stand at the powers of two, so that the limits follow the cells that are still live there.
        """
        low, high = self.cell.above, self.bound
        count = max(1, min(_MOST_PIECES, round(self.seconds / seconds)))
        cuts = {low + (high - low) * i // count for i in range(count + 1)}
        cuts |= {1 << e for e in range(low.bit_length(), high.bit_length()) if low < 1 << e < high}
        ends = sorted(cuts)
        parts = [(a + 1, b, *self._limits(a)) for a, b in pairwise(ends)]
        return [Piece(_SWEEP, (self.cell,), i, len(parts), part) for i, part in enumerate(parts)]

    def _limits(self, above: int) -> tuple[int, int]:
        """Return the largest length and the largest odd count among the cells that are live above ``above``."""
        cone, map_ = self.region.cone, self.cell.map

        def longest(k: int) -> bool:
            return ThinCone(map_, above, Span(k, cone.lengths.high), cone.odd).count() > 0

        def oddest(x: int) -> bool:
            return ThinCone(map_, above, cone.lengths, Span(x, cone.odd.high)).count() > 0

        return (
            _last(longest, cone.lengths.low, cone.lengths.high),
            _last(oddest, cone.odd.low, cone.odd.high),
        )


def _last(holds: Callable[[int], bool], low: int, high: int) -> int:
    """Return the last number in low … high for which ``holds``, which holds at ``low`` and, once it fails, fails on."""
    while low < high:
        middle = (low + high + 1) // 2
        low, high = (middle, high) if holds(middle) else (low, middle - 1)
    return low


def region_work(window: Window, region: Region) -> RegionWork:
    """Return the sweep that settles ``region``."""
    cone, map_ = region.cone, region.side.positive_map
    top = tallest(map_, cone.lengths, cone.odd)
    assert top is not None
    bound, length, odd = top
    cell = Cell(map_.multiplier, map_.offset, length, odd, window.bound)
    sweep = method_named(_SWEEP)
    return RegionWork(region, cell, bound, sweep.estimate((cell,)), sweep.refusal(cell))


def conclude_region(window: Window, work: RegionWork, results: Sequence[PieceResult], pieces: int) -> RegionFinding:
    """Return the finding on a region from the results of the pieces of its sweep, in any order.

    Args:
        window: the window.
        work: the sweep.
        results: complete or not.
        pieces: how many pieces the sweep has.
    """
    region, side = work.region, work.region.side
    cycles = set()
    for result in results:
        for hit in result.hits:
            if hit.length in window.lengths and hit.odd in window.odd_range and hit.least > window.bound:
                cycle = Cycle(side.map.multiplier, side.map.offset, side.sign * hit.least, hit.length)
                if not (window.primitive and cycle.gcd > 1) and (window.shape is None or window.shape.holds(cycle)):
                    cycles.add(cycle)
    ordered = tuple(sorted(cycles, key=Cycle.sort_key))
    swept, failures = work.cell.above, []
    for result in sorted(results, key=lambda r: r.piece.index):
        if not result.complete:
            failures.append(result.reason)
        elif not failures and result.piece.detail[0] == swept + 1:
            swept = result.piece.detail[1]
    seconds = sum(result.seconds for result in results)
    if swept == work.bound and len(results) == pieces:
        verdict = Verdict.FOUND if ordered else Verdict.NONE
        return RegionFinding(region, verdict, ordered, work.bound, swept, Evidence.COMPUTED, "", seconds)
    reason = work.refusal or (failures[0] if failures else "not yet swept")
    return RegionFinding(region, Verdict.OPEN, ordered, work.bound, swept, None, reason, seconds)
