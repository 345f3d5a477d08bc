"""All primitive cycles of every offset from one enumeration of Lyndon words."""

from __future__ import annotations

import time
from collections import Counter
from dataclasses import dataclass
from functools import lru_cache
from math import ceil, gcd, inf
from typing import TYPE_CHECKING

from solverkit.engines._census_cycles import Frame, wanted_cycles
from solverkit.engines._census_scan import Share
from solverkit.errors import CapacityError
from solverkit.methods import Family, Hit, Piece, PieceResult
from solverkit.words import lyndon_count

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Sequence

    from solverkit.methods import Budget
    from solverkit.window import Cell

__all__ = ["ENGINE", "Census", "PrimitiveCycle", "Share", "offset_counts", "primitive_cycles"]

_LONGEST = 60_000
_MOST_PIECES = 1000
_HIT_BYTES = 300
#: Frames with at most this many words are kept for other offsets: 32 of them at most, 5 MiB each.
_KEPT_WORDS = 1 << 15

# Measured on one core; seconds.
_START = 0.001
_VISIT = 4e-9
_CHECK = 1e-6
_CHECK_WIDE = 3e-5


@dataclass(frozen=True, slots=True, order=True)
class PrimitiveCycle:
    """A primitive cycle of positive elements; its multiples by an odd s are cycles for the offset s·d.

    Args:
        offset: d, with the sign of D = 2^k − q^x.
        least: least element.
        length: k.
        odd: x.
    """

    offset: int
    least: int
    length: int
    odd: int


def primitive_cycles(
    multiplier: int,
    lengths: Iterable[int],
    odd: Iterable[int] | None = None,
    offsets_at_most: int | None = None,
    share: Share | None = None,
) -> Iterator[PrimitiveCycle]:
    """Yield every primitive cycle of positive elements of these lengths, for all offsets at once.

    Args:
        multiplier: q, odd, at least 3.
        lengths: the lengths k, such as ``Span(1, 30)``.
        odd: the odd counts x, or None for all.
        offsets_at_most: largest |d|, or None for every offset.
        share: part i of n for one of n workers, or None for all; the parts are disjoint.

    Reflection gives the cycles of negative elements. The cycles come by length, odd count, and Lyndon word,
    in bounded memory. Cost: about 20 ns a Lyndon word, 1 µs a cycle.

    >>> [(cycle.offset, cycle.least) for cycle in primitive_cycles(3, [5], [3])]
    [(5, 19), (5, 23)]
    """
    counts = None if odd is None else list(odd)
    for length in lengths:
        for ones in range(1, length + 1) if counts is None else counts:
            if 1 <= ones <= length:
                sign = 1 if 2**length > multiplier**ones else -1
                for found in wanted_cycles(Frame(multiplier, length, ones), at_most=offsets_at_most, share=share):
                    for offset, least in zip(found.offsets, found.least, strict=True):
                        yield PrimitiveCycle(sign * offset, least, length, ones)


def offset_counts(multiplier: int, length: int, odd: int, offsets_at_most: int | None = None) -> dict[int, int]:
    """Return for each offset how many primitive cycles of positive elements it has with given length and odd count.

    Args:
        multiplier: q.
        length: k.
        odd: x.
        offsets_at_most: largest |d|, or None for every offset.

    >>> offset_counts(3, 8, 5), offset_counts(3, 8, 4)
    ({13: 7}, {25: 1, 35: 2, 175: 5})
    """
    sign = 1 if 2**length > multiplier**odd else -1
    counts: Counter[int] = Counter()
    for found in wanted_cycles(Frame(multiplier, length, odd), at_most=offsets_at_most):
        counts.update(found.offsets)
    return {sign * offset: counts[offset] for offset in sorted(counts)}


@lru_cache(maxsize=32)
def _kept(frame: Frame) -> tuple[tuple[int, int], ...]:
    """Return (|d|, least element) of every primitive cycle of this frame."""
    return tuple(pair for found in wanted_cycles(frame) for pair in zip(found.offsets, found.least, strict=True))


def _expected(cell: Cell) -> int:
    """Return about how many cycles ``cell`` has; exact when d is a multiple of D."""
    size = abs(cell.determinant)
    return lyndon_count(cell.length, cell.odd) * gcd(size, cell.offset) // size


