"""The JSON documents of triage and settle. Integers beyond 2^53 are texts of decimal digits, in every field."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from itertools import islice
from typing import TYPE_CHECKING, Any

from solverkit.exact.bounds import EXACT_LENGTH, balanced_bound, product_bound
from solverkit.exact.cone import ThinCone, tallest
from solverkit.exact.reduction import reduced
from solverkit.findings import CellFinding, Cycle, Evidence, Verdict
from solverkit.numerals import json_integer
from solverkit.settle.triage import LiveCell, Triage
from solverkit.window import Cell
from solverkit.window_file import window_table

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from solverkit.settle.regions import RegionFinding
    from solverkit.settle.run import Settlement

__all__ = ["SCHEMA", "cycle_entry", "listed_cells", "settle_document", "triage_document"]

SCHEMA = 1
#: Python turns at most 4,300 digits into text; longer counts are left out.
_MOST_BITS = 13_000


def _count(number: int | None) -> int | str | None:
    return None if number is None or number.bit_length() > _MOST_BITS else json_integer(number)


def listed_cells(examined: Triage, most: int) -> list[LiveCell]:
    """Return the first ``most`` live cells by length, odd count, then the order of the window's maps."""

    def from_regions() -> Iterator[LiveCell]:
        for region in examined.regions:
            for cell in islice(region.cells(examined.window), most):
                exact = cell.length <= EXACT_LENGTH
                balanced = balanced_bound(cell.positive()) if exact else None
                yield LiveCell(cell, reduced(cell), product_bound(cell.positive()), balanced)

    cells = [*examined.cells, *from_regions()]
    cells.sort(key=lambda live: (live.cell.length, live.cell.odd))
    return cells[:most]


def _cell_keys(cell: Cell) -> dict[str, Any]:
    return {
        "multiplier": json_integer(cell.multiplier),
        "offset": json_integer(cell.offset),
        "sign": cell.sign.word,
        "length": json_integer(cell.length),
        "odd": json_integer(cell.odd),
    }


def triage_document(
    examined: Triage, most: int, choose: Callable[[list[LiveCell]], Mapping[Cell, tuple[str, float]]]
) -> dict[str, Any]:
    """Return the JSON document of a triage.

    Args:
        examined: the triage.
        most: list at most so many cells.
        choose: gives for each cell the method that would decide it and the estimated seconds.
    """
    shown = listed_cells(examined, most)
    methods = choose(shown)
    cells = []
    for live in shown:
        told = live.forecast()
        method, seconds = methods.get(live.cell, (None, None))
        cells.append(
            _cell_keys(live.cell)
            | {
                "total_steps": json_integer(live.cell.length + live.cell.odd),
                "bound": json_integer(live.bound),
                "balanced": None if live.balanced is None else json_integer(live.balanced),
                "reduced_offset": json_integer(live.reduction.cell.offset),
                "words": _count(told.words),
                "expected": float(told.expected),
                "chance": float(told.chance),
                "method": method,
                "estimate_s": seconds,
            }
        )
    first = examined.first_live()
    return {
        "schema": SCHEMA,
        "window": window_table(examined.window),
        "criterion": examined.criterion.value,
        "total": json_integer(examined.total),
        "live": json_integer(examined.live),
        "first_live": None if first is None else {"length": json_integer(first[0]), "odd": json_integer(first[1])},
        "excluded": {reason: json_integer(count) for reason, count in examined.excluded.items()},
        "cells": cells,
        "certificate": {"kind": "lattice count", "sides": list(_sides(examined))},
    }


def _sides(examined: Triage) -> Iterator[dict[str, Any]]:
    window = examined.window
    for side in islice(window.sides(), 1000):
        cone = ThinCone(side.positive_map, window.bound, window.lengths, window.odd_range)
        top = tallest(side.positive_map, cone.lengths, cone.odd)
        yield {
            "multiplier": json_integer(side.map.multiplier),
            "offset": json_integer(side.map.offset),
            "sign": side.sign.word,
            "cells": json_integer(cone.total),
            "sign_fits": json_integer(cone.sign_fits),
            "under_product_bound": json_integer(cone.count()),
            "largest_bound": None
            if top is None
            else dict(zip(("bound", "length", "odd"), map(json_integer, top), strict=True)),
        }


def cycle_entry(cycle: Cycle) -> dict[str, Any]:
    """Return the JSON entry of one cycle."""
    return {
        "multiplier": json_integer(cycle.multiplier),
        "offset": json_integer(cycle.offset),
        "least": json_integer(cycle.least),
        "largest": json_integer(cycle.largest),
        "length": cycle.length,
        "odd": cycle.odd,
        "total_steps": cycle.length + cycle.odd,
        "word": cycle.word,
        "gcd": json_integer(cycle.gcd),
        "circuits": cycle.circuits,
    }


