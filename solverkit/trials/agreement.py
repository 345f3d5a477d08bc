"""What the arithmetic engines say of a cell, and whether an answer agrees with it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from solverkit.errors import ContradictionError
from solverkit.findings import Cycle
from solverkit.methods import Budget, Method, merged
from solverkit.registry import load, parts

if TYPE_CHECKING:
    from collections.abc import Sequence

    from solverkit.window import Cell

__all__ = ["Expected", "disagreement", "expected"]

#: A cell that no engine is expected to decide in this time has no reference.
_SECONDS = 120.0


@dataclass(frozen=True, slots=True)
class Expected:
    """The cycles of a cell by an arithmetic engine.

    Args:
        least: least elements, ascending; a sample when ``total`` says that there are more.
        total: number of cycles.
        method: name of the engine.
    """

    least: tuple[int, ...]
    total: int
    method: str


def expected(cell: Cell, seconds: float = _SECONDS) -> Expected | None:
    """Return the cycles of ``cell`` by the engine that is expected to be quickest, or None when none is quick enough.

    Args:
        cell: of positive elements, reduced or not.
        seconds: longest expected time, and limit of each engine.
    """
    engines: list[Method] = [load("engines", part.name) for part in parts("engines") if not part.problem]
    takes = [engine for engine in engines if engine.refusal(cell) is None]
    for engine in sorted(takes, key=lambda each: (each.estimate((cell,)), each.name)):
        if engine.estimate((cell,)) > seconds:
            return None
        (batch,) = engine.batches((cell,))
        pieces = engine.pieces(batch, seconds)
        results = [engine.run(piece, Budget(seconds=seconds)) for piece in pieces]
        (listing,) = merged(batch, results)
        if listing.complete:
            total = len(listing.least) if listing.total is None else listing.total
            return Expected(listing.least, total, engine.name)
    return None


def disagreement(cell: Cell, least: Sequence[int], complete: bool, reference: Expected | None) -> str:
    """Return in words how an answer contradicts the reference, or an empty text.

    Args:
        cell: the cell.
        least: least elements of the answer, in any order.
        complete: whether the answer claims that these are all.
        reference: what an engine says; with None only the answer itself is looked at.
    """
    name = f"{cell.map} k = {cell.length}, x = {cell.odd}"
    found = set(least)
    if len(found) < len(least):
        return f"{name}: a cycle is listed twice"
    false = sorted(n for n in found if not _belongs(cell, n))
    if false:
        return f"{name}: {false[0]} is not the least element of a cycle of the cell"
    if reference is None:
        return ""
    if complete and len(found) != reference.total:
        return f"{name}: {len(found)} cycles, but {reference.method} has {reference.total}"
    known = set(reference.least)
    if complete and not known <= found:
        return f"{name}: {min(known - found)} is missing, which {reference.method} has"
    if len(known) == reference.total and not found <= known:
        return f"{name}: {min(found - known)} is listed, which {reference.method} has not"
    return ""


def _belongs(cell: Cell, least: int) -> bool:
    """Tell by iteration whether ``least`` is the least element of a cycle of the cell."""
    try:
        return Cycle(cell.multiplier, cell.offset, least, cell.length).lies_in(cell)
    except ContradictionError:
        return False
