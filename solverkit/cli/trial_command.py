"""``solverkit trial``: encodings × solvers × cells, timed and checked."""

from __future__ import annotations

import sys
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from solverkit.cli.output import Format, FormatOption, print_json
from solverkit.cli.window_defaults import window_unless
from solverkit.errors import ContradictionError, InputError

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

    from solverkit.trials.cells import BenchmarkCell
    from solverkit.trials.harness import Pair
    from solverkit.trials.scores import Score
    from solverkit.window import Window

__all__ = ["trial"]

_MOST_SECONDS = 1e9
_MOST_CELLS = 10_000


@window_unless("cells")
def trial(
    window: Window | None,
    *,
    encodings: Annotated[str, typer.Option("--encodings", metavar="A,B", help="Encodings; see catalog.")],
    solvers: Annotated[str, typer.Option("--solvers", metavar="C,D", help="Solvers; see catalog.")],
    cells: Annotated[
        Path | None,
        typer.Option("--cells", metavar="FILE.jsonl", help="Cells with q, d, k, x a line, in place of a window."),
    ] = None,
    seconds: Annotated[float, typer.Option("--seconds", metavar="S", min=0, help="Time limit of a run.")] = 60.0,
    repeats: Annotated[int, typer.Option("--repeats", metavar="R", min=1, max=1000, help="Runs of each pair.")] = 1,
    seed: Annotated[int, typer.Option("--seed", metavar="N", help="Decides the order of the runs, nothing else.")] = 1,
    limit_memory: Annotated[
        float, typer.Option("--limit-memory", metavar="GiB", min=0, help="Memory that a run may use.")
    ] = 8.0,
    baseline: Annotated[
        str | None,
        typer.Option("--baseline", metavar="A@C", help="Pair that ratios compare with (default: the first)."),
    ] = None,
    to: Annotated[
        Path | None,
        typer.Option("--to", metavar="FILE.jsonl", help="One result a line; continued when it is there."),
    ] = None,
    format: FormatOption = Format.TEXT,  # noqa: A002 - the option's own name
) -> int:
    """Time encodings with solvers on the live cells of a window or on the cells of a file, and check every answer."""
    from solverkit.trials.harness import Limits, matched, order, perform  # noqa: PLC0415 - loads solver libraries
    from solverkit.trials.results import ResultFile  # noqa: PLC0415

    for option, value in (("--seconds", seconds), ("--limit-memory", limit_memory)):
        if not 0 < value < _MOST_SECONDS:
            raise InputError(option, value, f"a number above 0 and below {_MOST_SECONDS:g}")
    pairs, skipped = matched(_names(encodings, "--encodings"), _names(solvers, "--solvers"))
    base = _baseline(baseline, pairs)
    chosen = _cells(window, cells)
    runs = list(order(chosen, pairs, repeats, seed))
    shouted: list[str] = []

    def shout(text: str) -> None:
        shouted.append(text)
        print(f"solverkit: DISAGREEMENT: {text}", file=sys.stderr, flush=True)

    try:
        with _progress(len(runs)) as advance:
            records = perform(
                runs, Limits(seconds, round(limit_memory * 2**30)), seed, ResultFile(to), shout=shout, advance=advance
            )
    except KeyboardInterrupt:
        kept = f"what is done is in {to}, the same command continues it" if to else "nothing is kept without --to"
        print(f"solverkit: interrupted; {kept}", file=sys.stderr)
        return 3
    document = _document(records, base, chosen, skipped, seed, shouted)
    if format is Format.JSON:
        print_json(document)
    else:
        from solverkit.cli.trial_tables import print_trial  # noqa: PLC0415

        print_trial(document, to)
    return ContradictionError.exit_status if shouted else 0


def _names(text: str, option: str) -> list[str]:
    names = [name.strip() for name in text.split(",")]
    if not all(names):
        raise InputError(option, text, "names with commas between them; see catalog")
    return names


def _baseline(text: str | None, pairs: Sequence[Pair]) -> Pair:
    if text is None:
        return pairs[0]
    for pair in pairs:
        if pair.name == text:
            return pair
    raise InputError("--baseline", text, "one of " + ", ".join(pair.name for pair in pairs))


def _cells(window: Window | None, path: Path | None) -> tuple[BenchmarkCell, ...]:
    """Return the cells of the file, or the live ones of the window, reduced and each once."""
    from solverkit.trials.cells import BenchmarkCell, read_cells  # noqa: PLC0415

    if path is not None:
        if window is not None:
            raise InputError("--cells", str(path), "either this or a window")
        return tuple(dict.fromkeys(read_cells(path)))
    assert window is not None
    from solverkit.settle.triage import triage  # noqa: PLC0415

    if window.shape is not None:
        raise InputError("shape", "side conditions", "none; a trial lists whole cells")
    examined = triage(window)
    found = {live.reduction.cell: live.reduction.cell for live in examined.cells}
    count = len(found) + sum(region.count for region in examined.regions)
    if not 1 <= count <= _MOST_CELLS or examined.regions:
        raise InputError("the window", f"{count} live cells", f"1 to {_MOST_CELLS} live cells")
    return tuple(BenchmarkCell(cell) for cell in found)


@contextmanager
def _progress(count: int) -> Iterator[Callable[[], None]]:
    """Show how far the trial is, on a terminal; else show nothing."""
    if not sys.stderr.isatty():
        yield lambda: None
        return
    from rich.console import Console  # noqa: PLC0415
    from rich.progress import Progress  # noqa: PLC0415

    with Progress(console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("runs", total=count)
        yield lambda: bar.advance(task)


def _document(
    records: list[dict[str, Any]],
    base: Pair,
    chosen: Sequence[BenchmarkCell],
    skipped: Sequence[tuple[Pair, str]],
    seed: int,
    shouted: Sequence[str],
) -> dict[str, Any]:
    from solverkit.trials.scores import scores  # noqa: PLC0415

    def told(which: list[dict[str, Any]]) -> list[dict[str, Any]]:
        found: tuple[Score, ...] = scores(which, (base.encoding, base.solver))
        return [score.table() for score in sorted(found, key=lambda s: (s.encoding, s.solver))]

    grades = list(dict.fromkeys(cell.grade for cell in chosen if cell.grade))
    return {
        "schema": 1,
        "cells": len(chosen),
        "runs": len(records),
        "limit_s": records[0]["limit_s"],
        "seed": seed,
        "baseline": base.name,
        "pairs": told(records),
        "grades": {grade: told([r for r in records if r.get("grade") == grade]) for grade in grades},
        "skipped": [{"encoding": p.encoding, "solver": p.solver, "reason": reason} for p, reason in skipped],
        "unfinished": [
            {key: r[key] for key in ("q", "d", "k", "x", "encoding", "solver", "repeat", "status", "reason")}
            for r in records
            if r["status"] != "complete"
        ],
        "unchecked": len({(r["q"], r["d"], r["k"], r["x"]) for r in records if not r.get("checked")}),
        "disagreements": list(shouted),
    }
