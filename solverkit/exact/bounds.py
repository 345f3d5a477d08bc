"""Upper bounds of the least element of a cell: product bound U and balanced bound U'."""

from __future__ import annotations

from math import gcd
from typing import TYPE_CHECKING

from flint import arb, fmpz

from solverkit.exact.enclosures import floor_if_decided, precision

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = ["EXACT_LENGTH", "balanced_beta", "balanced_bound", "balanced_interval", "product_bound", "product_holds"]

#: Up to this length the integer inequality itself decides a bound; beyond, rigorous enclosures do.
EXACT_LENGTH = 20_000
_MOST_BITS = 1 << 24


def _sign_fits(cell: Cell) -> bool:
    """Tell whether sign(D) = sign(d), for a cell of positive elements."""
    if cell.length <= EXACT_LENGTH:
        return (cell.determinant > 0) == (cell.offset > 0)
    bits = 64 + cell.length.bit_length() * 2
    while True:
        with precision(bits):
            distance = cell.length - cell.odd * arb(cell.multiplier).log() / arb(2).log()
            if not distance.contains(0):
                return bool(distance > 0) == (cell.offset > 0)
        bits *= 2


def product_holds(cell: Cell, n: int) -> bool:
    """Tell whether 2^k·n^x ≤ (q·n + d)^x (d > 0), or ≥ with q·n + d > 0 or n too small for that (d < 0).

    A least element n satisfies it, since Π (q·n_i + d) = 2^k·Π n_i over the odd elements; it holds exactly for the
    n ≥ 1 up to U. Source: Böhm & Sontacchi (1978); Eliahou, Discrete Math. 118 (1993) 45-56.
    """
    image = cell.multiplier * n + cell.offset
    if cell.offset < 0 and image <= 0:
        return True
    left, right = fmpz(n) ** cell.odd << cell.length, fmpz(image) ** cell.odd
    return bool(left <= right) if cell.offset > 0 else bool(left >= right)


def product_bound(cell: Cell) -> int:
    """Return U, the largest n that passes the product inequality; 0 when no cycle has positive elements.

    Args:
        cell: of positive elements; its bound ``above`` is not used.

    The closed form ⌊|d| / |2^(k/x) − q|⌋ proposes the value in ball arithmetic; up to length 20,000 two integer
    inequalities decide it, beyond that the enclosure decides alone. A few hundred microseconds at k = 1,000,
    milliseconds at k = 5,000.
    """
    if not _sign_fits(cell):
        return 0
    proposed = _closed_form(cell)
    if cell.length <= EXACT_LENGTH:
        while proposed and not product_holds(cell, proposed):
            proposed -= 1
        while product_holds(cell, proposed + 1):
            proposed += 1
    return proposed


def _closed_form(cell: Cell) -> int:
    """Return ⌊|d| / |2^(k/x) − q|⌋; for k ≤ 20,000 the result may be off by one, which the caller mends."""
    size = abs(cell.offset)
    if cell.length % cell.odd == 0:
        return size // abs((1 << (cell.length // cell.odd)) - cell.multiplier)
    bits = 64 + 2 * cell.length.bit_length() + size.bit_length()
    while True:
        with precision(bits):
            gap = (arb(2).log() * cell.length / cell.odd - arb(cell.multiplier).log()).expm1() * cell.multiplier
            value = abs(arb(size) / gap)
            decided = floor_if_decided(value)
            if decided is None and cell.length <= EXACT_LENGTH and value.rad() < 1:
                middle = value.mid().floor().unique_fmpz()
                decided = None if middle is None else int(middle)
        if decided is not None:
            return decided
        bits *= 2  # ends: 2^(k/x) is irrational here, so the value is no integer
        if bits > _MOST_BITS:
            raise ArithmeticError(f"no enclosure of the product bound of {cell} within {_MOST_BITS} bits")


def balanced_beta(multiplier: int, length: int, odd: int) -> int:
    """Return β* = Σ_j q^(x−1−j)·2^⌊j·k/x⌋, the largest least β over the rotations of any word of this cell.

    Source: Halbeisen & Hungerbühler, Acta Arith. 78 (1997) 227-239 (Lemma 5 and Corollary 1, for q = 3).

    >>> balanced_beta(3, 27, 17)
    548440271
    """
    value = 0
    for j in range(odd):
        value = value * multiplier + (1 << (j * length // odd))
    return value


def balanced_bound(cell: Cell) -> int:
    """Return U' = ⌊|d|·β*/|D|⌋; no least element of the cell exceeds it; 0 when no cycle has positive elements.

    Args:
        cell: of positive elements, of length at most 20,000; its bound ``above`` is not used.

    Some rotation of every word has its j-th odd step no later than ⌊j·k/x⌋ (cycle lemma), and U' is attained when
    D divides d·β*. Source: Halbeisen & Hungerbühler, Acta Arith. 78 (1997) 227-239.
    """
    determinant = cell.determinant
    if (determinant > 0) != (cell.offset > 0):
        return 0
    return abs(cell.offset) * balanced_beta(cell.multiplier, cell.length, cell.odd) // abs(determinant)


def balanced_interval(cell: Cell) -> tuple[int, int]:
    """Return integers a ≤ U' ≤ b, at any length and in constant time; (0, 0) when no cycle has positive elements.

    Args:
        cell: of positive elements; its bound ``above`` is not used.

    With ρ = 2^(k/x)/q, β*/q^(x−1) = Σ_j ρ^j·2^(−{jk/x}). For g = gcd(k, x) the fractional parts run g times through
    0, g/x, 2g/x, …, so the sum lies between S and S·ρ^(x−1), S = g/(2·(1 − 2^(−g/x))). The ends differ by a factor
    ρ^(x−1) = 2^(δ·(x−1)/x), δ = k − x·log2 q: close where the bound is large.
    """
    if not _sign_fits(cell):
        return 0, 0
    k, x, common = cell.length, cell.odd, gcd(cell.length, cell.odd)
    with precision(128 + 4 * k.bit_length() + abs(cell.offset).bit_length()):
        two, log_q = arb(2).log(), arb(cell.multiplier).log()
        total = arb(common) / (2 * -(-two * common / x).expm1())
        rise = k * two - x * log_q  # ln ρ^x
        last = (rise * (x - 1) / x).exp()
        scale = arb(abs(cell.offset)) * total / (cell.multiplier * abs(rise.expm1()))
        ends = [scale * factor for factor in (arb(1), last)]
        low = min(ends, key=lambda ball: ball.lower()).lower().floor().unique_fmpz()
        high = max(ends, key=lambda ball: ball.upper()).upper().floor().unique_fmpz()
    if low is None or high is None:
        raise ArithmeticError(f"no enclosure of the balanced bound of {cell}")
    return int(low), int(high)
