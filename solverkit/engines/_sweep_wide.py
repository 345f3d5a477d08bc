"""Exact orbits of single candidates in 128-bit integers; what leaves them goes to Python integers."""
# mypy: disable-error-code="no-untyped-def,misc,no-any-return,untyped-decorator,no-untyped-call,call-arg"
# ruff: noqa: ANN001, ANN202, ARG001 - numba calls these with its own objects

from __future__ import annotations

import numpy as np
from llvmlite import ir
from numba import njit, types
from numba.extending import intrinsic

__all__ = ["CLOSED", "DROPPED", "LEFT", "OPEN", "follow", "follow_all"]

#: What became of an orbit: it fell below its start or met a limit, returned, left 126 bits, or used up its steps.
DROPPED, CLOSED, LEFT, OPEN = 0, 1, 2, 3
_U = np.uint64
_ONE = _U(1)
_TOP_BITS = _U(1 << 62)


@intrinsic
def _next(typing, high, low, q, d):
    """Return the two 64-bit halves of T(v) for the signed 128-bit v they hold; d is signed."""

    def code(context, builder, signature, arguments):
        word, wide = ir.IntType(64), ir.IntType(128)
        high, low, q, d = arguments
        shift, one = ir.Constant(wide, 64), ir.Constant(wide, 1)
        value = builder.or_(builder.shl(builder.zext(high, wide), shift), builder.zext(low, wide))
        grown = builder.add(builder.mul(value, builder.zext(q, wide)), builder.sext(d, wide))
        is_odd = builder.trunc(value, ir.IntType(1))
        image = builder.ashr(builder.select(is_odd, grown, value), one)
        halves = [builder.trunc(builder.lshr(image, shift), word), builder.trunc(image, word)]
        return context.make_tuple(builder, signature.return_type, halves)

    word = types.uint64
    return types.UniTuple(word, 2)(word, word, word, types.int64), code


@njit(cache=True, nogil=True)
def follow(high, low, q, d, length, odd, limit):
    """Follow the orbit of n = high·2^64 + low, 0 < n < 2^126.

    Args:
        high: upper half of n.
        low: lower half of n.
        q: multiplier.
        d: offset.
        length: most steps.
        odd: most odd steps.
        limit: an upper half below this can be multiplied by q.

    Returns:
        (what became of it, steps, odd steps).
    """
    start_high, start_low = high, low
    done, odds = 0, 0
    while done < length:
        if low & _ONE:
            if high >= limit:
                return LEFT, done, odds
            odds += 1
            if odds > odd:
                return DROPPED, done, odds
        high, low = _next(high, low, q, d)
        done += 1
        if high <= start_high or high >= _TOP_BITS:
            if high == start_high:
                if low == start_low:
                    return CLOSED, done, odds
                if low < start_low:
                    return DROPPED, done, odds
            else:  # smaller, or negative
                return DROPPED, done, odds
    return OPEN, done, odds


@njit(cache=True, nogil=True)
def follow_all(labels, base_high, base_low, q, d, length, odd, limit, keep_open, rows):
    """Follow the orbits of base + label; keep in ``rows`` those that closed, left, or (if wanted) used up their steps.

    Args:
        labels: uint64 array.
        base_high: upper half of the base.
        base_low: lower half of the base.
        q: multiplier.
        d: offset.
        length: most steps.
        odd: most odd steps.
        limit: as in `follow`.
        keep_open: whether orbits that used up their steps are kept.
        rows: int64[len(labels), 4]; row i becomes (index of the label, what became of it, steps, odd steps).

    Returns:
        number of rows.
    """
    count = 0
    for index in range(len(labels)):
        low = base_low + labels[index]
        high = base_high + (_ONE if low < base_low else _U(0))
        state, done, odds = follow(high, low, q, d, length, odd, limit)
        if state == CLOSED or state == LEFT or (keep_open and state == OPEN):  # noqa: PLR1714, SIM109 - numba has no sets
            rows[count, 0], rows[count, 1], rows[count, 2], rows[count, 3] = index, state, done, odds
            count += 1
    return count
