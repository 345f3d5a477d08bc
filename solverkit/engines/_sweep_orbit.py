"""The definition made code: one candidate at a time in Python integers."""

from __future__ import annotations

__all__ = ["closes", "reached"]


def closes(multiplier: int, offset: int, n: int, length: int, odd: int) -> tuple[int, int] | None:
    """Return (k, x) when n > 0 is the least element of a cycle with k ≤ ``length`` steps, x ≤ ``odd`` of them odd.

    Returns None when the orbit drops below n, or when no such cycle starts at n. Any integers, odd d.

    A growing orbit is given up as soon as the steps that are left can't bring it back. For a least element n the
    first odd step does not drop, so n ≥ |d|/(q − 2) when d < 0, and T(v) ≥ v/2 for every v ≥ n: a value above
    n·2^r with r steps left never returns.
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


def reached(multiplier: int, offset: int, n: int, tail: int, length: int) -> tuple[int, int, int] | None:
    """Return (least, k, x) of the cycle of at most ``length`` steps on which n > 0 is after ``tail`` steps, or None.

    Returns None as soon as the orbit drops below n.
    """
    value = n
    for _ in range(tail):
        value = (multiplier * value + offset) >> 1 if value & 1 else value >> 1
        if value < n:
            return None
    start = least = value
    odds = 0
    for steps in range(1, length + 1):
        if value & 1:
            value = (multiplier * value + offset) >> 1
            odds += 1
        else:
            value >>= 1
        if value < n:
            return None
        if value == start:
            return least, steps, odds
        least = min(least, value)
    return None
