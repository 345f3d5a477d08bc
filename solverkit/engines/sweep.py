"""Sweep: every candidate for a least element is iterated until it drops, returns, or can no longer return.

Orbit side of the cycle equation. All cells of a batch belong to one map of positive elements; one pass over the odd
n with B < n ≤ U' (U' the largest balanced bound of the cells) serves all their lengths and odd counts.
"""

from __future__ import annotations

from functools import lru_cache
from time import perf_counter, process_time
from typing import TYPE_CHECKING

from solverkit.engines._sweep_cost import sweep_seconds
from solverkit.engines._sweep_ranges import Profile, cell_bound, profile
from solverkit.engines._sweep_search import Search
from solverkit.methods import Budget, Family, Hit, Piece, PieceResult
from solverkit.words import lyndon_count

if TYPE_CHECKING:
    from collections.abc import Sequence

    from solverkit.window import Cell

__all__ = ["ENGINE", "Sweep"]

_LONGEST = 1e7  # seconds on one core beyond which a cell is refused
_FEW_CELLS, _LONGEST_COUNTED = 64, 5000
_CYCLE_SECONDS = 2e-5


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
            f"about 10^{_tens(_profile((cell,)).candidates)} candidates up to about 10^{_tens(cell_bound(cell))} "
            f"would take about {seconds:.1e} s on one core; at most {_LONGEST:.0e} s are allowed"
        )

    def estimate(self, cells: Sequence[Cell]) -> float:
        """Return seconds on one core for one pass over the candidates of all ``cells``."""
        if not cells:
            return 0.0
        listed = tuple(cells)
        seconds = sweep_seconds(listed[0].multiplier, listed[0].offset, _profile(listed))
        if len(listed) <= _FEW_CELLS:
            seconds += _CYCLE_SECONDS * sum(_expected(cell) for cell in listed)
        return seconds

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
        """Search one part; when the time is over, ``swept_to`` in the statistics tells how far it is complete.

        With four numbers of detail, (first, last, k, x), every cycle of at most k steps, x of them odd, with its least
        element in the part is a hit, whatever its cell; ``piece.cells`` then only names the map and the bound.
        """
        started, worked = perf_counter(), process_time()
        first, last, *most = piece.detail
        here = piece.cells[0]
        if most:
            length, odd = most
            search = Search(here.multiplier, here.offset, here.above, lambda _: (length, odd), lambda _: ())
        else:
            shape = _profile(piece.cells)
            search = Search(here.multiplier, here.offset, shape.low, shape.limits, shape.reaching)
        swept, reason = first - 1, ""
        for swept in search.stretch(first, last):
            if swept < last and budget.seconds is not None and perf_counter() - started > budget.seconds:
                reason = f"the budget of {budget.seconds:g} s ended at candidate {swept}"
                break
        hits = sorted(Hit(k, x, n) for n, k, x in search.found if _asked(piece, n, k, x))
        return PieceResult(
            piece,
            tuple(hits),
            complete=not reason,
            reason=reason,
            statistics={
                "first": str(first),
                "last": str(last),
                "swept_to": str(swept),
                "candidates": (swept + 1) // 2 - first // 2,
                "handed_over": 0,
                **search.counters,
            },
            seconds=process_time() - worked,
        )


def _asked(piece: Piece, n: int, k: int, x: int) -> bool:
    if len(piece.detail) > 2:
        return n > piece.cells[0].above and k <= piece.detail[2] and x <= piece.detail[3]
    return any((cell.length, cell.odd) == (k, x) and n > cell.above for cell in piece.cells)


def _tens(number: int) -> int:
    """Return about log10 of a number that may be too large for a float."""
    return number.bit_length() * 30103 // 100000


@lru_cache(maxsize=1 << 16)
def _expected(cell: Cell) -> float:
    """Return about how many cycles the cell has; each costs an exact look."""
    if cell.length > _LONGEST_COUNTED:
        return 0.0
    words, size = lyndon_count(cell.length, cell.odd), abs(cell.determinant)
    return min(1e18, words * abs(cell.offset) // size) if words * abs(cell.offset) > size else 0.0


ENGINE = Sweep()
