"""Tables of a trial."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from rich import box
from rich.console import Console
from rich.markup import escape
from rich.table import Table

if TYPE_CHECKING:
    from pathlib import Path

__all__ = ["print_trial"]


def print_trial(document: dict[str, Any], path: Path | None) -> None:
    """Print the scores, one table for all cells and one for each grade, then what was left out and what went wrong."""
    console = Console(highlight=False)
    if not console.is_terminal:
        console = Console(highlight=False, width=200)
    console.print(
        f"{document['cells']} cells, {document['runs']} runs, {document['limit_s']:g} s each at most; "
        f"ratios to {escape(document['baseline'])}"
    )
    console.print(_scores(document["pairs"]))
    if len(document["grades"]) > 1:
        for grade, scores in document["grades"].items():
            console.print(escape(f"{grade}:"))
            console.print(_scores(scores))
    if any(score["bounded_cells"] for score in document["pairs"]):
        console.print("≈: some runs of these cells did not complete and count as the limit, so the ratio is a bound.")
    for entry in document["skipped"]:
        console.print(f"skipped: {escape(entry['encoding'])}@{escape(entry['solver'])}: {escape(entry['reason'])}")
    for entry in [e for e in document["unfinished"] if e["status"] != "limit"][:8]:
        name = f"{entry['encoding']}@{entry['solver']} on ({entry['q']}, {entry['d']}, {entry['k']}, {entry['x']})"
        console.print(escape(f"{entry['status']}: {name}: {entry['reason']}"))
    if document["unchecked"]:
        console.print(f"{document['unchecked']} cells have no answer of an arithmetic engine to compare with.")
    if document["disagreements"]:
        count = len(document["disagreements"])
        console.print(f"[bold red]{count} disagreement{'s' if count > 1 else ''}; please report this.[/bold red]")
    elif document["unchecked"] < document["cells"]:
        console.print("All answers agree with the arithmetic engines.")
    if path is not None:
        console.print(f"Results: {escape(str(path))}")


def _scores(scores: list[dict[str, Any]]) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    table.add_column("encoding", no_wrap=True)
    table.add_column("solver", no_wrap=True)
    for name in ("solved", "cells", "PAR-2 s", "encode s", "solve s", "variables", "clauses, rows", "ratio"):
        table.add_column(name, justify="right", no_wrap=True)
    for score in sorted(scores, key=lambda s: (-s["solved"], s["par2_s"])):
        sizes = score["sizes"]
        rows = next((sizes[key] for key in ("clauses", "rows", "constraints") if key in sizes), None)
        ratio = "" if score["ratio"] is None else f"{'≈' if score['bounded_cells'] else ''}{score['ratio']:.3g}"
        table.add_row(
            escape(score["encoding"]),
            escape(score["solver"]),
            f"{score['solved']}/{score['runs']}",
            f"{score['cells_solved']}/{score['cells']}",
            f"{score['par2_s']:.3g}",
            *("" if score[key] is None else f"{score[key]:.3g}" for key in ("encode_s", "solve_s")),
            *("" if value is None else f"{value:,.0f}" for value in (sizes.get("variables"), rows)),
            ratio,
        )
    return table
