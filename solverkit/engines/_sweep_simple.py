"""The plain kernel: candidate by candidate, one step of the map at a time, in 64 bits and then in 128 bits."""
# mypy: disable-error-code="no-untyped-def,misc,no-any-return,untyped-decorator"
# ruff: noqa: ANN001, ANN202 - numba infers the types

from __future__ import annotations

import numpy as np
from numba import njit

from solverkit.engines._sweep_wide import CLOSED, DROPPED, follow

__all__ = ["ROWS", "scan"]

#: Rows of the table that `scan` fills.
ROWS = 4096
_U = np.uint64


@njit(cache=True, nogil=True)
def scan(q, d, first, last, length, odd, limit, wide_limit, allowed, jumps, work, rows):
    """Iterate the candidates from ``first`` on until they drop, return, or exceed the limits.

    Args:
        q: multiplier.
        d: offset.
        first: no candidate is below this.
        last: last candidate, below 2^62.
        length: most steps.
        odd: most odd steps.
        limit: largest v for which q·v + d is sure to fit in 63 bits.
        wide_limit: limit of `follow`.
        allowed: flags of the residues that elements have.
        jumps: for each residue modulo its length, a power of two, the distance to the next candidate.
        work: stop at the next candidate after this many steps.
        rows: int64[ROWS, 3]; row i becomes (n, k, x) for a cycle, (n, 0, 0) for an orbit that left 126 bits.

    Returns:
        (number of rows, next candidate, steps done, orbits that left 63 bits).
    """
    count, steps, tall = 0, 0, 0
    modulus = len(allowed)
    mask = len(jumps) - 1
    n = first - 1 + jumps[(first - 1) & mask]
    while n <= last and steps < work and count < len(rows):
        if not allowed[n % modulus]:
            n += jumps[n & mask]
            steps += 1
            continue
        value, done, odds = n, 0, 0
        state = DROPPED
        while True:
            if value & 1:
                if value > limit:
                    tall += 1
                    state, done, odds = follow(_U(0), _U(n), _U(q), d, length, odd, wide_limit)
                    break
                value = (q * value + d) >> 1
                odds += 1
            else:
                value >>= 1
            done += 1
            if value <= n:
                if value == n and done <= length and odds <= odd:
                    state = CLOSED
                break
            if done >= length or odds > odd:
                break
        if state == CLOSED:
            rows[count, 0], rows[count, 1], rows[count, 2] = n, done, odds
            count += 1
        elif state == 2:
            rows[count, 0], rows[count, 1], rows[count, 2] = n, 0, 0
            count += 1
        steps += done
        n += jumps[n & mask]
    return count, n, steps, tall
