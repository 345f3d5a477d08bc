"""What deciding the cells of a triage would cost, and by which method."""

from __future__ import annotations

from typing import TYPE_CHECKING

from solverkit.findings import Evidence
from solverkit.settle.choice import method_named, plan

if TYPE_CHECKING:
    from solverkit.settle.triage import LiveCell
    from solverkit.window import Cell

__all__ = ["methods_for"]


def methods_for(cells: list[LiveCell]) -> dict[Cell, tuple[str, float]]:
    """Return cell -> (method, estimated seconds on one core for the cell alone), without cells that no method takes.

    Args:
        cells: live cells of any maps; cells with the same reduced cell share one decision.
    """
    small = {live.cell: live.reduction.cell for live in cells}
    chosen = plan(sorted(set(small.values())), {}, frozenset(), evidence=Evidence.COMPUTED)
    by_small = {cell: batch.method for batch in chosen.batches for cell in batch.cells}
    return {
        cell: (by_small[reduced], float(f"{method_named(by_small[reduced]).estimate((reduced,)):.3g}"))
        for cell, reduced in small.items()
        if reduced in by_small
    }
