"""Tables for people."""

from __future__ import annotations

from collections import Counter
from decimal import MIN_EMIN, Decimal, localcontext
from typing import TYPE_CHECKING, Any

from rich import box
from rich.console import Console
from rich.markup import escape
from rich.table import Table

from solverkit.exact.chances import forecast
from solverkit.exact.cone import ThinCone, tallest
from solverkit.findings import Evidence, Verdict
from solverkit.settle.documents import listed_cells
from solverkit.settle.forecasts import methods_for
from solverkit.window import Cell

if TYPE_CHECKING:
    from pathlib import Path

    from solverkit.settle.regions import RegionFinding
    from solverkit.settle.run import Settlement
    from solverkit.settle.triage import LiveCell, Triage
    from solverkit.window import Window

__all__ = ["print_catalog", "print_settlement", "print_triage"]

_REASONS = {
    "sign": "have sign(D) ≠ sign(d), so their elements have the other sign",
    "bound": "have no room for a least element above the bound",
    "words": "have only words that repeat a shorter one",
    "imprimitive": "have only cycles with a factor in common with d",
    "residues": "are emptied by residues or side conditions",
}
_WIDE, _MOST_SHOWN = 28, 40
_MINUS = "\N{MINUS SIGN}"


def _console() -> Console:
    console = Console(highlight=False)
    # A table cut to a guessed width is useless in a file or a pipe.
    return console if console.is_terminal else Console(highlight=False, width=200)


def _number(value: int) -> str:
    text = f"{value:,}".replace(",", "\N{NARROW NO-BREAK SPACE}").replace("-", _MINUS)
    return text if len(text) <= _MOST_SHOWN else f"≈{_MINUS if value < 0 else ''}10^{len(str(abs(value))) - 1}"


def _share(value: Decimal) -> str:
    if value == 0:
        return "0"
    if value >= Decimal("0.0001"):
        return f"{value * 100:.3g} %" if value < Decimal("0.9995") else "100 %"
    return f"10^{value.adjusted()} " if value.adjusted() < -300 else f"{float(value) * 100:.0e} %"


def _amount(value: Decimal) -> str:
    if value == 0:
        return "0"
    if Decimal("0.001") <= value < Decimal(100000):
        return f"{value:.3g}" if value < 1000 else f"{value:.0f}"
    return f"10^{value.adjusted()}" if abs(value.adjusted()) > 300 else f"{float(value):.1e}"


def _time(seconds: float) -> str:
    for unit, size in (("d", 86400.0), ("h", 3600.0), ("min", 60.0)):
        if seconds >= 2 * size:
            return f"{seconds / size:.3g} {unit}"
    return f"{seconds:.2g} s" if seconds >= 0.001 else "< 1 ms"


def _word(word: str) -> str:
    return word if len(word) <= _WIDE + 4 else f"{word[: _WIDE - 1]}…{word[-4:]}"


def _table(*columns: str) -> Table:
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    for name in columns:
        left = name.endswith("<")
        table.add_column(name.rstrip("<"), justify="left" if left else "right", no_wrap=True)
    return table


def _window_lines(window: Window) -> list[str]:
    maps = ", ".join(str(each) for each in window.maps[:6]) + (" …" if len(window.maps) > 6 else "")
    count = f" ({len(window.maps)} maps)" if len(window.maps) > 1 else ""
    signs = " and ".join(sign.word for sign in window.signs)
    lines = [window.title] if window.title else []
    lines.append(f"{maps}{count}, {signs} elements, lengths {window.lengths}, odd steps {window.odd or 'any'}")
    bound = f"least element above {_number(window.bound)} in absolute value"
    if window.assumption is not None:
        assumed = f"; assumed: no cycle below {_number(window.assumption.no_cycle_below)} ({window.assumption.source})"
        bound += assumed
    lines.append(bound + (", primitive cycles only" if window.primitive else ""))
    return lines


def _exclusions(examined: Triage, console: Console) -> None:
    console.print(f"Cells in the window: {_number(examined.total)}, of which")
    for reason, count in examined.excluded.items():
        if count:
            console.print(f"  {_number(count):>{_WIDE}}  {_REASONS[reason]}")
    console.print(f"  {_number(examined.live):>{_WIDE}}  are live")


