"""Word matching: the words of one cell as pairs of halves whose contributions to β cancel modulo D/gcd(D, d).

The engine of the word side that lists all cycles of a cell. It climbs a ladder: few words are enumerated and
substituted one by one; else every necklace is met by words 0A1B of one shape (`_matching_split`), the contribution of
each half to β is a 64-bit fraction of D' (`_matching_fractions`), and the two lists of fractions are compared, sorted
whole (`_matching_pairs`) or written out and compared bucket by bucket (`_matching_buckets`). Fractions only propose:
each proposed word is substituted into the map in Python integers (`_matching_substitution`), so D may have any size.

Source of the idea of two halves: Horowitz & Sahni, J. ACM 21 (1974) 277-292; of sums of two sorted lists in order,
without storing them: Schroeppel & Shamir, SIAM J. Comput. 10 (1981) 456-464. Here buckets take the place of heaps.
"""

from __future__ import annotations

import time
from dataclasses import dataclass, field
from math import inf
from typing import TYPE_CHECKING

from solverkit.engines._matching_enumeration import ballot_words
from solverkit.engines._matching_plan import DEFAULT_MEMORY, Plan, Way, expected_seconds, has_right_sign, plan, refusal
from solverkit.engines._matching_substitution import substituted
from solverkit.errors import CapacityError
from solverkit.methods import Budget, Family, Hit, Piece, PieceResult

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    import numpy as np
    import numpy.typing as npt

    from solverkit.engines._matching_halves import Half
    from solverkit.engines._matching_split import Split
    from solverkit.window import Cell

__all__ = ["ENGINE", "Matching"]

#: Pairs of sums beyond which a piece ends as incomplete.
_MOST_PAIRS = 1_000_000
#: Sums of a half in a bucket that are never too many, whatever the memory.
_LEAST_ROOM = 1 << 20
_LATE = "the time given is over"


@dataclass(slots=True)
class _Found:
    """What a piece has so far."""

    hits: set[Hit] = field(default_factory=set)
    reason: str = ""
    statistics: dict[str, int | float | str] = field(default_factory=dict)


class Matching:
    """The engine ``matching``; it keeps nothing between calls."""

    name = "matching"
    family = Family.WORD

    def refusal(self, cell: Cell) -> str | None:
        """Return why this engine can't take ``cell``, or None when it can."""
        return refusal(cell)

    def estimate(self, cells: Sequence[Cell]) -> float:
        """Return the expected computing time, in seconds on one core; infinite when a cell is refused."""
        return sum(expected_seconds(cell) for cell in cells)

    def batches(self, cells: Sequence[Cell]) -> list[tuple[Cell, ...]]:
        """Return each cell as a batch of its own: no two cells share words."""
        return [(cell,) for cell in cells]

    def pieces(self, batch: tuple[Cell, ...], seconds: float) -> list[Piece]:
        """Cut the circle of residues that the sums take into equal ranges; each piece builds its own lists.

        Raises:
            CapacityError: the cell is refused.
        """
        (cell,) = batch
        chosen = self._plan(cell)
        count = chosen.count(seconds) if has_right_sign(cell) else 1
        return [Piece(self.name, batch, index, count) for index in range(count)]

    def run(self, piece: Piece, budget: Budget) -> PieceResult:
        """Find the cycles whose words have sums in the range of ``piece``.

        Args:
            piece: made by `pieces`.
            budget: the clock is looked at every 0.1 s or so; the lists are cut to the memory.

        Raises:
            CapacityError: the cell is refused.
        """
        start = time.process_time()
        deadline = time.monotonic() + (inf if budget.seconds is None else budget.seconds)
        (cell,) = piece.cells
        found = _Found()
        chosen = self._plan(cell)
        if time.monotonic() > deadline:
            found.reason = _LATE
        elif has_right_sign(cell):
            found.statistics["way"] = chosen.way.value
            if chosen.way is Way.ENUMERATED:
                _substitute(cell, ballot_words(cell.length, cell.odd), found, deadline)
            else:
                memory = DEFAULT_MEMORY if budget.memory is None else budget.memory
                _match(cell, chosen, piece, memory, found, deadline)
        return PieceResult(
            piece,
            tuple(sorted(found.hits)),
            complete=not found.reason,
            reason=found.reason,
            statistics=found.statistics,
            seconds=time.process_time() - start,
        )

    def _plan(self, cell: Cell) -> Plan:
        why, chosen = refusal(cell), plan(cell.length, cell.odd)
        if why is not None or chosen is None:
            raise CapacityError(self.name, f"{cell.length} steps, {cell.odd} odd: {why}")
        return chosen


