"""Which format a file name asks for, and writing a file whole or not at all."""

from __future__ import annotations

import contextlib
import os
import tempfile
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from cycle_encodings._formula import Form, Statement
from solverkit.errors import FileError, InputError, SolverkitError
from solverkit.exports.cp_text import cp_lines
from solverkit.exports.dimacs import dimacs_lines
from solverkit.exports.opb import inequality_lines, opb_lines
from solverkit.exports.smtlib import smtlib_lines

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Iterator, Mapping

    from solverkit.window import Cell

__all__ = ["FORMATS", "Format", "format_of", "write_statement", "write_whole"]


@dataclass(frozen=True, slots=True)
class Format:
    """A file format.

    Args:
        name: in words.
        lines: form of an encoding -> the lines of the file; None in place of a form stands for the cell alone.
    """

    name: str
    lines: Mapping[Form | None, Callable[[Any, str], Iterator[str]]]


#: Suffix -> what such a file holds.
FORMATS = {
    ".cnf": Format("DIMACS CNF", {Form.CNF: dimacs_lines}),
    ".opb": Format("OPB", {Form.CNF: opb_lines, Form.INEQUALITIES: inequality_lines}),
    ".smt2": Format("SMT-LIB 2", {None: smtlib_lines}),
    ".textproto": Format("CP-SAT text", {Form.CONSTRAINTS: cp_lines}),
}


def format_of(path: Path) -> Format:
    """Return the format that the suffix of ``path`` asks for.

    Raises:
        InputError: another suffix.
    """
    if path.suffix not in FORMATS:
        allowed = ", ".join(f"{suffix} ({each.name})" for suffix, each in FORMATS.items())
        raise InputError("--to", str(path), f"a file name that ends in {allowed}")
    return FORMATS[path.suffix]


def write_statement(statement: Statement | Cell, form: Form | None, encoding: str, path: Path) -> None:
    """Write an encoding, or for SMT-LIB 2 a cell, in the format that the suffix of ``path`` asks for.

    Args:
        statement: what the encoder gave, or a cell of positive elements.
        form: of the encoder; None with a cell.
        encoding: name of the encoder, for the comments.
        path: where to; a file that is there is replaced.

    Raises:
        InputError: an unknown suffix, or a format that doesn't take this form.
        FileError: the file can't be written.
    """
    wanted = format_of(path)
    if form not in wanted.lines:
        forms = " or ".join(each.value if each is not None else "none, as it is written from the cell"
                            for each in wanted.lines)  # fmt: skip
        given = "no encoding" if form is None else f"{encoding}, an encoding of the form {form}"
        raise InputError("--encoding", given, f"for {wanted.name}, an encoding of the form {forms}")
    write_whole(path, wanted.lines[form](statement, encoding))


def write_whole(path: Path, lines: Iterable[str]) -> None:
    """Write lines, ASCII text, to a temporary file beside ``path`` and put it in its place.

    Raises:
        FileError: the folder is missing or closed, or the disk is full; a file that was there stays as it was.
    """
    temporary = ""
    try:
        with tempfile.NamedTemporaryFile(
            "w", encoding="ascii", newline="\n", dir=path.parent, prefix=f".{path.name}.", delete=False
        ) as file:
            temporary = file.name
            file.writelines(f"{line}\n" for line in lines)
            file.flush()
            os.fsync(file.fileno())
        mask = os.umask(0)
        os.umask(mask)
        Path(temporary).chmod(0o666 & ~mask)
        Path(temporary).replace(path)
    except BaseException as problem:
        if temporary:
            with contextlib.suppress(OSError):
                Path(temporary).unlink()
        if isinstance(problem, OSError) and not isinstance(problem, SolverkitError):
            raise FileError(path, f"can't be written ({problem.strerror or problem})") from None
        raise
