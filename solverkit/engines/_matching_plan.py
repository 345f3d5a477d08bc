"""Which of the three ways a cell is matched, what it costs, and which cells are refused."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum
from functools import lru_cache
from math import ceil, comb, inf, isqrt
from typing import TYPE_CHECKING

from solverkit.engines._matching_split import Split, best_split
from solverkit.engines._matching_substitution import modulus
from solverkit.window import Sign

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = ["DEFAULT_MEMORY", "Plan", "Way", "plan", "refusal"]

#: About as many streams write out a half, if memory allows; at k = 72, 1,500 and 3,000 take as long with their set-up.
_STREAMS = 2_000

#: Bytes for one piece when the budget names none; two pieces at a time then stay within 4 GiB.
DEFAULT_MEMORY = 2 << 30

_FEW_WORDS = 2_000
_SHORT_HALF = 1 << 20
_MOST_ELEMENTS = 1 << 43
_MOST_LENGTH = 5_000
#: Expected cycles beyond which listing them is no use.
_MANY_CYCLES = 100_000

# Seconds, on one core of 2025; the join measured at k = 60 … 80, where it slows down as the lists outgrow the caches.
_PER_WORD = 12e-6
_PER_SORTED = 150e-9
_PER_STREAMED = 1.9e-9
_SLOWER = 0.12
_PER_LISTED = 25e-9
_START = 0.1
_PER_HIT = 100e-6


class Way(StrEnum):
    """The ladder: the definition made code, both halves sorted whole, both halves streamed by buckets."""

    ENUMERATED = "enumerated"
    SORTED = "sorted"
    STREAMED = "streamed"


@dataclass(frozen=True, slots=True)
class Plan:
    """How a cell of k steps and x odd ones is matched.

    Args:
        words: ⌊C(k, x)/k⌋, about the number of necklaces.
        way: which way.
        split: where words are cut; None when they are enumerated whole.
    """

    words: int
    way: Way
    split: Split | None

    def most_tails(self, memory: int) -> int:
        """Return the length that the lists of a half may have: long ones save time, short ones memory and set-up."""
        assert self.split is not None
        longer = max(self.split.left_count, self.split.right_count)
        if self.way is Way.SORTED:
            return longer
        # Some ten lists a half, 8 bytes a value, four times that while the second half is built.
        return max(min(longer // _STREAMS, memory // (8 * 10 * 5)), 1 << 12)

    def seconds_of_setup(self) -> float:
        """Return the expected time that every piece spends before its first bucket."""
        return _START + _PER_LISTED * 20 * self.most_tails(DEFAULT_MEMORY) if self.way is Way.STREAMED else 0.0

    def seconds(self) -> float:
        """Return the expected time of all pieces without set-up."""
        if self.split is None:
            return _PER_WORD * (self.words + 1)
        elements = self.split.elements
        if self.way is Way.SORTED:
            return _PER_SORTED * elements
        return _PER_STREAMED * elements * (1 + _SLOWER * max(0, elements.bit_length() - 32))

    def count(self, seconds: float) -> int:
        """Return into how many pieces of about ``seconds`` to cut; set-up stays below a quarter of each."""
        if self.way is not Way.STREAMED:
            return 1
        work = self.seconds()
        return max(1, min(ceil(work / max(seconds, 1e-3)), int(work / (3 * self.seconds_of_setup())), 10_000))


@lru_cache(maxsize=4096)
def plan(length: int, odd: int) -> Plan | None:
    """Return the plan for words of this length and odd count, or None when they are too many."""
    if length > _MOST_LENGTH:
        return None
    words = comb(length, odd) // length
    if words <= _FEW_WORDS:
        return Plan(words, Way.ENUMERATED, None)
    if 2 * isqrt(words) > _MOST_ELEMENTS:
        return None
    split = best_split(length, odd)
    if split.elements > _MOST_ELEMENTS:
        return None
    short = max(split.left_count, split.right_count) <= _SHORT_HALF
    return Plan(words, Way.SORTED if short else Way.STREAMED, split)


def refusal(cell: Cell) -> str | None:
    """Return why ``cell`` is not matched, or None."""
    if cell.sign is not Sign.POSITIVE:
        return "it asks for negative elements: reflect the cell first"
    if cell.length > _MOST_LENGTH:
        return f"length {cell.length} is over {_MOST_LENGTH}"
    chosen = plan(cell.length, cell.odd)
    if chosen is None:
        return f"its half words number over 2^{_MOST_ELEMENTS.bit_length() - 1}"
    if chosen.way is not Way.ENUMERATED and chosen.words > _MANY_CYCLES * modulus(cell) and has_right_sign(cell):
        return f"too many cycles are expected (about {chosen.words // modulus(cell)}); tally counts them"
    return None


def has_right_sign(cell: Cell) -> bool:
    """Tell whether sign(D) = sign(d), without which no element is positive (Böhm & Sontacchi 1978)."""
    return (cell.determinant > 0) == (cell.offset > 0)


def expected_seconds(cell: Cell) -> float:
    """Return the expected time for ``cell`` on one core, infinite when it is refused."""
    if refusal(cell) is not None:
        return inf
    chosen = plan(cell.length, cell.odd)
    assert chosen is not None
    if not has_right_sign(cell):
        return _PER_WORD
    hits = 0.0 if chosen.way is Way.ENUMERATED else _PER_HIT * (chosen.words / modulus(cell))
    return chosen.seconds() + chosen.seconds_of_setup() + hits
