"""What every exported file says of itself, format by format behind its own comment sign."""

from __future__ import annotations

from typing import TYPE_CHECKING

from solverkit import __version__

if TYPE_CHECKING:
    from collections.abc import Iterator

    from cycle_encodings._formula import Encoding
    from solverkit.window import Cell

__all__ = ["cell_text", "heading", "plain", "variable_notes"]


def cell_text(cell: Cell) -> str:
    """Return the cell as ``q=3 d=5 k=27 x=17 above=0``."""
    return f"q={cell.multiplier} d={cell.offset} k={cell.length} x={cell.odd} above={cell.above}"


def plain(text: str) -> str:
    """Return ``text`` on one line of ASCII."""
    return " ".join(text.encode("ascii", "backslashreplace").decode("ascii").split())


def heading(cell: Cell, encoding: str, digest: str = "") -> Iterator[str]:
    """Yield what the file holds: the cell, the encoding and its digest."""
    yield f"solverkit {__version__}: cycles of n/2 (n even), (q*n + d)/2 (n odd) with k elements, x of them odd"
    yield "a solution is a cycle, its least element n0 first; n0 > above, all other elements > n0"
    yield f"cell {cell_text(cell)}"
    if encoding:
        yield f"encoding {plain(encoding)}"
    if digest:
        yield f"digest sha256 {digest}"


def variable_notes(encoding: Encoding) -> Iterator[str]:
    """Yield the variables of the least element, the clauses of each condition group and the named variables."""
    yield "least " + " ".join(map(str, encoding.least_bits))
    for name, ranges in encoding.groups.items():
        for start, stop in ranges:
            yield f"group {start + 1}..{stop} {plain(name)}"
    for variable, name in sorted(encoding.names.items()):
        yield f"variable {variable} {plain(name)}"
