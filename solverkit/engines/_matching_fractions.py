"""The contributions to β as fractions of the modulus, in 64-bit fixed point with natural wrap-around."""

from __future__ import annotations

import hashlib
from math import gcd
from typing import TYPE_CHECKING

import numpy as np

from solverkit.engines._matching_substitution import modulus

if TYPE_CHECKING:
    import numpy.typing as npt

    from solverkit.window import Cell

__all__ = ["fractions", "slack", "unit"]

_FULL = (1 << 64) - 1


def slack(odd: int) -> int:
    """Return ⌊x/2⌋, how far from 0 modulo 2^64 the rounded fractions of a word with D' | β can sum.

    Each rounded fraction differs from w·2^64/D' by at most 1/2, and the exact ones sum to (u·β/D')·2^64, a multiple of
    2^64 when D' divides β. The rounded sum is an integer within x/2 of that multiple. Hence no word is missed; the
    words met by chance are left to exact substitution.

    >>> slack(45)
    22
    """
    return odd // 2


def fractions(cell: Cell) -> npt.NDArray[np.uint64]:
    """Return the table y[i, j] = round(u·q^(x−1−i)·2^j mod D' · 2^64/D'), of shape (x, k).

    The contribution to β of an i-th odd step (from 0) at step j is q^(x−1−i)·2^j (Böhm & Sontacchi 1978). The unit
    u modulo D' spreads the sums evenly over the circle; it is a fixed function of the cell. One code serves every D',
    of 5 bits or of 500.
    """
    size = modulus(cell)
    table = np.zeros((cell.odd, cell.length), np.uint64)
    scale = unit(cell)
    for i in range(cell.odd):
        weight = pow(cell.multiplier, cell.odd - 1 - i, size) * scale % size
        for j in range(cell.length):
            table[i, j] = (((weight << 65) // size + 1) >> 1) & _FULL
            weight = 2 * weight % size
    return table


def unit(cell: Cell) -> int:
    """Return a unit modulo D' that looks random and depends on nothing but the cell."""
    size = modulus(cell)
    seed = f"{cell.multiplier} {cell.offset} {cell.length} {cell.odd}"
    value = int.from_bytes(hashlib.shake_256(seed.encode()).digest(size.bit_length() // 8 + 16), "big") % size
    while gcd(value, size) != 1:
        value = (value + 1) % size
    return value
