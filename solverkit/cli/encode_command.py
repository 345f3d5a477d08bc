"""``solverkit encode``: one cell as a file that other programs read."""

from __future__ import annotations

from pathlib import Path
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
from solverkit.errors import CapacityError, InputError, MissingPartError
from solverkit.numerals import json_integer

if TYPE_CHECKING:
    from cycle_encodings._formula import Encoder, Form
    from solverkit.window import Cell, Window

__all__ = ["encode"]


@lengths_from("cell", cell_lengths)
@takes_window
def encode(
    window: Window,
    *,
    cell: CellOption,
    to: Annotated[
        Path, typer.Option("--to", metavar="FILE", help="Where to; .cnf, .opb, .smt2 or .textproto says the format.")
    ],
    encoding: Annotated[
        str | None,
        typer.Option("--encoding", metavar="NAME", help="See catalog; by default the usual one of the form."),
    ] = None,
    raw: RawOption = False,
    format: FormatOption = Format.TEXT,  # noqa: A002 - the option's own name
) -> int:
    """Write one cell of a window as DIMACS CNF, OPB, SMT-LIB 2 or a CP-SAT model."""
    from solverkit.exports.files import format_of, write_statement  # noqa: PLC0415 - parts load only when used

    wanted = format_of(to)
    stated = stated_cell(window, cell, "encode")
    small, factor = reduced_unless(raw, stated)
    if None in wanted.lines:
        if encoding is not None:
            raise InputError("--encoding", encoding, f"nothing for {wanted.name}, which is written from the cell")
        write_statement(small, None, "", to)
        sizes: dict[str, int] = {}
        digest = name = ""
    else:
        from solverkit.solvers._formula_method import MOST_CLAUSES  # noqa: PLC0415

        name, encoder = _encoder(encoding, set(wanted.lines), wanted.name)
        size = encoder.size(small)
        if size > MOST_CLAUSES:
            raise CapacityError(name, f"about {size} clauses or rows, more than {MOST_CLAUSES}")
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
        "cell": cell_entry(stated),
        "encoded": cell_entry(small),
        "factor": json_integer(factor),
    }
    if format is Format.JSON:
        print_json(document)
    else:
        _tell(document, small, factor)
    return 0


def _encoder(name: str | None, forms: set[Form | None], what: str) -> tuple[str, Encoder]:
    """Return the encoder that is named, or the usual one of the first form that the file takes."""
    from solverkit.registry import load, parts  # noqa: PLC0415

    if name is None:
        from solverkit.solvers._formula_method import DEFAULTS  # noqa: PLC0415

        usual = [name for kind, (name, _) in DEFAULTS.items() if kind.form in forms]
        there = {part.name for part in parts("encodings")}
        if not there.intersection(usual):
            allowed = " or ".join(sorted(str(form) for form in forms))
            raise MissingPartError(f"an encoding of the form {allowed}", f"{what} needs one; see catalog")
        name = next(name for name in usual if name in there)
    encoder: Encoder = load("encodings", name)
    if encoder.form not in forms:
        allowed = " or ".join(sorted(str(form) for form in forms))
        raise InputError("--encoding", f"{name}, of the form {encoder.form}", f"for {what}, one of the form {allowed}")
    return name, encoder


def _tell(document: dict[str, Any], small: Cell, factor: int) -> None:
    sizes = [f"{document[key]:,} {key}" for key in ("variables", "clauses", "rows", "constraints") if key in document]
    print(f"{document['file']}: {', '.join([document['format'], *sizes])}, {document['bytes']:,} bytes")
    tell_cell(small, factor)
    if document["digest"]:
        print(f"encoding: {document['encoding']}, SHA-256 of the formula {document['digest']}")
