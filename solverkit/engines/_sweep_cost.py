"""What a sweep costs: seconds on one core, from measured rates.

Each constant was measured on the machine of the cost models with benchmarks/sweep.py and benchmarks/estimates.py.
"""

from __future__ import annotations

from math import log2
from typing import TYPE_CHECKING

from solverkit.engines import _sweep_processor as processor

if TYPE_CHECKING:
    from solverkit.engines._sweep_ranges import Profile

__all__ = ["sweep_seconds"]

_BLOCK_START = 1 << 22  # below, a plain pass
_BLOCK_SHORTEST = 30  # cycles shorter than this leave tables for growing maps no steps to take
_FEWEST = 1 << 24
_FALLING_NEAR, _FALLING_FAR = 1.7e-11, 4e-11  # a candidate of 3x + d in blocks, |d| up to and beyond 12,000
_SMALL_OFFSET = 12_000
_FALLING_PLAIN, _FALLING_SIEVED = 8e-9, 5e-9
_GROWING_FIVE, _GROWING_MORE = 3e-9, 1.2e-9
_GROWING_STEP = 1.2e-9
_PYTHON_STEP = 1.2e-7
_LEAVES = 0.25  # share of the orbits of a growing map that leave 126 bits before they drop
_START = 1e-6
# More candidates than anybody examines; floats would overflow far beyond.
_COUNTLESS = 10**250


def sweep_seconds(multiplier: int, offset: int, shape: Profile) -> float:
    """Return the time for one pass over the candidates of ``shape``; a rough number that decides nothing exact.

    Args:
        multiplier: q.
        offset: d.
        shape: candidates and what the cells allow at them.
    """
    if not shape.candidates:
        return 0.0
    total, low = _START, shape.low
    while low < shape.high:
        high = min(shape.high, max(2 * low, _BLOCK_START // 16))
        length, _ = shape.limits(low + 1)
        total += min(high - low, _COUNTLESS) / 2 * _each(multiplier, offset, low, high, length)
        low = high
    return total


def _each(multiplier: int, offset: int, low: int, high: int, length: int) -> float:
    """Return the time for one candidate of a stretch."""
    words = multiplier < 1 << 31 and abs(offset) < 1 << 61 and high < 1 << 62
    wide = abs(offset) < 1 << 52 and low >= _BLOCK_START - 1 and high < 1 << 80
    blocks = wide and processor.available()
    if multiplier == 3:
        if blocks and high - low >= _FEWEST // 4:
            return _FALLING_NEAR if abs(offset) <= _SMALL_OFFSET else _FALLING_FAR
        plain = _FALLING_SIEVED if high - low > _FEWEST // 64 else _FALLING_PLAIN
        return plain if words else 12 * _PYTHON_STEP
    if not words and not blocks:
        return min(length, 400) * _PYTHON_STEP
    if blocks and length >= _BLOCK_SHORTEST and multiplier < 200:
        return _GROWING_FIVE if multiplier == 5 else _GROWING_MORE
    # Orbits mostly grow, log2(q)/2 − 1 bits a step; what leaves 126 bits goes on in Python integers.
    rise = log2(multiplier) / 2 - 1
    steps = max(1.0, (126 - high.bit_length()) / rise)
    handed = _LEAVES * length * _PYTHON_STEP if length > steps else 0.0
    return min(length, steps) * _GROWING_STEP + handed
