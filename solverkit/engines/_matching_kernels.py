"""Compiled loops of the bucket join.

The circle of residues modulo 2^64 is cut into buckets of ``width`` residues. In a bucket both halves are written out as
distances v from its lower end, less than ``width``; distances from −slack to −1 are those carried from the bucket
before. ``streams`` are the arrays base, first, end and values of a `Half` and the place where each stream stands.

Every constant of unsigned code is unsigned, since numba makes a float of int64 with uint64.
"""

# mypy: disable-error-code="no-untyped-def,misc,no-any-return,untyped-decorator,call-arg,assignment"
# ruff: noqa: ANN001, ANN202 - numba infers the types

from __future__ import annotations

import numpy as np
from llvmlite import ir
from numba import njit, types
from numba.extending import intrinsic

from solverkit.engines._matching_halves import PAD

__all__ = [
    "BUCKETS",
    "CROWDED",
    "DONE",
    "EMITTED_LEFT",
    "EMITTED_RIGHT",
    "FULL",
    "POOLED_LEFT",
    "POOLED_RIGHT",
    "STATE",
    "join",
    "restart",
]

#: What `join` answers: all buckets done, a buffer is too small, the pool of survivors is full.
DONE, FULL, CROWDED = 0, 1, 2
#: Places in the state of `join`: buckets done, sums written out, length of the pools, then of the carried lists.
BUCKETS, EMITTED_LEFT, EMITTED_RIGHT, POOLED_LEFT, POOLED_RIGHT, _CARRIED_LEFT, _CARRIED_RIGHT = range(7)
#: Length of that state.
STATE = 7

_ZERO, _ONE, _SIX = np.uint64(0), np.uint64(1), np.uint64(6)
_IN_WORD = np.uint64(63)
_PAD, _LAST = np.uint64(PAD), np.uint64(PAD - 1)
_AHEAD = 8  # streams that the prefetching runs ahead; 2, 4 and 16 were no faster at k = 72
_BLOCK = 128  # streams of the right half whose sums are probed while they are in the cache
_LINES = 8  # cache lines of 8 values fetched ahead: a stream gives some 30 values a bucket
# Odd multipliers: the fractional parts of the golden ratio and of √3, times 2^64.
_HASH, _REHASH = np.uint64(0x9E3779B97F4A7C15), np.uint64(0xBB67AE8584CAA73B)


@intrinsic
def _fetch(_typing, array, place):
    """Ask for the cache line of ``array[place]``; a place past the end is harmless."""

    def generate(context, builder, signature, arguments):
        data = context.make_array(signature.args[0])(context, builder, arguments[0]).data
        pointer = builder.bitcast(builder.gep(data, [arguments[1]]), ir.IntType(8).as_pointer())
        number = ir.IntType(32)
        kind = ir.FunctionType(ir.VoidType(), [pointer.type, number, number, number])
        prefetch = builder.module.declare_intrinsic("llvm.prefetch", [pointer.type], kind)
        builder.call(prefetch, [pointer, number(0), number(3), number(1)])
        return context.get_dummy_value()

    return types.void(array, place), generate


@njit(cache=True, nogil=True)
def _seek(streams, origin):
    """Set every stream to its first sum at or after ``origin``, going round the circle."""
    base, first, end, values, at = streams
    for i in range(base.size):
        low, high, wanted = first[i], end[i], origin - base[i]
        while low < high:
            middle = (low + high) >> 1
            if values[middle] < wanted:
                low = middle + 1
            else:
                high = middle
        at[i] = low if low < end[i] else first[i]


