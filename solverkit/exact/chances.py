"""Expected number of cycles in a cell and the chance of at least one, by the equidistribution heuristic."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from math import gcd
from typing import TYPE_CHECKING

from flint import arb, fmpz

from solverkit.exact.bounds import EXACT_LENGTH
from solverkit.exact.enclosures import precision
from solverkit.exact.reduction import reduced_offset
from solverkit.words import lyndon_count

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = ["Forecast", "forecast"]

_DIGITS = 9


@dataclass(frozen=True, slots=True)
class Forecast:
    """What the heuristic says of a cell; it decides nothing.

    Args:
        words: N, the number of Lyndon words of the cell; None beyond length 20,000.
        expected: expected number of cycles, N·gcd(D, d)/|D|.
        chance: of at least one, 1 − (1 − gcd(D, d)/|D|)^N.
    """

    words: int | None
    expected: Decimal
    chance: Decimal


def forecast(cell: Cell) -> Forecast:
    """Return the forecast of ``cell``, taking the residues of β mod D/gcd(D, d) as equally likely.

    Beyond length 20,000 the number of words is taken as C(k, x)/k, which periodic words change beyond all digits shown.
    Source: common practice, no source; for q = 3 compare Lagarias, Acta Arith. 56 (1990) 33-53.
    """
    if cell.length > EXACT_LENGTH:
        return _vast(cell)
    words = lyndon_count(cell.length, cell.odd)
    size = abs(cell.determinant)
    modulus = size // gcd(size, cell.offset)
    with precision(2 * _DIGITS * 4 + 64):
        count = arb(fmpz(words))
        expected = count / fmpz(modulus)
        certain = arb(min(words, 1))
        chance = certain if modulus == 1 else -(count * (-1 / arb(fmpz(modulus))).log1p()).expm1()
        return Forecast(words, _decimal(expected), _decimal(chance))


def _vast(cell: Cell) -> Forecast:
    common = abs(reduced_offset(cell.multiplier, cell.offset, cell.length, cell.odd))
    with precision(4 * cell.length.bit_length() + 2 * _DIGITS * 4 + 64):
        k, x = arb(cell.length), arb(cell.odd)
        choices = (k + 1).lgamma() - (x + 1).lgamma() - (k - x + 1).lgamma() - k.log()
        power = x * arb(cell.multiplier).log()
        gap = (k * arb(2).log() - power).expm1()
        expected = (choices - power - abs(gap).log() + arb(common).log()).exp()
        return Forecast(None, _decimal(expected), _decimal(-(-expected).expm1()))


def _decimal(ball: arb) -> Decimal:
    mantissa, _, exponent = ball.mid_rad_10exp(_DIGITS)
    return Decimal(f"{mantissa}E{exponent}")
