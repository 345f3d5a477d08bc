"""``solverkit encode``: one cell as a file that other programs read."""

from __future__ import annotations

import json
import sys
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from solverkit.cli.window_defaults import lengths_from
from solverkit.cli.window_options import takes_window
from solverkit.errors import CapacityError, InputError
from solverkit.numerals import json_integer, parse_integer
from solverkit.window import MAX_LENGTH, Cell

if TYPE_CHECKING:
    from cycle_encodings._formula import Encoder, Form
    from solverkit.window import Window

__all__ = ["encode"]

_MOST_CLAUSES = 50_000_000


class Format(StrEnum):
    """How results are printed."""

    TEXT = "text"
    JSON = "json"


def _pair(text: str) -> tuple[int, int]:
    length, comma, odd = text.partition(",")
    if not comma:
        raise InputError("--cell", text, "K,X such as 27,17")
    k = parse_integer(length, "--cell K", 1, MAX_LENGTH)
    return k, parse_integer(odd, "--cell X", 1, k)


def _only_length(text: str) -> str:
    k, _ = _pair(text)
    return f"{k}..{k}"


@lengths_from("cell", _only_length)
@takes_window
def encode(
    window: Window,
    *,
    cell: Annotated[str, typer.Option("--cell", metavar="K,X", help="Length and odd count of the cell.")],
    to: Annotated[
        Path, typer.Option("--to", metavar="FILE", help="Where to; .cnf, .opb, .smt2 or .textproto says the format.")
    ],
    encoding: Annotated[
        str | None,
        typer.Option("--encoding", metavar="NAME", help="See catalog; by default the usual one of the form."),
    ] = None,
    raw: Annotated[
        bool, typer.Option("--raw", help="The cell as it stands, not divided by what d and D share.")
    ] = False,
    format: Annotated[  # noqa: A002 - the option's own name
        Format, typer.Option("--format", help="text, or one JSON document on standard output.")
    ] = Format.TEXT,
) -> int:
    """Write one cell of a window as DIMACS CNF, OPB, SMT-LIB 2 or a CP-SAT model."""
    from solverkit.exact.reduction import reduced  # noqa: PLC0415 - parts load only when the command runs
    from solverkit.exports.files import format_of, write_statement  # noqa: PLC0415

    wanted = format_of(to)
    stated = _stated_cell(window, *_pair(cell))
    reduction = reduced(stated)
    if not raw:
        small, factor = reduction.cell, reduction.factor
    else:
        small, factor = stated.positive(), int(stated.sign)
    if None in wanted.lines:
        if encoding is not None:
            raise InputError("--encoding", encoding, f"nothing for {wanted.name}, which is written from the cell")
        write_statement(small, None, "", to)
        sizes: dict[str, int] = {}
        digest = name = ""
    else:
        name, encoder = _encoder(encoding, set(wanted.lines), wanted.name)
        if encoder.size(small) > _MOST_CLAUSES:
            raise CapacityError(name, f"about {encoder.size(small)} clauses or rows, more than {_MOST_CLAUSES}")
        statement = encoder.encode(small)
        write_statement(statement, encoder.form, name, to)
        sizes, digest = statement.sizes(), statement.digest()
    document = {
        "schema": 1,
        "file": str(to),
        "bytes": to.stat().st_size,
        "format": wanted.name,
        "encoding": name or None,
        "digest": digest or None,
        **sizes,
        "cell": _table(stated),
        "encoded": _table(small),
        "factor": json_integer(factor),
    }
    if format is Format.JSON:
        sys.stdout.write(json.dumps(document, indent=1, ensure_ascii=True) + "\n")
    else:
        _tell(document, small, factor)
    return 0


def _stated_cell(window: Window, length: int, odd: int) -> Cell:
    """Return the one cell of the window that the options name."""
    from solverkit.exact.bounds import EXACT_LENGTH  # noqa: PLC0415

    sides = list(window.sides())
    if len(sides) > 1:
        given = f"{len(window.maps)} maps and {len(window.signs)} signs"
        raise InputError("the window", given, "one map, --map Q,D, and one sign, --sign positive or negative")
    for option, value, span in (("K", length, window.lengths), ("X", odd, window.odd_range)):
        if not span.low <= value <= span.high:
            raise InputError(f"--cell {option}", value, f"a cell of the window: {span}")
    if window.shape is not None:
        raise InputError("shape", "side conditions", "none; the encodings do not state them")
    if window.primitive:
        raise InputError("--primitive", "true", "--any-gcd; a formula has all cycles of its cell")
    if length > EXACT_LENGTH:
        raise CapacityError("encode", f"length {length} is above {EXACT_LENGTH}, the limit of the encodings")
    return window.cell(sides[0], length, odd)


def _encoder(name: str | None, forms: set[Form | None], what: str) -> tuple[str, Encoder]:
    """Return the encoder that is named, or the usual one of the first form that the file takes."""
    from solverkit.registry import load  # noqa: PLC0415

    if name is None:
        from solverkit.solvers._formula_method import DEFAULTS  # noqa: PLC0415

        name = next(usual for kind, (usual, _) in DEFAULTS.items() if kind.form in forms)
    encoder: Encoder = load("encodings", name)
    if encoder.form not in forms:
        allowed = " or ".join(sorted(str(form) for form in forms))
        raise InputError("--encoding", f"{name}, of the form {encoder.form}", f"for {what}, one of the form {allowed}")
    return name, encoder


def _table(cell: Cell) -> dict[str, Any]:
    return {
        "multiplier": json_integer(cell.multiplier),
        "offset": json_integer(cell.offset),
        "length": cell.length,
        "odd": cell.odd,
        "above": json_integer(cell.above),
        "sign": cell.sign.word,
    }


def _tell(document: dict[str, Any], small: Cell, factor: int) -> None:
    sizes = [f"{document[key]:,} {key}" for key in ("variables", "clauses", "rows", "constraints") if key in document]
    print(f"{document['file']}: {', '.join([document['format'], *sizes])}, {document['bytes']:,} bytes")
    print(f"cell: {small.map}, positive elements above {small.above}, length {small.length}, odd steps {small.odd}")
    if factor != 1:
        print(f"its elements times {factor} are those of the cell asked for")
    if document["digest"]:
        print(f"encoding: {document['encoding']}, SHA-256 of the formula {document['digest']}")