def settle_document(settlement: Settlement, dossier: str, *, all_cells: bool = False) -> dict[str, Any]:
    """Return the JSON document of a settlement.

    Args:
        settlement: the findings.
        dossier: the folder, as given.
        all_cells: list the excluded cells of a finite window too.
    """
    examined = settlement.triage
    window = settlement.window
    bounds = {live.cell: live for live in examined.cells}
    cells = [_finding_entry(finding, bounds[finding.cell]) for finding in settlement.findings]
    if all_cells:
        cells += _excluded_entries(examined)
        order = {
            side: place
            for place, side in enumerate((s.map.multiplier, s.map.offset, s.sign.word) for s in window.sides())
        }
        cells.sort(key=lambda e: (order[int(e["multiplier"]), int(e["offset"]), e["sign"]], e["length"], e["odd"]))
    cells += [entry for finding in settlement.regions for entry in _region_cells(finding)]
    assumption = window.assumption
    return {
        "schema": SCHEMA,
        "window": window_table(window),
        "complete": settlement.complete,
        "cells": cells,
        "cycles": [cycle_entry(cycle) for cycle in settlement.cycles],
        "regions": [_region_entry(finding) for finding in settlement.regions],
        "excluded": {reason: json_integer(count) for reason, count in examined.excluded.items()},
        "total": json_integer(examined.total),
        "live": json_integer(examined.live),
        "assumptions": []
        if assumption is None
        else [{"no_cycle_below": json_integer(assumption.no_cycle_below), "source": assumption.source}],
        "dossier": dossier,
        "seconds": round(settlement.seconds, 3),
    }


def _finding_entry(finding: CellFinding, live: LiveCell) -> dict[str, Any]:
    entry = _cell_keys(finding.cell) | {
        "bound": json_integer(live.bound),
        "status": finding.verdict.value,
        "evidence": None if finding.evidence is None else finding.evidence.word,
        "methods": list(finding.methods),
        "seconds": round(finding.seconds, 6),
        "cycles": len(finding.cycles) if finding.total is None else json_integer(finding.total),
    }
    if finding.verdict is Verdict.OPEN:
        entry["reason"] = finding.reason
    if finding.contradiction:
        entry["contradiction"] = True
    if finding.total is not None:
        entry["sample"] = len(finding.cycles)
    return entry


def _region_cells(finding: RegionFinding) -> Iterator[dict[str, Any]]:
    """Yield the entries of the cells of a region that hold a cycle."""
    by_cell: dict[tuple[int, int], int] = Counter((cycle.length, cycle.odd) for cycle in finding.cycles)
    side = finding.region.side
    for (length, odd), count in sorted(by_cell.items()):
        cell = Cell(side.map.multiplier, side.map.offset, length, odd, sign=side.sign)
        yield _cell_keys(cell) | {
            "bound": json_integer(product_bound(cell.positive())),
            "status": finding.verdict.value,
            "evidence": None if finding.evidence is None else finding.evidence.word,
            "methods": ["sweep"],
            "seconds": 0.0,
            "cycles": count,
        }


def _region_entry(finding: RegionFinding) -> dict[str, Any]:
    side = finding.region.side
    return {
        "multiplier": json_integer(side.map.multiplier),
        "offset": json_integer(side.map.offset),
        "sign": side.sign.word,
        "live": json_integer(finding.region.count),
        "bound": json_integer(finding.bound),
        "swept_to": json_integer(finding.swept_to),
        "status": finding.verdict.value,
        "evidence": None if finding.evidence is None else finding.evidence.word,
        "methods": ["sweep"],
        "seconds": round(finding.seconds, 3),
        **({"reason": finding.reason} if finding.reason else {}),
    }


def _excluded_entries(examined: Triage) -> Iterator[dict[str, Any]]:
    """Yield the entries of cells that arithmetic excluded, with the bound that did it."""
    window = examined.window
    live = {live.cell for live in examined.cells}
    for side in window.sides():
        for length in window.lengths:
            for odd in range(window.odd_range.low, min(window.odd_range.high, length) + 1):
                cell = window.cell(side, length, odd)
                if cell in live:
                    continue
                bound = product_bound(cell.positive())
                if (cell.determinant > 0) != (cell.positive().offset > 0):
                    reason = "sign"
                elif odd == length > 1:
                    reason = "words"
                elif bound <= cell.above or not window.primitive:
                    reason = "bound"
                else:
                    reason = "imprimitive" if abs(reduced(cell).factor) > 1 else "bound"
                yield _cell_keys(cell) | {
                    "bound": json_integer(bound),
                    "status": Verdict.NONE.value,
                    "evidence": Evidence.PROVED.word,
                    "methods": [reason],
                    "seconds": 0.0,
                    "cycles": 0,
                }
