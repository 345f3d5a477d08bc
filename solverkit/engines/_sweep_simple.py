"""The plain kernel: every odd candidate, one step of the map at a time, in 64-bit integers."""
# mypy: disable-error-code="no-untyped-def,misc,no-any-return,untyped-decorator"
# ruff: noqa: ANN001, ANN201 - numba infers the types

from __future__ import annotations

import numpy as np
from numba import njit

__all__ = ["ROWS", "scan"]

#: Rows of the table that `scan` fills.
ROWS = 4096


@njit(cache=True, nogil=True)
def scan(q, d, first, last, length, odd, limit, work, rows):
    """Iterate the odd integers from ``first`` (odd) to ``last`` until they drop, return, or exceed the limits.

    Args:
        q: multiplier.
        d: offset.
        first: first candidate, odd.
        last: last candidate, below 2^62.
        length: most steps.
        odd: most odd steps.
        limit: largest v for which q·v + d is sure to fit in 63 bits.
        work: stop at the next candidate after this many steps.
        rows: int64[ROWS, 3]; row i becomes (n, k, x) for a cycle, (n, 0, 0) for an orbit that left 63 bits.

    Returns:
        (number of rows, next candidate, steps done).
    """
    count = 0
    steps = 0
    n = first
    capacity = rows.shape[0]
    while n <= last and steps < work and count < capacity:
        value = n
        done = 0
        odds = 0
        while True:
            if value & 1:
                if value > limit:
                    rows[count, 0] = n
                    rows[count, 1] = 0
                    rows[count, 2] = 0
                    count += 1
                    break
                value = (q * value + d) >> 1
                odds += 1
            else:
                value >>= 1
            done += 1
            if value <= n:
                if value == n and done <= length and odds <= odd:
                    rows[count, 0] = n
                    rows[count, 1] = done
                    rows[count, 2] = odds
                    count += 1
                break
            if done >= length or odds > odd:
                break
        steps += done
        n += 2
    return count, n, steps


def table() -> np.ndarray:
    """Return an empty table for `scan`."""
    return np.zeros((ROWS, 3), np.int64)
