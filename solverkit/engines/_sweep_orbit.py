"""The definition made code: one candidate at a time in Python integers."""

from __future__ import annotations

__all__ = ["closes"]


def closes(multiplier: int, offset: int, n: int, length: int, odd: int) -> tuple[int, int] | None:
    """Return (k, x) when n > 0 is the least element of a cycle of length k ≤ ``length`` with x ≤ ``odd`` odd steps.

    Returns None when the orbit drops below n, or when no such cycle starts at n. Any integers, odd d.

    A growing orbit is given up as soon as the steps that are left can't bring it back: for a least element n the
    first odd step does not drop, hence n ≥ |d|/(q − 2) when d < 0, hence T(v) ≥ v/2 for every v ≥ n; so a value
    above n·2^r with r steps left never returns.
    """
    value, odds = n, 0
    for steps in range(1, length + 1):
        if value & 1:
            value = (multiplier * value + offset) >> 1
            odds += 1
            if odds > odd:
                return None
        else:
            value >>= 1
        if value <= n:
            return (steps, odds) if value == n else None
        if value >> (length - steps) > n:
            return None
    return None
