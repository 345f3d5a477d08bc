"""Benchmark cells as JSON Lines: one object a line with q, d, k, x, and cycles, grade, bound where they are known."""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from solverkit.errors import FileError, InputError
from solverkit.exports.files import write_whole
from solverkit.numerals import json_integer, parse_integer
from solverkit.window import MAX_LENGTH, Cell

if TYPE_CHECKING:
    from collections.abc import Iterable
    from pathlib import Path

__all__ = ["BenchmarkCell", "read_cells", "write_cells"]

_KEYS = ("q", "d", "k", "x", "above", "cycles", "grade", "bound")
_MOST_BYTES = 64 * 2**20


@dataclass(frozen=True, slots=True)
class BenchmarkCell:
    """A cell of positive elements and what is known of it.

    Args:
        cell: the cell.
        cycles: number of its cycles, or None.
        grade: name of its class of size, or empty.
        bound: balanced bound of the least element, or None.
    """

    cell: Cell
    cycles: int | None = None
    grade: str = ""
    bound: int | None = None

    def table(self) -> dict[str, Any]:
        """Return the object that a line holds."""
        cell = self.cell
        table: dict[str, Any] = {
            "q": json_integer(cell.multiplier),
            "d": json_integer(cell.offset),
            "k": cell.length,
            "x": cell.odd,
        }
        if cell.above:
            table["above"] = json_integer(cell.above)
        if self.cycles is not None:
            table["cycles"] = self.cycles
        if self.grade:
            table["grade"] = self.grade
        if self.bound is not None:
            table["bound"] = json_integer(self.bound)
        return table


def read_cells(path: Path) -> tuple[BenchmarkCell, ...]:
    """Return the cells of a file; empty lines are passed over.

    Raises:
        InputError: a line that is no cell; the message has its number.
        FileError: the file can't be read.
    """
    try:
        if path.stat().st_size > _MOST_BYTES:
            raise InputError("--cells", str(path), f"a file of at most {_MOST_BYTES} bytes")
        text = path.read_bytes().decode("utf-8")
    except UnicodeDecodeError:
        raise InputError("--cells", str(path), "JSON Lines, which is UTF-8 text") from None
    except OSError as problem:
        raise FileError(path, f"can't be read ({problem.strerror})") from None
    cells = [_cell(line, f"{path.name} line {i}") for i, line in enumerate(text.splitlines(), 1) if line.strip()]
    if not cells:
        raise InputError("--cells", str(path), "at least one cell")
    return tuple(cells)


def _cell(line: str, where: str) -> BenchmarkCell:
    try:
        table = json.loads(line)
    except (ValueError, RecursionError):
        raise InputError(where, line, "a JSON object") from None
    if not isinstance(table, dict):
        raise InputError(where, line, "a JSON object")
    for key in table:
        if key not in _KEYS:
            raise InputError(f"{where}, {key}", "an unknown key", "one of " + ", ".join(_KEYS))
    for key in _KEYS[:4]:
        if key not in table:
            raise InputError(f"{where}, {key}", "nothing", "this key")

    def integer(key: str, low: int | None = None, high: int | None = None) -> int:
        return parse_integer(table[key], f"{where}, {key}", low, high)

    grade = table.get("grade", "")
    if not isinstance(grade, str) or len(grade) > 40:
        raise InputError(f"{where}, grade", grade, "a short text")
    length = integer("k", 1, MAX_LENGTH)
    above = integer("above", 0) if "above" in table else 0
    return BenchmarkCell(
        Cell(integer("q"), integer("d"), length, integer("x", 1, length), above),
        integer("cycles", 0) if "cycles" in table else None,
        grade,
        integer("bound", 0) if "bound" in table else None,
    )


def write_cells(path: Path, cells: Iterable[BenchmarkCell]) -> None:
    """Write the cells, one a line.

    Raises:
        FileError: the file can't be written.
    """
    write_whole(path, (json.dumps(cell.table(), ensure_ascii=True) for cell in cells))
