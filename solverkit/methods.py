"""What every method that decides cells has in common: engines and encoding-with-solver pairs alike.

A method gets *reduced cells of positive elements*, groups them into batches that share work, cuts a batch into pieces
of a wanted duration, and runs one piece at a time, in any process. All values here are frozen and pickle.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from enum import StrEnum
from typing import Protocol

from solverkit.errors import ContradictionError
from solverkit.window import Cell

__all__ = ["LIST_AT_MOST", "Budget", "Family", "Hit", "Listing", "Method", "Piece", "PieceResult", "merged"]


#: Cells with more cycles than this are counted, and a sample of them is listed, unless a run says otherwise.
LIST_AT_MOST = 10_000


class Family(StrEnum):
    """Side of the cycle equation that a method works on; agreement of two families confirms a list.

    ORBIT iterates candidates for the least element; WORD runs over parity words; FORMULA leaves the search to a
    solver that knows nothing of either.
    """

    ORBIT = "orbit"
    WORD = "word"
    FORMULA = "formula"


@dataclass(frozen=True, slots=True)
class Budget:
    """What one piece may use.

    Args:
        seconds: time after which it ends as incomplete, or None for no limit.
        memory: bytes, or None for no limit.
        list_at_most: a method that can count may report the number of cycles and a sample beyond this; None leaves
            it to the method.
    """

    seconds: float | None = None
    memory: int | None = None
    list_at_most: int | None = None


@dataclass(frozen=True, slots=True, order=True)
class Hit:
    """A cycle that a method reports for the map of its batch: least element, length and odd count."""

    length: int
    odd: int
    least: int


@dataclass(frozen=True, slots=True)
class Piece:
    """A part of a batch that can run alone.

    Args:
        method: name of the method that made it.
        cells: the cells of the batch, all reduced, of positive elements.
        index: which piece of the batch, from 0.
        count: number of pieces of the batch.
        detail: what the method needs to know of the part, such as the ends of a range.
    """

    method: str
    cells: tuple[Cell, ...]
    index: int = 0
    count: int = 1
    detail: tuple[int, ...] = ()


@dataclass(frozen=True, slots=True)
class PieceResult:
    """What running one piece gave.

    Args:
        piece: the piece.
        hits: the cycles found, without repeats, sorted.
        complete: whether nothing in the part was left out.
        reason: why not, when incomplete.
        totals: (length, odd, number of cycles) of cells that were counted; their hits may then be a sample.
        statistics: counters and times for the record.
        seconds: computing time.
    """

    piece: Piece
    hits: tuple[Hit, ...]
    complete: bool = True
    reason: str = ""
    totals: tuple[tuple[int, int, int], ...] = ()
    statistics: Mapping[str, int | float | str] = field(default_factory=dict)
    seconds: float = 0.0


@dataclass(frozen=True, slots=True)
class Listing:
    """A method's answer for one cell.

    Args:
        cell: reduced, of positive elements.
        method: name of the method.
        least: least elements of the cycles, ascending.
        complete: whether these are all.
        reason: why not, when incomplete.
        total: exact number of cycles when it was counted without listing them all, else None.
        seconds: computing time of the cell's share of its batch.
    """

    cell: Cell
    method: str
    least: tuple[int, ...]
    complete: bool
    reason: str = ""
    total: int | None = None
    seconds: float = 0.0

    def __post_init__(self) -> None:
        if any(n <= self.cell.above for n in self.least):
            raise ContradictionError(f"{self.method} lists {self.least} in {self.cell}")
        if list(self.least) != sorted(set(self.least)):
            raise ContradictionError(f"{self.method} lists {self.least} out of order or twice")


class Method(Protocol):
    """The interface of engines and of encoding-with-solver pairs."""

    @property
    def name(self) -> str:
        """The name that options and records use."""

    @property
    def family(self) -> Family:
        """The family of the method."""

    def refusal(self, cell: Cell) -> str | None:
        """Return why this method can't take ``cell``, or None when it can."""

    def estimate(self, cells: Sequence[Cell]) -> float:
        """Return the expected computing time, in seconds on one core, of these cells of one map together."""

    def batches(self, cells: Sequence[Cell]) -> list[tuple[Cell, ...]]:
        """Group ``cells`` (any maps) into batches of one map each that share their work."""

    def pieces(self, batch: tuple[Cell, ...], seconds: float) -> list[Piece]:
        """Cut a batch into pieces of about ``seconds`` each; the same arguments give the same pieces."""

    def run(self, piece: Piece, budget: Budget) -> PieceResult:
        """Decide one piece. Called in a worker process; must not write files or print."""


def merged(batch: tuple[Cell, ...], results: Sequence[PieceResult]) -> list[Listing]:
    """Return the answers for the cells of a batch from the results of its pieces, in any order.

    Raises:
        ContradictionError: the results are not exactly the pieces of one batch.
    """
    first = results[0].piece
    if sorted(r.piece.index for r in results) != list(range(first.count)) or any(
        (r.piece.cells, r.piece.method, r.piece.count) != (batch, first.method, first.count) for r in results
    ):
        raise ContradictionError(f"{first.method}: the results do not cover the batch once")
    by_cell: dict[tuple[int, int], set[int]] = {(c.length, c.odd): set() for c in batch}
    for result in results:
        for hit in result.hits:
            if (hit.length, hit.odd) in by_cell:
                by_cell[hit.length, hit.odd].add(hit.least)
    totals = {(length, odd): total for r in results for length, odd, total in r.totals}
    failures = [r.reason or "incomplete" for r in results if not r.complete]
    share = sum(r.seconds for r in results) / len(batch)
    listings = []
    for cell in batch:
        key = (cell.length, cell.odd)
        least = tuple(sorted(n for n in by_cell[key] if n > cell.above))
        listings.append(
            Listing(cell, first.method, least, not failures, failures[0] if failures else "", totals.get(key), share)
        )
    return listings
