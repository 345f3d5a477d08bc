"""DIMACS CNF with comments that map the formula back to the cell.

Comments come before the problem line, in lines that begin with ``c``:

- ``c cell q=… d=… k=… x=… above=…``, ``c encoding NAME``, ``c digest sha256 HEX``: the digest is that of the file
  without its comments;
- ``c least V1 V2 …``: variables of the least element, least significant first;
- ``c group A..B NAME``: clauses A to B, counted from 1, state the condition NAME;
- ``c variable V NAME``: what a variable means.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from solverkit.exports.comments import heading, variable_notes

if TYPE_CHECKING:
    from collections.abc import Iterator

    from cycle_encodings._formula import Encoding

__all__ = ["dimacs_lines"]


def dimacs_lines(encoding: Encoding, name: str) -> Iterator[str]:
    """Yield the lines of the file.

    Args:
        encoding: the formula.
        name: of the encoder.
    """
    for note in heading(encoding.cell, name, encoding.digest()):
        yield f"c {note}"
    for note in variable_notes(encoding):
        yield f"c {note}"
    yield f"p cnf {encoding.variables} {len(encoding.clauses)}"
    for clause in encoding.clauses:
        yield " ".join(map(str, (*clause, 0)))
