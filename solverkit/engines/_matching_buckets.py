"""The bucket join: two halves too long to store, written out bucket by bucket and compared there."""

from __future__ import annotations

import time
from dataclasses import dataclass
from importlib import import_module
from typing import TYPE_CHECKING, Any

import numpy as np

from solverkit.engines._matching_halves import Pool
from solverkit.errors import ContradictionError

if TYPE_CHECKING:
    import numpy.typing as npt

    from solverkit.engines._matching_halves import Half

__all__ = ["CIRCLE", "Joined", "join_range"]

#: Number of residues that the sums take.
CIRCLE = 1 << 64

#: Sums of the left half in a bucket: their bitmap and buffers then fit the second-level cache.
_BUCKET = 100_000
#: Least mean number of sums that a stream gives to a bucket; with fewer, finding the places costs more than the sums.
_RUN = 12
#: Bits of the bitmap for each sum of the left half, between this number and twice as many.
_SPARSITY = 8
#: The table that thins out the survivors has 2 to this power bits.
_TABLE_BITS = 18
#: Buckets between two looks at the clock, about 0.1 s.
_STRIDE = 400
#: Largest width of a bucket; distances and cells then stay far from 2^64.
_WIDEST = 1 << 60


@dataclass(frozen=True, slots=True)
class Joined:
    """What the join of one range of residues gave.

    Args:
        left: sums of the left half that may have a partner.
        right: likewise of the right half; every pair within the slack is among left × right.
        emitted: number of sums of each half in the range that were compared.
        buckets: number of buckets.
        reason: why it ended early, or empty.
    """

    left: Pool
    right: Pool
    emitted: tuple[int, int]
    buckets: int
    reason: str


class _Side:
    """One half with the places of its streams and its buffers."""

    def __init__(self, half: Half, low: int, width: int) -> None:
        self.half = half
        self.at = np.zeros(len(half.base), np.int64)
        self.pool = np.empty(1 << 16, np.uint64)
        self.places = np.empty((1 << 16, 2), np.int64)
        mean = half.count() * width // CIRCLE
        self._allocate(mean + mean // 8 + 4096)
        self._before = half.below(low)

    def _allocate(self, capacity: int) -> None:
        self.buffer = np.empty(capacity, np.uint64)
        self.carry = np.empty(max(1024, capacity // 16), np.uint64)

    def enlarge(self) -> None:
        """Double the buffers; what they held is lost."""
        self._allocate(2 * len(self.buffer))

    def enlarge_pool(self) -> None:
        """Double the pool and keep what it holds."""
        self.pool = np.concatenate([self.pool, np.empty_like(self.pool)])
        self.places = np.concatenate([self.places, np.empty_like(self.places)])

    @property
    def streams(self) -> tuple[npt.NDArray[Any], ...]:
        """The arrays that the kernels call streams."""
        half = self.half
        return half.base, half.first, half.end, half.values, self.at

    @property
    def arrays(self) -> tuple[Any, ...]:
        """What the kernels call a side."""
        return self.streams, self.buffer, self.carry, self.pool, self.places

    def check(self, emitted: int, high: int) -> None:
        """Compare the number of sums that were written out with that found by binary search.

        Raises:
            ContradictionError: they differ.
        """
        there = self.half.below(high) - self._before
        if emitted != there:
            raise ContradictionError(f"matching: {emitted} sums were compared where {there} lie")


def join_range(
    left: Half, right: Half, low: int, high: int, slack: int, most: int, room: int, deadline: float
) -> Joined:
    """Compare the sums of both halves that lie from ``low`` to ``high`` − 1.

    Args:
        left: sums y.
        right: sums z, already negated: looked for are y and z at most ``slack`` apart on the circle.
        low: first residue of the range.
        high: end of the range, at most 2^64. Pairs astride the lower end are found here, those astride the upper end in
            the next range.
        slack: less than 2^20.
        most: largest number of survivors of a half to keep; beyond it the join ends.
        room: largest number of sums of a half in a bucket that memory holds; beyond it the join ends.
        deadline: value of `time.monotonic` at which it ends.

    About 1.8 ns a sum.

    Raises:
        ContradictionError: the number of sums compared is not the number there is.
    """
    kernels: Any = import_module("solverkit.engines._matching_kernels")  # numba loads only when it is used

    share = left.count() * (high - low) // CIRCLE + 1
    bucket = max(_BUCKET, _RUN * len(left.base))
    buckets = max(-(-share // bucket), -(-(high - low) // _WIDEST))
    width = -(-(high - low) // buckets)
    # A cell of the bitmap is marked with a chance of 1/16 to 1/8, and ±slack spans two cells at most.
    shift = ((high - low) // (share * _SPARSITY)).bit_length() - 1
    shift = min(max(shift, (2 * slack).bit_length()), width.bit_length() - 4)
    fine = max(shift - _TABLE_BITS, (2 * slack).bit_length())
    cells = np.empty(((width >> shift) + 2) // 64 + 1, np.uint64)
    table = np.empty((1 << _TABLE_BITS) // 64, np.uint64)
    state = np.zeros(kernels.STATE, np.int64)
    sides = (_Side(left, low, width), _Side(right, low, width))
    done, reason, placed = 0, "", False
    while done < buckets:
        if time.monotonic() > deadline:
            reason = "the time given is over"
            break
        origin = low + done * width
        if not placed:
            start, near = np.uint64(origin % CIRCLE), np.uint64(slack)
            carried = [kernels.restart(side.streams, start, near, side.buffer, side.carry) for side in sides]
            state[-2:] = carried
            placed = min(carried) >= 0
            answer = kernels.DONE if placed else kernels.FULL
        if placed:
            # The last bucket is narrower, by less than the number of buckets.
            last = done == buckets - 1
            answer = kernels.join(
                sides[0].arrays,
                sides[1].arrays,
                np.uint64(origin % CIRCLE),
                np.uint64(high - origin if last else width),
                1 if last else min(_STRIDE, buckets - 1 - done),
                np.uint64(slack),
                np.uint64(shift),
                np.uint64(fine),
                cells,
                table,
                state,
            )
            done, placed = int(state[kernels.BUCKETS]), answer == kernels.DONE
        for side in sides:
            if answer == kernels.FULL:
                side.enlarge()
            elif answer == kernels.CROWDED:
                side.enlarge_pool()
        if len(sides[0].pool) > most:
            reason = f"more than {most} sums have near partners"
            break
        if len(sides[0].buffer) > room:
            reason = f"more than {room} sums in a bucket need more memory"
            break
    emitted = int(state[kernels.EMITTED_LEFT]), int(state[kernels.EMITTED_RIGHT])
    for side, number in zip(sides, emitted, strict=True):
        side.check(number, min(low + done * width, high))
    kept = int(state[kernels.POOLED_LEFT]), int(state[kernels.POOLED_RIGHT])
    pools = [Pool(side.pool[:number], side.places[:number]) for side, number in zip(sides, kept, strict=True)]
    return Joined(pools[0], pools[1], emitted, done, reason)
