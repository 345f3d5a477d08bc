"""Expected number of cycles in a cell and the chance of at least one, by the equidistribution heuristic."""

from __future__ import annotations

from decimal import Decimal
from math import gcd
from typing import TYPE_CHECKING

from flint import arb, fmpz

from solverkit.exact.enclosures import precision
from solverkit.words import lyndon_count

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = ["Forecast", "forecast"]

from dataclasses import dataclass

_DIGITS = 9


@dataclass(frozen=True, slots=True)
class Forecast:
    """What the heuristic says of a cell; it decides nothing.

    Args:
        words: N, the number of Lyndon words of the cell.
        expected: expected number of cycles, N·gcd(D, d)/|D|.
        chance: of at least one, 1 − (1 − gcd(D, d)/|D|)^N.
    """

    words: int
    expected: Decimal
    chance: Decimal


def forecast(cell: Cell) -> Forecast:
    """Return the forecast of ``cell``, taking the residues of β mod D/gcd(D, d) as equally likely.

    Source: common practice, no source; for q = 3 compare Lagarias, Acta Arith. 56 (1990) 33-53.
    """
    words = lyndon_count(cell.length, cell.odd)
    size = abs(cell.determinant)
    modulus = size // gcd(size, cell.offset)
    with precision(2 * _DIGITS * 4 + 64):
        count = arb(fmpz(words))
        expected = count / fmpz(modulus)
        if modulus == 1:
            chance = arb(min(words, 1))
        else:
            chance = -(count * (-1 / arb(fmpz(modulus))).log1p()).expm1()
        return Forecast(words, _decimal(expected), _decimal(chance))


def _decimal(ball: arb) -> Decimal:
    mantissa, _, exponent = ball.mid_rad_10exp(_DIGITS)
    return Decimal(int(mantissa)).scaleb(int(exponent))
