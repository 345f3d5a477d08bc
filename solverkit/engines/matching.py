"""Word matching: the words of one cell as pairs of halves whose contributions to β cancel modulo D/gcd(D, d)."""

from __future__ import annotations

import time
from math import comb
from typing import TYPE_CHECKING

from solverkit.engines._matching_enumeration import ballot_words
from solverkit.engines._matching_substitution import substituted
from solverkit.methods import Budget, Family, Piece, PieceResult
from solverkit.window import Sign

if TYPE_CHECKING:
    from collections.abc import Sequence

    from solverkit.window import Cell

__all__ = ["ENGINE", "Matching"]


class Matching:
    """The engine of the word side that lists all cycles of one cell."""

    name = "matching"
    family = Family.WORD

    def refusal(self, cell: Cell) -> str | None:
        """Return why this engine can't take ``cell``, or None when it can."""
        if cell.sign is not Sign.POSITIVE:
            return "the cell asks for negative elements; reflect it first"
        if comb(cell.length, cell.odd) // cell.length > 5_000_000:
            return "too many words"
        return None

    def estimate(self, cells: Sequence[Cell]) -> float:
        """Return the expected seconds on one core."""
        return sum(1e-5 * comb(c.length, c.odd) / c.length for c in cells)

    def batches(self, cells: Sequence[Cell]) -> list[tuple[Cell, ...]]:
        """Return each cell as a batch of its own: two cells share no words."""
        return [(cell,) for cell in cells]

    def pieces(self, batch: tuple[Cell, ...], seconds: float) -> list[Piece]:  # noqa: ARG002
        """Return the pieces."""
        return [Piece(self.name, batch)]

    def run(self, piece: Piece, budget: Budget) -> PieceResult:  # noqa: ARG002
        """Decide one piece."""
        start = time.process_time()
        (cell,) = piece.cells
        hits = {hit for word in ballot_words(cell.length, cell.odd) if (hit := substituted(cell, word))}
        return PieceResult(piece, tuple(sorted(hits)), seconds=time.process_time() - start)


ENGINE = Matching()