def _match(cell: Cell, chosen: Plan, piece: Piece, memory: int, found: _Found, deadline: float) -> None:
    """Compare the halves of ``cell`` in the range of ``piece`` and substitute the words proposed."""
    from solverkit.engines._matching_buckets import CIRCLE, join_range  # noqa: PLC0415 - numpy loads only when used
    from solverkit.engines._matching_fractions import slack  # noqa: PLC0415
    from solverkit.engines._matching_pairs import near_pairs  # noqa: PLC0415

    split = chosen.split
    assert split is not None
    left, right = _halves(cell, split, chosen.most_tails(memory))
    found.statistics["streams"] = len(left.base) + len(right.base)
    if chosen.way is Way.SORTED:
        ys, zs, compared = left.whole(), right.whole(), (left.count(), right.count())
    else:
        low, high = (CIRCLE * (piece.index + i) // piece.count for i in (0, 1))
        room = max(memory // 64, _LEAST_ROOM)
        joined = join_range(left, right, low, high, slack(cell.odd), 4 * _MOST_PAIRS, room, deadline)
        ys, zs, compared, found.reason = joined.left, joined.right, joined.emitted, joined.reason
        found.statistics["buckets"] = joined.buckets
    found.statistics.update(left=compared[0], right=compared[1])
    pairs = near_pairs(ys.residues, zs.residues, slack(cell.odd), _MOST_PAIRS)
    if pairs is None:
        found.reason = f"more than {_MOST_PAIRS} pairs of sums match"
        return
    found.statistics["pairs"] = len(pairs)
    heads = left.words_at(firsts := _pairs_of(ys.places[pairs[:, 0]]))
    tails = right.words_at(seconds := _pairs_of(zs.places[pairs[:, 1]]))
    middle = 1 << split.left_length
    words = {heads[one] | middle | tails[other] for one, other in zip(firsts, seconds, strict=True)}
    _substitute(cell, sorted(words), found, deadline)


def _halves(cell: Cell, split: Split, most: int) -> tuple[Half, Half]:
    """Return the sums y of the words 0A and the negated sums z of the words 1B: pairs that nearly agree are sought."""
    from solverkit.engines._matching_fractions import fractions  # noqa: PLC0415
    from solverkit.engines._matching_halves import HalfWords, build  # noqa: PLC0415

    m, c = split.left_length, split.left_odd
    weights = fractions(cell)
    negated = -weights
    return (
        build(HalfWords(1, m, 0, c), weights, 0, most),
        build(HalfWords(m + 1, cell.length, c + 1, cell.odd - c - 1), negated, int(negated[c, m]), most),
    )


def _pairs_of(places: npt.NDArray[np.int64]) -> list[tuple[int, int]]:
    return [(stream, place) for stream, place in places.tolist()]


def _substitute(cell: Cell, words: Iterable[int], found: _Found, deadline: float) -> None:
    """Add the cycles that follow one of ``words``."""
    number = 0
    for number, word in enumerate(words, start=1):
        if number % 256 == 0 and time.monotonic() > deadline:
            found.reason = _LATE
            break
        if (hit := substituted(cell, word)) is not None:
            found.hits.add(hit)
    found.statistics["substituted"] = number


ENGINE = Matching()
