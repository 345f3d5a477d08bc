"""Reduction of a cell by the common factor of d and D."""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import gcd
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = ["Reduction", "reduced", "reduced_offset"]


@dataclass(frozen=True, slots=True)
class Reduction:
    """A cell and the smaller cell that has the same cycles up to a factor.

    Args:
        cell: positive elements; its offset divides D up to sign.
        factor: what its elements are multiplied by to give elements of the original cell; negative when the
            original asks for negative elements.
    """

    cell: Cell
    factor: int


def reduced_offset(multiplier: int, offset: int, length: int, odd: int) -> int:
    """Return g with the sign of ``offset``, g = gcd(|d|, |D|), D = 2^k − q^x, without building D when it is large.

    Raises:
        InputError: never for an odd multiplier and offset.
    """
    size = abs(offset)
    remainder = (pow(2, length, size) - pow(multiplier, odd, size)) % size if size > 1 else 0
    common = gcd(size, remainder)
    return common if offset > 0 else -common


def reduced(cell: Cell) -> Reduction:
    """Return the reduced cell of ``cell``.

    Every element of every cycle is a multiple of s = |d|/gcd(|d|, |D|), because n·D = d·β (Böhm & Sontacchi 1978);
    dividing by s gives the cycles of (q, d/s) of the same length and odd count, with bound ⌊B/s⌋.

    >>> from solverkit.window import Cell
    >>> reduced(Cell(3, 29, 27, 17, above=100)).cell
    Cell(multiplier=3, offset=1, length=27, odd=17, above=3, sign=<Sign.POSITIVE: 1>)
    """
    positive = cell.positive()
    common = reduced_offset(cell.multiplier, positive.offset, cell.length, cell.odd)
    scale = positive.offset // common
    return Reduction(replace(positive, offset=common, above=cell.above // scale), scale * cell.sign)