@njit(cache=True, nogil=True)
def _emit(streams, low, high, origin, width, slack, buffer, filled, carry, carried):
    """Append the distances of the sums of streams ``low`` … ``high`` − 1 in the bucket to ``buffer``.

    What the next bucket needs is appended to ``carry``. Returns the new lengths of both, or (−1, −1) when one is too
    small.
    """
    base, first, end, values, at = streams
    room = buffer.size - PAD
    edge = width - slack
    for i in range(low, high):
        if i + _AHEAD < base.size:
            ahead = at[i + _AHEAD]
            for line in range(_LINES):
                _fetch(values, ahead + 8 * line)
        shift = base[i] - origin
        stop = end[i]
        start = filled
        if values[stop - 1] + shift >= width:
            # The list leaves the bucket before its end: no wrap, and the copies behind it lie outside as well.
            place, out = np.uint64(at[i]), np.uint64(filled)
            while True:
                if np.int64(out) > room:
                    return -1, -1
                for t in range(PAD):
                    buffer[out + np.uint64(t)] = values[place + np.uint64(t)] + shift
                if values[place + _LAST] + shift >= width:
                    break
                place += _PAD
                out += _PAD
            inside = _ZERO
            for t in range(PAD):
                if values[place + np.uint64(t)] + shift < width:
                    inside += _ONE
            filled = np.int64(out + inside)
            at[i] = np.int64(place + inside)
        else:
            spot = at[i]
            for _ in range(stop - first[i]):
                distance = values[spot] + shift
                if distance >= width:
                    break
                if filled >= buffer.size:
                    return -1, -1
                buffer[filled] = distance
                filled += 1
                spot += 1
                if spot == stop:
                    spot = first[i]
            at[i] = spot
        back = filled - 1
        while back >= start and buffer[back] >= edge:
            if carried >= carry.size:
                return -1, -1
            carry[carried] = buffer[back] - width
            carried += 1
            back -= 1
    return filled, carried


@njit(cache=True, nogil=True)
def _mark(buffer, filled, slack, shift, cells):
    """Mark the cells of 2^shift residues that some distance, or one within ``slack`` of it, lies in."""
    cell = _ONE << shift
    low, twice = cell - _ONE, slack + slack
    near_border = 0
    for i in range(filled):
        near_border += np.int64(((buffer[i] + slack) & low) < twice)
    for i in range(np.uint64(filled)):
        spot = (buffer[i] + cell) >> shift
        cells[spot >> _SIX] |= _ONE << (spot & _IN_WORD)
    if near_border:
        for i in range(filled):
            if ((buffer[i] + slack) & low) < twice:
                spot = (buffer[i] - slack + cell) >> shift
                cells[spot >> _SIX] |= _ONE << (spot & _IN_WORD)
                spot = (buffer[i] + slack + cell) >> shift
                cells[spot >> _SIX] |= _ONE << (spot & _IN_WORD)


@njit(cache=True, nogil=True)
def _probe(buffer, start, filled, shift, cells):
    """Keep, from ``start`` on, the distances whose cell is marked; return where they end."""
    cell = _ONE << shift
    kept = np.uint64(start)
    for i in range(np.uint64(start), np.uint64(filled)):
        distance = buffer[i]
        spot = (distance + cell) >> shift
        buffer[kept] = distance
        kept += (cells[spot >> _SIX] >> (spot & _IN_WORD)) & _ONE
    return np.int64(kept)


@njit(cache=True, nogil=True)
def _thin(buffer, filled, others, number, slack, shift, multiplier, top, table):
    """Keep, at the front, what may lie within ``slack`` of one of the first ``number`` of ``others``.

    Cells of 2^shift ≥ 2·slack residues are hashed into the ``table`` of 2^(64 − top) bits. Returns how many are kept.
    """
    table[:] = _ZERO
    for i in range(number):
        spot = (((others[i] - slack) >> shift) * multiplier) >> top
        table[spot >> _SIX] |= _ONE << (spot & _IN_WORD)
        spot = (((others[i] + slack) >> shift) * multiplier) >> top
        table[spot >> _SIX] |= _ONE << (spot & _IN_WORD)
    kept = _ZERO
    for i in range(np.uint64(filled)):
        distance = buffer[i]
        spot = ((distance >> shift) * multiplier) >> top
        buffer[kept] = distance
        kept += (table[spot >> _SIX] >> (spot & _IN_WORD)) & _ONE
    return np.int64(kept)


