"""Ledger: what the growth of an orbit costs a cycle, for maps whose orbits mostly grow.

Let n be the least element of a cycle of length k with x odd elements n_i, and r_i = n/n_i ≤ 1. From the product
identity Π (q + d/n_i) = 2^k (Böhm & Sontacchi 1978):

* d > 0, c = d/n: Σ ln((q + c)/(q + c·r_i)) = x·ln(q + c) − k·ln 2; each term is convex in r_i and 0 at r_i = 1, hence
  at least (1 − r_i)·c/(q + c);
* d < 0, c = |d|/n: Σ ln((q − c·r_i)/(q − c)) = k·ln 2 − x·ln(q − c); each term is concave in r_i, hence at least
  (1 − r_i)·ln(q/(q − c)).

So Σ (1 − r_i) ≤ R with R = (q + c)/c·(x·ln(q + c) − k·ln 2), or R = (k·ln 2 − x·ln(q − c))/ln(q/(q − c)); either grows
with c (its derivative has the sign of x·c − q·w ≥ 0, or is that of x − const/L), so the least n of a block gives the
largest R. All terms are at least 0, so the inequality holds for every part of the cycle too: an orbit whose first
j ≤ k steps spend more than R is no cycle of the cell.

What an odd step spends is bounded below by the parities alone. After j steps with a odd ones the value is
n·Π(q + d/n_i)/2^j, which for d > 0 is at least n·q^a/2^j, and for d < 0 at least n·q^a/2^j·2^k/q^x, the factors that
are missing from the product being at most q. So r_i ≤ κ·2^j/q^a, with κ = 1, or κ = q^x/2^k.

The unit is 2^(−16); every rounding is to the safe side.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np
from flint import arb

from solverkit.exact.enclosures import precision

if TYPE_CHECKING:
    from collections.abc import Iterable

    from numpy.typing import NDArray

    from solverkit.window import Cell

__all__ = ["RATIO_BITS", "UNIT", "Allowance", "allowance", "charges", "macro_entries"]

UNIT = 1 << 16
RATIO_BITS = 28
_BITS = 192
_MOST_RATIO = 8
#: κ is rounded up to a multiple of this part, so that neighbouring blocks share their tables.
_GRAIN = 32


@dataclass(frozen=True, slots=True)
class Allowance:
    """What the cells allow every candidate of a block.

    Args:
        budget: most units that the first ``shortest`` steps of a cycle spend.
        ratio: κ in units of 1/32, rounded up.
        shortest: least length of a cell that reaches the block.
        longest: largest length of such a cell.
        most_odd: largest odd count of such a cell.
    """

    budget: int
    ratio: int
    shortest: int
    longest: int
    most_odd: int


def allowance(cells: Iterable[Cell], floor: int) -> Allowance | None:
    """Return the allowance of ``cells``, all of which reach the block that starts at ``floor``; None if it is no use.

    Cost: two logarithms of 192 bits a cell, for the few cells whose odd count exceeds the budget found so far.
    """
    there = sorted(cells, key=lambda cell: -cell.odd)
    if not there:
        return None
    q, d = there[0].multiplier, there[0].offset
    if q * floor + d <= floor:
        return None
    budget, ratio = 0, _GRAIN
    with precision(_BITS):
        slope = arb(q * floor + d) / floor
        per_odd, two = slope.log(), arb(2).log()
        unit = slope * floor / d if d > 0 else 1 / (arb(q) / slope).log()
        for cell in there:
            # R ≤ x, for the product identity leaves at most one unit of (1 − r) to each odd element.
            if d > 0 and cell.odd * UNIT <= budget:
                break
            surplus = cell.odd * per_odd - cell.length * two
            allowed = unit * (surplus if d > 0 else -surplus)
            units = _ceiling(allowed * UNIT)
            budget = max(budget, min(units, cell.odd * UNIT))
            if d < 0:
                excess = (cell.odd * arb(q).log() - cell.length * two).exp() * _GRAIN
                ratio = max(ratio, _ceiling(excess))
    if ratio > _MOST_RATIO * _GRAIN or budget >= 1 << 30:
        return None
    lengths = [cell.length for cell in there]
    return Allowance(budget, ratio, min(lengths), max(lengths), there[0].odd)


def _ceiling(ball: arb) -> int:
    """Return the least integer that no number in ``ball`` exceeds."""
    integer = ball.upper().ceil().unique_fmpz()
    if integer is None:
        raise ArithmeticError("a ball without an upper end")
    return int(integer)


def _relief(multiplier: int, ratio: int, position: int, odd: int, scale: int) -> int:
    """Return ⌈scale·κ·2^position/q^odd⌉."""
    top = scale * ratio << position
    return -int(-top // (_GRAIN * multiplier**odd))


@lru_cache(maxsize=64)
def charges(multiplier: int, ratio: int, depth: int) -> NDArray[np.int64]:
    """Return what an odd step spends at least, by (position, odd steps before it): int64[depth, depth + 1]."""
    table = np.zeros((depth, depth + 1), np.int64)
    for j in range(depth):
        for a in range(j + 1):
            table[j, a] = max(0, UNIT - _relief(multiplier, ratio, j, a, UNIT))
    return table


def start_ratio(multiplier: int, ratio: int, position: int, odd: int) -> int:
    """Return an upper bound of κ·2^position/q^odd as a multiple of 2^(−28), at most κ."""
    cap = -(-(ratio << RATIO_BITS) // _GRAIN)
    return min(cap, _relief(multiplier, ratio, position, odd, 1 << RATIO_BITS))


def cap(ratio: int) -> int:
    """Return κ as a multiple of 2^(−28), rounded up: n/v ≤ 1 for every value v of a candidate that still lives."""
    return -(-(ratio << RATIO_BITS) // _GRAIN)


@lru_cache(maxsize=64)
def macro_entries(multiplier: int, offset: int) -> NDArray[np.uint64]:
    """Return Q, t, charge, relief and growth of the 16 macro-steps of four steps, one after the other.

    With v the value at the start and ρ ≥ κ·n/v: the odd steps spend at least charge − ρ·relief, and afterwards ρ is
    multiplied by growth/2^24 = 2^4/q^a.
    """
    rows: list[list[int]] = [[], [], [], [], []]
    for residue in range(16):
        value, odd, relief = residue, 0, 0
        for j in range(4):
            if value & 1:
                relief += -(-(UNIT << j) // multiplier**odd)
                value, odd = (multiplier * value + offset) >> 1, odd + 1
            else:
                value >>= 1
        growth = -(-(1 << 28) // multiplier**odd)
        for row, entry in zip(rows, (multiplier**odd, value, odd * UNIT, relief, growth), strict=True):
            row.append(entry & (1 << 64) - 1)
    return np.array([entry for row in rows for entry in row], np.uint64)
