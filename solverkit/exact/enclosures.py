"""Rigorous enclosures of logarithms, from ball arithmetic.

Source of the arithmetic: Johansson, "Arb: efficient arbitrary-precision midpoint-radius interval arithmetic", IEEE
Trans. Comput. 66 (2017), through python-flint.
"""

from __future__ import annotations

from contextlib import contextmanager
from fractions import Fraction
from functools import lru_cache
from typing import TYPE_CHECKING

from flint import arb, ctx, fmpq

if TYPE_CHECKING:
    from collections.abc import Iterator

__all__ = ["floor_if_decided", "log2_bounds", "power_of_two_exponent", "precision"]


@contextmanager
def precision(bits: int) -> Iterator[None]:
    """Compute balls with ``bits`` bits inside the block."""
    before = ctx.prec
    ctx.prec = bits
    try:
        yield
    finally:
        ctx.prec = before


def _exact(endpoint: arb) -> Fraction:
    mantissa, exponent = (int(part) for part in endpoint.man_exp())
    return Fraction(mantissa << exponent) if exponent >= 0 else Fraction(mantissa, 1 << -exponent)


@lru_cache(maxsize=4096)
def log2_bounds(value: Fraction, bits: int) -> tuple[Fraction, Fraction]:
    """Return rationals below and above log2 ``value`` that differ by about 2^(−bits).

    Args:
        value: positive.
        bits: working precision.
    """
    with precision(bits):
        ball = arb(fmpq(value.numerator, value.denominator)).log() / arb(2).log()
        return _exact(ball.lower()), _exact(ball.upper())


def power_of_two_exponent(value: Fraction) -> int | None:
    """Return e when ``value`` = 2^e, else None; only then is log2 of a positive rational rational."""
    top, bottom = value.numerator, value.denominator
    if top < 1 or top & (top - 1) or bottom & (bottom - 1):
        return None
    return top.bit_length() - bottom.bit_length()


def floor_if_decided(ball: arb) -> int | None:
    """Return the floor when every number in ``ball`` has the same one, else None."""
    if not ball.is_finite():
        return None
    low, high = _exact(ball.lower()), _exact(ball.upper())
    below, above = low.numerator // low.denominator, high.numerator // high.denominator
    return below if below == above else None
