"""Commands about one cell of a window: the options that name it, the cell they mean, and how it is printed."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Any

import typer

from solverkit.errors import CapacityError, InputError
from solverkit.numerals import json_integer, parse_integer
from solverkit.window import MAX_LENGTH, Cell

if TYPE_CHECKING:
    from solverkit.window import Window

__all__ = ["CellOption", "RawOption", "cell_entry", "cell_lengths", "reduced_unless", "stated_cell", "tell_cell"]

CellOption = Annotated[str, typer.Option("--cell", metavar="K,X", help="Length and odd count of the cell.")]
RawOption = Annotated[bool, typer.Option("--raw", help="The cell as it stands, not divided by what d and D share.")]


def _pair(text: str) -> tuple[int, int]:
    length, comma, odd = text.partition(",")
    if not comma:
        raise InputError("--cell", text, "K,X such as 27,17")
    k = parse_integer(length, "--cell K", 1, MAX_LENGTH)
    return k, parse_integer(odd, "--cell X", 1, k)


def cell_lengths(text: str) -> str:
    """Return the lengths that ``--cell`` implies, as ``--lengths`` takes them."""
    k, _ = _pair(text)
    return f"{k}..{k}"


def stated_cell(window: Window, text: str, command: str) -> Cell:
    """Return the one cell of the window that ``--cell`` names.

    Raises:
        InputError: the window has several maps or signs, conditions beside the cell's own, or no such cell.
        CapacityError: the cell is too long for exact bounds.
    """
    from solverkit.exact.bounds import EXACT_LENGTH  # noqa: PLC0415 - parts load only when the command runs

    length, odd = _pair(text)
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
        raise CapacityError(command, f"length {length} is above {EXACT_LENGTH}, the limit of exact bounds")
    return window.cell(sides[0], length, odd)


def reduced_unless(raw: bool, stated: Cell) -> tuple[Cell, int]:
    """Return the cell of positive elements to work on, and the factor that leads back to the stated one."""
    from solverkit.exact.reduction import reduced  # noqa: PLC0415

    if raw:
        return stated.positive(), int(stated.sign)
    reduction = reduced(stated)
    return reduction.cell, reduction.factor


def cell_entry(cell: Cell) -> dict[str, Any]:
    """Return the cell as JSON has it."""
    return {
        "multiplier": json_integer(cell.multiplier),
        "offset": json_integer(cell.offset),
        "length": cell.length,
        "odd": cell.odd,
        "above": json_integer(cell.above),
        "sign": cell.sign.word,
    }


def tell_cell(cell: Cell, factor: int) -> None:
    """Print the cell that was worked on, and how the one asked for follows from it."""
    from solverkit.explain.arithmetic import number  # noqa: PLC0415

    print(f"cell: {cell.map}, positive elements above {cell.above}, length {cell.length}, odd steps {cell.odd}")
    if factor != 1:
        print(f"its elements times {number(factor)} are those of the cell asked for")