def print_triage(examined: Triage, most: int) -> None:
    """Print a triage: what is excluded and why, then the live cells, likeliest first."""
    console = _console()
    for line in _window_lines(examined.window):
        console.print(escape(line))
    console.print()
    _exclusions(examined, console)
    console.print()
    if not examined.live:
        _print_why_empty(examined, console)
        return
    first = examined.first_live()
    if first is not None:
        console.print(f"First live cell by length: k = {_number(first[0])}, x = {_number(first[1])}.")
    if examined.regions:
        shown = listed_cells(examined, most)
        order = "by length"
    else:
        shown = sorted(examined.cells, key=lambda live: -live.forecast().chance)[:most]
        order = "likeliest first"
    if not shown:
        return
    console.print(f"{_number(len(shown))} of {_number(examined.live)} live cells, {order} "
                  f"({examined.criterion.value} bound):")  # fmt: skip
    console.print(_live_table(examined.window, shown))
    if not examined.regions:
        with localcontext(Emin=MIN_EMIN):
            total = sum((live.forecast().expected for live in examined.cells), Decimal(0))
        console.print(f"Expected number of cycles in the whole window: {_amount(total)}.")
    if len(shown) < examined.live:
        console.print("More with --most N; all of them with --format json.")


def _live_table(window: Window, shown: list[LiveCell]) -> Table:
    table = _table(
        *([] if len(window.maps) == 1 else ["map"]),
        *([] if len(window.signs) == 1 else ["sign<"]),
        "length k", "odd x", "k + x", "U", "U'", "words", "expected", "chance", "method<", "estimate",
    )  # fmt: skip
    methods = methods_for(shown)
    for live in shown:
        told = live.forecast()
        cell = live.cell
        method, seconds = methods.get(cell, ("none fits", None))
        table.add_row(
            *([] if len(window.maps) == 1 else [str(cell.map)]),
            *([] if len(window.signs) == 1 else [cell.sign.word]),
            _number(cell.length),
            _number(cell.odd),
            _number(cell.length + cell.odd),
            _number(live.bound),
            "" if live.balanced is None else _number(live.balanced),
            "" if told.words is None else _number(told.words),
            _amount(told.expected),
            _share(told.chance),
            method,
            "" if seconds is None else _time(seconds),
        )
    return table


def _print_why_empty(examined: Triage, console: Console) -> None:
    window = examined.window
    console.print("[bold]No live cell: arithmetic alone shows that the window holds no cycle.[/bold]")
    best = []
    for side in window.sides():
        cone = ThinCone(side.positive_map, window.bound, window.lengths, window.odd_range)
        top = tallest(side.positive_map, cone.lengths, cone.odd)
        if top is not None:
            best.append((*top, side))
    if best:
        bound, length, odd, side = max(best, key=lambda entry: entry[0])
        console.print(
            "Every least element n satisfies 2^k·n^x ≤ (q·n + d)^x (≥ where d and n have opposite signs).\n"
            f"The largest n that a cell of the right sign allows is U = {_number(bound)}, in the cell "
            f"k = {_number(length)}, x = {_number(odd)} of {side.map} ({side.sign.word} elements);\n"
            f"the window asks for more than {_number(window.bound)}."
        )


def print_settlement(settlement: Settlement, folder: Path) -> None:
    """Print the findings: verdict in words, cycles, cells by verdict and evidence, what is open, what to do next."""
    console = _console()
    for line in _window_lines(settlement.window):
        console.print(escape(line))
    console.print()
    cycles = settlement.cycles
    open_cells = settlement.open_cells
    counted = [f for f in settlement.findings if f.total is not None]
    number = len(cycles) + sum((f.total or 0) - len(f.cycles) for f in counted)
    what = "no cycle" if not number else f"{number:,} cycle{'s' if number != 1 else ''}"
    open_regions = [r for r in settlement.regions if r.verdict is Verdict.OPEN]
    if settlement.contradictions:
        console.print(
            "[bold red]Two methods contradict each other.[/bold red] Both results are kept; please report this."
        )
    elif not settlement.complete:
        count = len(open_cells) + sum(r.region.count for r in open_regions)
        console.print(f"[bold yellow]Not settled:[/bold yellow] {what} so far, {_number(count)} cells are open.")
    else:
        console.print(f"[bold green]Settled:[/bold green] the window holds {what}.")
    if cycles:
        _print_cycles(settlement, console)
    _exclusions(settlement.triage, console)
    _print_evidence(settlement, console)
    for region in settlement.regions:
        _print_region(region, console)
    for finding in (settlement.contradictions or open_cells)[:12]:
        cell = finding.cell
        console.print(
            f"  {finding.verdict.value}: {cell.map} {cell.sign.word} k = {cell.length}, x = {cell.odd}: "
            f"{escape(finding.reason)}"
        )
    if len(open_cells) > 12:
        console.print(f"  … and {len(open_cells) - 12} more; --format json lists all")
    console.print(
        f"\nDossier: {escape(str(folder))} ({settlement.seconds:.1f} s; the same command returns at once, or goes on)."
    )
    if not settlement.complete and not settlement.contradictions:
        console.print("To go on: the same command with a larger --budget or --limit-memory, or other --methods.")


