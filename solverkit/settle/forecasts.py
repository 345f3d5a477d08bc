"""What deciding the cells of a triage would cost, and by which method."""

from __future__ import annotations

from typing import TYPE_CHECKING

from solverkit.findings import Evidence
from solverkit.settle.calibration import calibrated, factors, measure
from solverkit.settle.choice import default_methods, method_named, plan

if TYPE_CHECKING:
    from solverkit.settle.triage import LiveCell
    from solverkit.window import Cell

__all__ = ["methods_for"]

_MEASURE_SECONDS = 1.0


def methods_for(cells: list[LiveCell]) -> dict[Cell, tuple[str, float]]:
    """Return cell -> (method, estimated seconds on one core for the cell alone), without cells that no method takes.

    Args:
        cells: live cells of any maps; cells with the same reduced cell share one decision.
    """
    small = {live.cell: live.reduction.cell for live in cells}
    wanted = sorted(set(small.values()))
    chosen = plan(wanted, {}, frozenset(), evidence=Evidence.COMPUTED)
    if any(batch.seconds > _MEASURE_SECONDS for batch in chosen.batches) and not factors():
        measure(default_methods())
        chosen = plan(wanted, {}, frozenset(), evidence=Evidence.COMPUTED)
    by_small = {cell: batch.method for batch in chosen.batches for cell in batch.cells}
    return {
        cell: (by_small[reduced], float(f"{calibrated(method_named(by_small[reduced]), (reduced,)):.3g}"))
        for cell, reduced in small.items()
        if reduced in by_small
    }
