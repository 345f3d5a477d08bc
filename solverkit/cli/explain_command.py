"""``solverkit explain``: why a cell is empty, which conditions are needed, in words."""

from __future__ import annotations

import sys
from typing import TYPE_CHECKING, Annotated, Any

import typer

from solverkit.cli.one_cell import (
    CellOption,
    RawOption,
    cell_entry,
    cell_lengths,
    reduced_unless,
    stated_cell,
    tell_cell,
)
from solverkit.cli.output import Format, FormatOption, print_json
from solverkit.cli.window_defaults import lengths_from
from solverkit.cli.window_options import takes_window
from solverkit.errors import CapacityError, InputError
from solverkit.numerals import json_integer

if TYPE_CHECKING:
    from solverkit.explain.explanation import Explained, Explanation
    from solverkit.window import Cell, Window

__all__ = ["explain"]

_MOST_SECONDS = 1e9
_MOST_CLAUSES = 5_000_000
_MOST_LENGTH = 1_000


@lengths_from("cell", cell_lengths)
@takes_window
def explain(
    window: Window,
    *,
    cell: CellOption,
    all_cores: Annotated[
        bool, typer.Option("--all-cores", help="All minimal cores, not only the smallest ones.")
    ] = False,
    seconds: Annotated[float, typer.Option("--seconds", metavar="S", min=0, help="Time limit.")] = 60.0,
    raw: RawOption = False,
    format: FormatOption = Format.TEXT,  # noqa: A002 - the option's own name
) -> int:
    """Why a cell is empty: minimal sets of conditions that exclude it, in words; or what it holds."""
    from solverkit.explain.arithmetic import arithmetic_exclusion  # noqa: PLC0415 - parts load only when used
    from solverkit.explain.explanation import explained  # noqa: PLC0415
    from solverkit.explain.words import sentences  # noqa: PLC0415
    from solverkit.findings import Verdict  # noqa: PLC0415

    if not 0 < seconds < _MOST_SECONDS:
        raise InputError("--seconds", seconds, f"a number above 0 and below {_MOST_SECONDS:g}")
    stated = stated_cell(window, cell, "explain")
    whole = stated.positive()
    small, factor = reduced_unless(raw, stated)
    # What excludes the cell as it was asked for is said of that cell, not of the reduced one.
    first = arithmetic_exclusion(whole)
    if first is not None and (not all_cores or raw):
        small, factor = whole, int(stated.sign)
    if first is None or all_cores:
        _check_size(small)
    try:
        explanation = explained(small, seconds, all_cores=all_cores)
    except KeyboardInterrupt:
        print("solverkit: interrupted; nothing is kept", file=sys.stderr)
        return CapacityError.exit_status
    words = sentences(explanation)
    document = {
        "schema": 1,
        "cell": cell_entry(stated),
        "explained": cell_entry(small),
        "factor": json_integer(factor),
        "status": explanation.status.value,
        "complete": explanation.complete,
        "arithmetic": None if explanation.exclusion is None else explanation.exclusion.reason,
        "cores": [list(entry.core.groups) for entry in explanation.cores],
        "words": words,
        "reach": _reach(explanation),
        "cycles": _cycles(explanation),
    }
    if format is Format.JSON:
        print_json(document)
    else:
        tell_cell(small, factor)
        for line in words:
            print(f"{line}.")
    return 0 if explanation.complete and explanation.status is not Verdict.OPEN else CapacityError.exit_status


def _check_size(cell: Cell) -> None:
    from cycle_encodings.grouped import ENCODING  # noqa: PLC0415

    if cell.length > _MOST_LENGTH:
        raise CapacityError("explain", f"length {cell.length} is above {_MOST_LENGTH}, the limit of grouped formulas")
    size = ENCODING.size(cell)
    if size > _MOST_CLAUSES:
        raise CapacityError("explain", f"{size} clauses, more than {_MOST_CLAUSES}")


def _reach(explanation: Explanation) -> dict[str, Any]:
    """Return 2^w, and for each core the least bound and the largest number that it still proves."""

    def entry(explained: Explained) -> dict[str, Any]:
        reach = explained.reach
        if reach is None:
            return {"every_number": explained.every_number, "known": False}
        up_to = None if reach.up_to is None else json_integer(reach.up_to)
        return {
            "every_number": explained.every_number,
            "known": True,
            "above": json_integer(reach.above),
            "up_to": up_to,
        }

    width, listed = explanation.width, explanation.complete and bool(explanation.cycles)
    return {
        "below": None if width is None else json_integer(1 << width),
        "cores": [entry(each) for each in explanation.cores],
        "empty_above": json_integer(explanation.cycles[-1].least) if listed else None,
    }


def _cycles(explanation: Explanation) -> list[dict[str, Any]]:
    from solverkit.settle.documents import cycle_entry  # noqa: PLC0415

    return [cycle_entry(cycle) for cycle in explanation.cycles]
