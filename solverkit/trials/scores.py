"""Scores of a trial, pair by pair: solved runs, PAR-2, sizes, encode and solve time apart, ratios, cactus data.

PAR-2 is the mean time of a run with twice the limit in place of the time of a run that did not complete (common in
solver competitions). A ratio is time over the baseline's time on the same cell, as a geometric mean over the cells
that either of the two completed; a run that did not complete counts there as its limit, so the ratio is then a bound,
and how many cells that concerns is told. Times below a millisecond count as a millisecond in ratios.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import asdict, dataclass
from itertools import accumulate
from math import exp, log
from statistics import fmean, median
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

__all__ = ["Score", "geometric_mean", "run_seconds", "scores"]

_LEAST_SECONDS = 0.001
_SIZES = ("variables", "clauses", "rows", "constraints")

Record = dict[str, Any]


@dataclass(frozen=True, slots=True)
class Score:
    """One pair's score over the cells of a trial or of one grade.

    Args:
        encoding: name.
        solver: name.
        runs: number of runs.
        solved: runs that completed.
        cells: number of cells.
        cells_solved: cells of which every run completed.
        par2_s: PAR-2 in seconds.
        encode_s: mean seconds of encoding over the completed runs, None without any.
        solve_s: mean seconds of solving, likewise.
        sizes: median over the cells of each size of the formula, as far as some run told it.
        ratio: geometric mean of time over the baseline's time; None without a common cell.
        ratio_cells: number of cells in ``ratio``.
        bounded_cells: how many of them have a run that did not complete.
        cactus: for the completed runs in order of solve time, the sum of solve times so far, in seconds.
    """

    encoding: str
    solver: str
    runs: int
    solved: int
    cells: int
    cells_solved: int
    par2_s: float
    encode_s: float | None
    solve_s: float | None
    sizes: Mapping[str, float]
    ratio: float | None
    ratio_cells: int
    bounded_cells: int
    cactus: tuple[float, ...]

    def table(self) -> dict[str, Any]:
        """Return the score as plain values."""
        return asdict(self) | {"sizes": dict(self.sizes), "cactus": list(self.cactus)}


def geometric_mean(values: Sequence[float]) -> float:
    """Return the geometric mean of positive numbers.

    >>> geometric_mean([1, 100])
    10.0
    """
    return round(exp(fmean(map(log, values))), 12)


def run_seconds(record: Record, penalty: float = 1.0) -> float:
    """Return encode and solve time of a completed run, ``penalty`` times the limit of any other."""
    if record["status"] != "complete":
        return penalty * float(record["limit_s"])
    return float(record["encode_s"]) + float(record["solve_s"])


def scores(records: Iterable[Record], baseline: tuple[str, str]) -> tuple[Score, ...]:
    """Return the score of each pair, in the order in which the pairs first come.

    Args:
        records: of runs under the same limits.
        baseline: encoding and solver that ratios compare with.
    """
    runs: dict[tuple[str, str], dict[tuple[Any, ...], list[Record]]] = {}
    sizes: dict[tuple[Any, ...], dict[str, int]] = {}
    for record in records:
        cell = tuple(record[key] for key in ("q", "d", "k", "x", "above"))
        pair = record["encoding"], record["solver"]
        runs.setdefault(pair, defaultdict(list))[cell].append(record)
        told = {key: record[key] for key in _SIZES if key in record}
        if told:
            sizes[record["encoding"], cell] = told
    base = runs.get(baseline, {})
    return tuple(_score(pair, cells, base, sizes) for pair, cells in runs.items())


def _score(
    pair: tuple[str, str],
    cells: Mapping[tuple[Any, ...], list[Record]],
    base: Mapping[tuple[Any, ...], list[Record]],
    sizes: Mapping[tuple[Any, ...], dict[str, int]],
) -> Score:
    runs = [record for group in cells.values() for record in group]
    done = [record for record in runs if record["status"] == "complete"]
    ratios, bounded = [], 0
    for cell, group in cells.items():
        both = [*group, *base.get(cell, ())]
        if cell in base and any(record["status"] == "complete" for record in both):
            ratios.append(_typical(group) / _typical(base[cell]))
            bounded += any(record["status"] != "complete" for record in both)
    known = [sizes[pair[0], cell] for cell in cells if (pair[0], cell) in sizes]
    return Score(
        *pair,
        runs=len(runs),
        solved=len(done),
        cells=len(cells),
        cells_solved=sum(all(r["status"] == "complete" for r in group) for group in cells.values()),
        par2_s=fmean(run_seconds(record, penalty=2) for record in runs),
        encode_s=fmean(record["encode_s"] for record in done) if done else None,
        solve_s=fmean(record["solve_s"] for record in done) if done else None,
        sizes={key: median(told[key] for told in known if key in told) for key in _SIZES
               if any(key in told for told in known)},
        ratio=geometric_mean(ratios) if ratios else None,
        ratio_cells=len(ratios),
        bounded_cells=bounded,
        cactus=tuple(round(total, 6) for total in accumulate(sorted(record["solve_s"] for record in done))),
    )  # fmt: skip


def _typical(records: Sequence[Record]) -> float:
    return geometric_mean([max(_LEAST_SECONDS, run_seconds(record)) for record in records])
