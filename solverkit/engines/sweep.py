"""Sweep: every candidate for a least element is iterated until it drops, returns, or can no longer return.

Orbit side of the cycle equation. All cells of a batch belong to one map of positive elements; one pass over the odd n
with B < n ≤ U' (U' the largest balanced bound of the cells) serves all their lengths and odd counts.
"""

from __future__ import annotations

from functools import lru_cache
from time import perf_counter, process_time
from typing import TYPE_CHECKING

from solverkit.engines._sweep_orbit import closes
from solverkit.engines._sweep_ranges import Profile, cell_bound, profile
from solverkit.methods import Budget, Family, Hit, Piece, PieceResult

if TYPE_CHECKING:
    from collections.abc import Sequence

    from solverkit.window import Cell

__all__ = ["ENGINE", "Sweep"]

_LONGEST = 1e7  # seconds on one core beyond which a cell is refused
_PYTHON_STEPS = 20_000  # candidates × steps below which no kernel is loaded
_WORK = 100_000_000  # steps between two looks at the clock: about 0.1 to 0.3 s
_STEP_SECONDS = 1.1e-9
_PYTHON_STEP_SECONDS = 1e-7


@lru_cache(maxsize=256)
def _profile(cells: tuple[Cell, ...]) -> Profile:
    return profile(cells)


class Sweep:
    """The orbit sweep as a method; it holds no state."""

    name = "sweep"
    family = Family.ORBIT

    def refusal(self, cell: Cell) -> str | None:
        """Return why ``cell`` can't be swept: its range would take longer than four months of one core."""
        seconds = self.estimate((cell,))
        if seconds <= _LONGEST:
            return None
        return (
            f"{_profile((cell,)).candidates:.2e} candidates up to {cell_bound(cell):.3e} would take about "
            f"{seconds:.1e} s on one core; at most {_LONGEST:.0e} s are allowed"
        )

    def estimate(self, cells: Sequence[Cell]) -> float:
        """Return seconds on one core for one pass over the candidates of all ``cells``."""
        shape = _profile(tuple(cells))
        if not shape.candidates:
            return 0.0
        multiplier = cells[0].multiplier
        length, _ = shape.limits(shape.low + 1)
        steps = 10 if multiplier == 3 else min(length, 400)
        step = _STEP_SECONDS if _fits(cells[0], shape.high) else _PYTHON_STEP_SECONDS
        return min(float(shape.candidates), 1e300) * steps * step

    def batches(self, cells: Sequence[Cell]) -> list[tuple[Cell, ...]]:
        """Group cells by map, sorted, without repeats."""
        by_map: dict[tuple[int, int], set[Cell]] = {}
        for cell in cells:
            by_map.setdefault((cell.multiplier, cell.offset), set()).add(cell)
        return [tuple(sorted(by_map[key])) for key in sorted(by_map)]

    def pieces(self, batch: tuple[Cell, ...], seconds: float) -> list[Piece]:
        """Cut the range of the batch into parts of about ``seconds`` each; ``detail`` is (first, last)."""
        shape = _profile(batch)
        count = max(1, min(4096, round(self.estimate(batch) / max(seconds, 1e-3))))
        low, high = shape.low, max(shape.low, shape.high)
        cuts = [low + (high - low) * i // count for i in range(count + 1)]
        return [Piece(self.name, batch, i, count, (cuts[i] + 1, cuts[i + 1])) for i in range(count)]

    def run(self, piece: Piece, budget: Budget) -> PieceResult:
        """Iterate every candidate of one part."""
        started, worked = perf_counter(), process_time()
        first, last = piece.detail
        shape = _profile(piece.cells)
        found: set[tuple[int, int, int]] = set()
        swept, handed, reason = first - 1, 0, ""
        for end in shape.breaks(first, last):
            length, odd = shape.limits(swept + 1)
            while swept < end:
                if budget.seconds is not None and perf_counter() - started > budget.seconds:
                    reason = f"the budget of {budget.seconds:g} s ended at candidate {swept}"
                    break
                swept, more = _scan(piece.cells[0], swept + 1, end, length, odd, found)
                handed += more
            if reason:
                break
        wanted = {(cell.length, cell.odd): cell.above for cell in piece.cells}
        hits = sorted(Hit(k, x, n) for n, k, x in found if (k, x) in wanted and n > wanted[k, x])
        examined = (swept + 1) // 2 - first // 2
        return PieceResult(
            piece,
            tuple(hits),
            complete=not reason,
            reason=reason,
            statistics={
                "first": str(first),
                "last": str(last),
                "swept_to": str(swept),
                "candidates": examined,
                "handed_over": handed,
            },
            seconds=process_time() - worked,
        )


def _fits(cell: Cell, high: int) -> bool:
    return cell.multiplier < 1 << 31 and abs(cell.offset) < 1 << 61 and high < 1 << 62


def _scan(
    cell: Cell, first: int, last: int, length: int, odd: int, found: set[tuple[int, int, int]]
) -> tuple[int, int]:
    """Iterate candidates from ``first`` for a short time; return the last integer done and the orbits handed over."""
    q, d = cell.multiplier, cell.offset
    n = first | 1
    few = (last - first) * min(length, 100) < _PYTHON_STEPS
    if few or not _fits(cell, last):
        stop = min(last, n + 2 * max(1, _PYTHON_STEPS // max(1, min(length, 100))))
        for candidate in range(n, stop + 1, 2):
            if end := closes(q, d, candidate, length, odd):
                found.add((candidate, *end))
        return stop, 0
    from solverkit.engines._sweep_simple import scan, table  # noqa: PLC0415 - numba loads only when it pays

    rows = table()
    limit = ((1 << 63) - 1 - abs(d)) // q
    count, after, _ = scan(q, d, n, last, length, odd, limit, _WORK, rows)
    handed = 0
    for candidate, k, x in rows[:count].tolist():
        if k:
            found.add((candidate, k, x))
        else:
            handed += 1
            if end := closes(q, d, candidate, length, odd):
                found.add((candidate, *end))
    return min(last, int(after) - 1), handed


ENGINE = Sweep()
