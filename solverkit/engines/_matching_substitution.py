"""From a parity word that may close to a cycle of the map: exact substitution, in Python integers."""

from __future__ import annotations

from math import gcd
from typing import TYPE_CHECKING

from solverkit.methods import Hit

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = ["modulus", "substituted"]


def modulus(cell: Cell) -> int:
    """Return D' = |D|/gcd(D, d): a word gives integers n = d·β/D exactly when D' divides β."""
    size = abs(cell.determinant)
    return size // gcd(size, cell.offset)


def substituted(cell: Cell, word: int) -> Hit | None:
    """Return the cycle of ``cell`` that follows ``word``, or None.

    Args:
        cell: of positive elements; any odd offset.
        word: bit j is the parity of step j, 0 ≤ j < k.

    The candidate n = d·β/D (Böhm & Sontacchi 1978) is iterated: it must be a positive integer that follows the word and
    returns after k steps and no earlier. A word that repeats a shorter one returns earlier and gives None.
    Costs k steps of Python integers.
    """
    step, beta, length = cell.map.step, 0, cell.length
    for position in range(length):
        if word >> position & 1:
            beta = cell.multiplier * beta + (1 << position)
    start, remainder = divmod(cell.offset * beta, cell.determinant)
    if remainder or start <= 0:
        return None
    value = least = start
    for position in range(length):
        if value & 1 != word >> position & 1 or (value == start and position):
            return None
        value = step(value)
        least = min(least, value)
    if value != start or least <= cell.above:
        return None
    return Hit(length, cell.odd, least)