@njit(cache=True, nogil=True)
def _locate(streams, origin, width, slack, buffer, filled, top, table, pool, places, pooled):
    """Append the residue, the stream and the place of the distances in ``buffer``, and of a few others, to the pool.

    Walks back from where the streams stand after the bucket. Returns the new length of the pool, −1 when it is full.
    """
    base, first, end, values, at = streams
    table[:] = _ZERO
    for i in range(filled):
        spot = (buffer[i] * _HASH) >> top
        table[spot >> _SIX] |= _ONE << (spot & _IN_WORD)
    for i in range(base.size):
        shift = base[i] - origin
        place = at[i]
        for _ in range(end[i] - first[i]):
            place = (end[i] if place == first[i] else place) - 1
            distance = values[place] + shift
            if distance + slack >= width + slack:
                break
            spot = (distance * _HASH) >> top
            if (table[spot >> _SIX] >> (spot & _IN_WORD)) & _ONE:
                if pooled >= pool.size:
                    return -1
                pool[pooled] = distance + origin
                places[pooled, 0], places[pooled, 1] = i, place
                pooled += 1
    return pooled


@njit(cache=True, nogil=True)
def restart(streams, origin, slack, buffer, carry):
    """Set the streams to ``origin`` and carry the sums up to ``slack`` before it; return how many, −1 if too many."""
    _seek(streams, origin - slack)
    _, carried = _emit(streams, 0, streams[0].size, origin - slack, slack, slack, buffer, 0, carry, 0)
    return carried


@njit(cache=True, nogil=True)
def join(left_side, right_side, origin, width, buckets, slack, shift, fine, cells, table, state):
    """Join ``buckets`` buckets from ``origin`` on; what may have a partner is appended to the pools, as residues.

    A side is (streams, buffer, carry, pool, places). Returns DONE, FULL or CROWDED; ``state`` tells how far it came. A
    bucket that was not finished has left no trace there, but has moved the streams.
    """
    left_streams, left, left_carry, left_pool, left_places = left_side
    right_streams, right, right_carry, right_pool, right_places = right_side
    top = np.uint64(64 - 6)
    size = table.size
    while size > 1:
        size >>= 1
        top -= _ONE
    for _ in range(buckets):
        count, number = state[_CARRIED_LEFT], state[_CARRIED_RIGHT]
        left[:count] = left_carry[:count]
        right[:number] = right_carry[:number]
        left_filled, left_carried = _emit(
            left_streams, 0, left_streams[0].size, origin, width, slack, left, count, left_carry, 0
        )  # fmt: skip
        if left_filled < 0:
            return FULL
        left_emitted, right_emitted, right_carried = left_filled - count, 0, 0
        cells[:] = _ZERO
        _mark(left, left_filled, slack, shift, cells)
        count, number = left_filled, _probe(right, 0, number, shift, cells)
        for low in range(0, right_streams[0].size, _BLOCK):
            high = min(low + _BLOCK, right_streams[0].size)
            filled, right_carried = _emit(
                right_streams, low, high, origin, width, slack, right, number, right_carry, right_carried
            )  # fmt: skip
            if filled < 0:
                return FULL
            right_emitted += filled - number
            number = _probe(right, number, filled, shift, cells)
        multiplier = _HASH
        for turn in range(4):
            if count == 0 or number == 0:
                break
            if turn % 2 == 0:
                count = _thin(left, count, right, number, slack, fine, multiplier, top, table)
            else:
                number = _thin(right, number, left, count, slack, fine, multiplier, top, table)
            multiplier *= _REHASH
        if count and number:
            pooled_left = _locate(
                left_streams, origin, width, slack, left, count, top, table,
                left_pool, left_places, state[POOLED_LEFT],
            )  # fmt: skip
            pooled_right = _locate(
                right_streams, origin, width, slack, right, number, top, table,
                right_pool, right_places, state[POOLED_RIGHT],
            )  # fmt: skip
            if pooled_left < 0 or pooled_right < 0:
                return CROWDED
            state[POOLED_LEFT], state[POOLED_RIGHT] = pooled_left, pooled_right
        state[EMITTED_LEFT] += left_emitted
        state[EMITTED_RIGHT] += right_emitted
        state[_CARRIED_LEFT], state[_CARRIED_RIGHT] = left_carried, right_carried
        state[BUCKETS] += 1
        origin += width
    return DONE