class Census:
    """Enumeration of the words of a cell: the cycles of an offset d are the primitive ones of its divisors.

    Args:
        most_words: a cell with more aperiodic classes of words is refused.
        most_cycles: a cell that is likely to have more cycles is refused.
    """

    name = "census"
    family = Family.WORD

    def __init__(self, most_words: int = 10**12, most_cycles: int = 2_000_000) -> None:
        self.most_words, self.most_cycles = most_words, most_cycles

    def refusal(self, cell: Cell) -> str | None:
        """Return why census can't take ``cell``: too many words or too many cycles; else None."""
        if cell.length > _LONGEST:
            return f"length {cell.length} is above {_LONGEST}"
        if (cell.determinant > 0) != (cell.offset > 0):
            return None
        words = lyndon_count(cell.length, cell.odd)
        if words > self.most_words:
            return f"the cell has about 2^{words.bit_length() - 1} words; at most {self.most_words} are possible"
        if _expected(cell) > self.most_cycles:
            return f"about {_expected(cell)} cycles are expected; at most {self.most_cycles} can be listed"
        return None

    def estimate(self, cells: Sequence[Cell]) -> float:
        """Return the expected time of ``cells``, in seconds on one core; infinite for refused ones."""
        return sum(self._estimate(cell) for cell in cells)

    def _estimate(self, cell: Cell) -> float:
        if self.refusal(cell) is not None:
            return inf
        if (cell.determinant > 0) != (cell.offset > 0):
            return 0.0
        frame = Frame(cell.multiplier, cell.length, cell.odd)
        check = _CHECK if frame.fits_word() else _CHECK_WIDE
        return _START + _VISIT * lyndon_count(cell.length, cell.odd) + check * (1 + _expected(cell))

    def batches(self, cells: Sequence[Cell]) -> list[tuple[Cell, ...]]:
        """Return the cells of each map together."""
        by_map: dict[tuple[int, int], list[Cell]] = {}
        for cell in cells:
            by_map.setdefault((cell.multiplier, cell.offset), []).append(cell)
        return [tuple(group) for group in by_map.values()]

    def pieces(self, batch: tuple[Cell, ...], seconds: float) -> list[Piece]:
        """Deal the subtrees of every enumeration out to pieces of about ``seconds`` each."""
        count = max(1, ceil(min(_MOST_PIECES, self.estimate(batch) / max(seconds, 0.01))))
        return [Piece(self.name, batch, i, count) for i in range(count)]

    def run(self, piece: Piece, budget: Budget) -> PieceResult:
        """Run over one share of the words of each cell of ``piece``."""
        started = time.thread_time()
        deadline = None if budget.seconds is None else time.monotonic() + budget.seconds
        most = self.most_cycles if budget.memory is None else min(self.most_cycles, budget.memory // _HIT_BYTES)
        hits: set[Hit] = set()
        reason = ""
        try:
            for cell in piece.cells:
                for least in _cycles(cell, Share(piece.index, piece.count), deadline):
                    hits.update(Hit(cell.length, cell.odd, n) for n in least if n > cell.above)
                    if len(hits) > most:
                        raise CapacityError(self.name, f"more than {most} cycles")  # noqa: TRY301 - one way out
        except CapacityError as limit:
            reason = limit.reason
        seconds = time.thread_time() - started
        return PieceResult(piece, tuple(sorted(hits)), not reason, reason, seconds=seconds)


def _cycles(cell: Cell, share: Share, deadline: float | None) -> Iterator[list[int]]:
    """Yield the least elements of the cycles of ``cell`` in this share, block by block."""
    if (cell.determinant > 0) != (cell.offset > 0):
        return
    frame = Frame(cell.multiplier, cell.length, cell.odd)
    common, size = gcd(cell.determinant, cell.offset), abs(cell.offset)
    if share.count == 1 and frame.fits_word() and lyndon_count(cell.length, cell.odd) <= _KEPT_WORDS:
        yield [size // offset * n for offset, n in _kept(frame) if common % offset == 0]
        return
    for found in wanted_cycles(frame, dividing=common, share=share, deadline=deadline):
        yield [size // offset * n for offset, n in zip(found.offsets, found.least, strict=True)]


ENGINE = Census()