def _print_cycles(settlement: Settlement, console: Console) -> None:
    table = _table(
        "map",
        "least",
        "largest",
        "length k",
        "odd x",
        "k + x",
        "circuits",
        "gcd",
        "chance of cell",
        "evidence<",
        "word<",
    )
    shown = 0
    by_region = {cycle: region.evidence for region in settlement.regions for cycle in region.cycles}
    findings = {cycle: finding for finding in settlement.findings for cycle in finding.cycles}
    for cycle in settlement.cycles[:200]:
        finding = findings.get(cycle)
        level = finding.evidence if finding is not None else by_region[cycle]
        evidence = level.word if level is not None else "open"
        table.add_row(
            str(cycle.map),
            _number(cycle.least),
            _number(cycle.largest),
            str(cycle.length),
            str(cycle.odd),
            str(cycle.length + cycle.odd),
            str(cycle.circuits),
            str(cycle.gcd),
            _share(forecast(Cell(cycle.multiplier, cycle.offset, cycle.length, cycle.odd)).chance),
            evidence,
            _word(cycle.word),
        )
        shown += 1
    console.print(table)
    if shown < len(settlement.cycles):
        console.print(f"… and {len(settlement.cycles) - shown} more; --format json lists all\n")


def _print_region(finding: RegionFinding, console: Console) -> None:
    side, count = finding.region.side, _number(finding.region.count)
    name = f"{side.map}, {side.sign.word} elements, {count} live cells together"
    if finding.verdict is Verdict.OPEN:
        console.print(f"{name}: [yellow]open[/yellow], {escape(finding.reason)}; swept to {_number(finding.swept_to)}.")
    else:
        console.print(
            f"{name}: {finding.verdict.value}, computed by one sweep of all least elements up to U = "
            f"{_number(finding.bound)}, which no cell exceeds."
        )


def _print_evidence(settlement: Settlement, console: Console) -> None:
    counts = Counter((f.verdict, f.evidence, f.methods) for f in settlement.findings)
    if not counts:
        return
    table = _table("cells", "verdict<", "evidence<", "methods<")
    for (verdict, evidence, methods), count in sorted(counts.items(), key=lambda item: (-item[1], item[0][2])):
        name = evidence.word if isinstance(evidence, Evidence) else ""
        colour = {Verdict.OPEN: "yellow", Verdict.FOUND: "bold"}.get(verdict, "")
        table.add_row(str(count), verdict.value, name, ", ".join(methods), style=colour)
    console.print(table)


def print_catalog(document: dict[str, Any]) -> None:
    """Print the parts of this installation, a table a room."""
    console = _console()
    libraries = ", ".join(f"{name} {number or 'missing'}" for name, number in document["libraries"].items())
    console.print(f"solverkit {document['version']}, Python {document['python']}, {libraries}")
    for room in ("engines", "encodings", "solvers"):
        entries = document[room]
        keys = [key for key in entries[0] if key not in ("name", "file")] if entries else []
        table = _table(f"{room[:-1]}<", *(f"{key}<" for key in keys), "file<")
        for entry in entries:
            if "broken" in entry:
                table.add_row(
                    entry["name"], f"broken: {entry['broken']}", *[""] * (len(keys) - 1), entry["file"], style="red"
                )
            else:
                table.add_row(entry["name"], *(_cell(entry[key]) for key in keys), entry["file"])
        console.print(table)


def _cell(value: object) -> str:
    return {True: "yes", False: "no"}[value] if isinstance(value, bool) else str(value)
