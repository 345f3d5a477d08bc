"""Kernels that take one block of candidates class by class, in batches of eight lanes.

A block is base + [0, count·2^(m1+m2)), base a multiple of 2^m1. Its candidates are base + r + x·2^m1 for the classes
r mod 2^m1 of the residue tree; for each class the continuations that survive are a prefix of a sorted table. What
outlives the macro-steps is handed back: no kernel here rejects a candidate that could be a least element, and none
decides that one is.
"""
# mypy: disable-error-code="no-untyped-def,misc,no-any-return,untyped-decorator,call-arg,var-annotated,assignment"
# ruff: noqa: ANN001, ANN202 - numba infers the types

from __future__ import annotations

import numpy as np
from numba import njit

from solverkit.engines._sweep_lanes import (
    broad_leaf,
    broad_step,
    class_value,
    ledger_leaf,
    ledger_step,
    narrow_leaf,
    narrow_over,
    narrow_spill,
    narrow_step,
    upper_over,
)

__all__ = ["BATCH", "FLAGS", "LEDGER_BATCH", "broad_classes", "ledger_classes", "narrow_classes"]

#: Candidates in a batch: their labels and values fill two thirds of a first-level cache of 48 KiB.
BATCH = 2048
LEDGER_BATCH = 1024
#: Capacity of the list of candidates handed back.
FLAGS = 1 << 16
_LEFT = 192  # a batch is left alone, to be filled again, once so few candidates are in it
_U = np.uint64
_ZERO, _ONE, _LANES = _U(0), _U(1), _U(8)
_LOW32 = _U(0xFFFFFFFF)
_TOP = _U(0xFFFFFFFFFFFFFFFF)


@njit(cache=True, nogil=True)
def _drain_broad(ids, lows, highs, c, left, table, bias, floor_high, limit, passes, flags, nf):
    """Advance a two-limb batch until at most ``left`` candidates are in it; return (count, number of flags).

    What reaches the limit is flagged; so is all that is left after ``passes`` passes.
    """
    ids_at, lows_at, highs_at = _U(ids.ctypes.data), _U(lows.ctypes.data), _U(highs.ctypes.data)
    table_at = _U(table.ctypes.data)
    done = 0
    while c > left:
        if done == passes:
            for i in range(c):
                flags[nf] = ids[i]
                nf += _ONE
            return _ZERO, nf
        for i in range(c, (c + _U(7)) // _LANES * _LANES):
            lows[i], highs[i] = _ZERO, _TOP
        i, k = _ZERO, _ZERO
        while i < c:
            over = upper_over(highs_at, i, limit)
            if over:
                for lane in range(8):
                    if (over >> _U(lane)) & _ONE:
                        flags[nf] = ids[i + _U(lane)]
                        nf += _ONE
                        highs[i + _U(lane)] = _TOP
            k += broad_step(ids_at, lows_at, highs_at, i, k, table_at, bias, floor_high)
            i += _LANES
        c = k
        done += 1
    return c, nf


@njit(cache=True, nogil=True)
def narrow_classes(start, stop, cut, tables, scalars, small, flags):
    """Sweep the classes ``start`` … ``stop`` − 1 of a block whose values fit one limb after the first m1 + m2 steps.

    Args:
        start: first class.
        stop: one past the last class.
        cut: geometry of the block, see `_sweep_plan.Cut`.
        tables: (residue, odd, beta, count, powers, inverse, masks, entries, slopes, shifts).
        scalars: (offset, bias, floor, limit, limit_high, passes).
        small: the macro-step table of 128 uint16.
        flags: uint64[FLAGS], receives candidates minus base.

    Returns:
        (number of flags, next class, continuations tried, candidates started).
    """
    m1, m2, height, blocks, base_mod, modulus, reciprocal = cut
    residue, odd, beta, count, powers, inverse, masks, entries, slopes, shifts = tables
    offset, bias, floor, limit, limit_high, passes = scalars
    ids, values = np.empty(BATCH + 16, np.uint64), np.empty(BATCH + 16, np.uint64)
    tall_ids = np.empty(BATCH + 16, np.uint64)
    tall_low, tall_high = np.empty(BATCH + 16, np.uint64), np.empty(BATCH + 16, np.uint64)
    ids_at, values_at = _U(ids.ctypes.data), _U(values.ctypes.data)
    entries_at, slopes_at, shifts_at = _U(entries.ctypes.data), _U(slopes.ctypes.data), _U(shifts.ctypes.data)
    window = (_ONE << m2) - _ONE
    size, room = _U(BATCH), _U(FLAGS - 2 * BATCH)
    floor_high = floor >> _U(32)
    nf, c, tall, tried, started = _ZERO, _ZERO, _ZERO, _ZERO, _ZERO
    place = start
    while place < stop and nf < room:
        a = odd[place]
        qa, inv, total, r = powers[a], inverse[a], count[place], residue[place]
        for z in range(blocks):
            first = _U(z) << m2
            low, high = class_value(qa, r, offset, beta[place], m1, height + first)
            u0 = (high << _U(32)) | low
            label = r + (first << m1)
            geometry = (inv, _ZERO - u0 * inv, window, masks[(base_mod + label) % modulus], reciprocal, modulus)
            tried += total
            e = _ZERO
            while e < total:
                before = c
                while e < total and c <= size - _LANES:
                    c += narrow_leaf(
                        entries_at,
                        slopes_at,
                        shifts_at,
                        e,
                        ids_at,
                        values_at,
                        c,
                        label,
                        m1,
                        qa,
                        u0,
                        m2,
                        floor,
                        geometry,
                    )
                    e += _LANES
                started += c - before
                if c > size - _LANES:
                    c, tall, nf = _drain_narrow(
                        ids, values, c, _U(_LEFT), small, bias, floor, limit, passes,
                        tall_ids, tall_low, tall_high, tall, floor_high, limit_high, flags, nf,
                    )  # fmt: skip
        place += 1
    c, tall, nf = _drain_narrow(
        ids, values, c, _ZERO, small, bias, floor, limit, passes,
        tall_ids, tall_low, tall_high, tall, floor_high, limit_high, flags, nf,
    )  # fmt: skip
    tall, nf = _drain_broad(
        tall_ids, tall_low, tall_high, tall, _ZERO, small, bias, floor_high, limit_high, passes, flags, nf
    )
    return nf, place, tried, started


@njit(cache=True, nogil=True)
def _drain_narrow(
    ids, values, c, left, small, bias, floor, limit, passes,
    tall_ids, tall_low, tall_high, tall, floor_high, limit_high, flags, nf,
):  # fmt: skip
    """Advance a one-limb batch until at most ``left`` candidates are in it; tall values go to the two-limb batch."""
    ids_at, values_at, small_at = _U(ids.ctypes.data), _U(values.ctypes.data), _U(small.ctypes.data)
    tall_at, tall_low_at, tall_high_at = _U(tall_ids.ctypes.data), _U(tall_low.ctypes.data), _U(tall_high.ctypes.data)
    size = _U(BATCH)
    done = 0
    while c > left:
        if done == passes:
            for i in range(c):
                flags[nf] = ids[i]
                nf += _ONE
            return _ZERO, tall, nf
        for i in range(c, (c + _U(7)) // _LANES * _LANES):
            values[i] = _TOP
        i, k = _ZERO, _ZERO
        while i < c:
            if narrow_over(values_at, i, limit):
                tall += narrow_spill(ids_at, values_at, i, limit, tall_at, tall_low_at, tall_high_at, tall)
                if tall > size - _LANES:
                    tall, nf = _drain_broad(
                        tall_ids, tall_low, tall_high, tall, _U(_LEFT), small, bias, floor_high, limit_high, passes,
                        flags, nf,
                    )  # fmt: skip
            k += narrow_step(ids_at, values_at, i, k, small_at, bias, floor)
            i += _LANES
        c = k
        done += 1
    return c, tall, nf


@njit(cache=True, nogil=True)
def broad_classes(start, stop, cut, tables, scalars, small, flags):
    """Sweep the classes ``start`` … ``stop`` − 1 of a block in two limbs; arguments as in `narrow_classes`."""
    m1, m2, height, blocks, base_mod, modulus, reciprocal = cut
    residue, odd, beta, count, powers, inverse, masks, entries, slopes, shifts = tables
    offset, bias, floor_high, _, limit_high, passes = scalars
    ids = np.empty(BATCH + 16, np.uint64)
    lows, highs = np.empty(BATCH + 16, np.uint64), np.empty(BATCH + 16, np.uint64)
    ids_at, lows_at, highs_at = _U(ids.ctypes.data), _U(lows.ctypes.data), _U(highs.ctypes.data)
    entries_at, slopes_at, shifts_at = _U(entries.ctypes.data), _U(slopes.ctypes.data), _U(shifts.ctypes.data)
    window = (_ONE << m2) - _ONE
    size, room = _U(BATCH), _U(FLAGS - 2 * BATCH)
    nf, c, tried, started = _ZERO, _ZERO, _ZERO, _ZERO
    place = start
    while place < stop and nf < room:
        a = odd[place]
        qa, inv, total, r = powers[a], inverse[a], count[place], residue[place]
        for z in range(blocks):
            first = _U(z) << m2
            low, high = class_value(qa, r, offset, beta[place], m1, height + first)
            label = r + (first << m1)
            geometry = (inv, _ZERO - low * inv, window, masks[(base_mod + label) % modulus], reciprocal, modulus)
            tried += total
            e = _ZERO
            while e < total:
                before = c
                while e < total and c <= size - _LANES:
                    c += broad_leaf(
                        entries_at, slopes_at, shifts_at, e, ids_at, lows_at, highs_at, c, label, m1, qa, low, high,
                        m2, floor_high, geometry,
                    )  # fmt: skip
                    e += _LANES
                started += c - before
                if c > size - _LANES:
                    c, nf = _drain_broad(
                        ids, lows, highs, c, _U(_LEFT), small, bias, floor_high, limit_high, passes, flags, nf
                    )
        place += 1
    c, nf = _drain_broad(ids, lows, highs, c, _ZERO, small, bias, floor_high, limit_high, passes, flags, nf)
    return nf, place, tried, started


@njit(cache=True, nogil=True)
def ledger_classes(start, stop, cut, tables, extra, scalars, ceilings, large, flags):
    """Sweep classes of a block in two limbs with ledgers, for maps whose orbits mostly grow.

    Args:
        start: first class.
        stop: one past the last class.
        cut: geometry of the block.
        tables: as in `narrow_classes`.
        extra: (begin, spent, starts): first entry of each class, units it spent, ledger of each entry.
        scalars: (offset, floor_low, floor_high, budget, cap, limit_high).
        ceilings: for each pass of eight steps, the largest upper limb from which a cycle can still return.
        large: the macro-step table of 80 uint64.
        flags: uint64[FLAGS], receives candidates minus base.

    Returns:
        (number of flags, next class, continuations tried, candidates started).
    """
    m1, m2, height, blocks, base_mod, modulus, reciprocal = cut
    residue, odd, beta, count, powers, inverse, masks, entries, slopes, shifts = tables
    begin, spent, starts = extra
    offset, floor_low, floor_high, budget, cap, limit_high = scalars
    ids, ledgers = np.empty(LEDGER_BATCH + 16, np.uint64), np.empty(LEDGER_BATCH + 16, np.uint64)
    lows, highs = np.empty(LEDGER_BATCH + 16, np.uint64), np.empty(LEDGER_BATCH + 16, np.uint64)
    ids_at, lows_at, highs_at = _U(ids.ctypes.data), _U(lows.ctypes.data), _U(highs.ctypes.data)
    ledgers_at, large_at = _U(ledgers.ctypes.data), _U(large.ctypes.data)
    entries_at, slopes_at, shifts_at = _U(entries.ctypes.data), _U(slopes.ctypes.data), _U(shifts.ctypes.data)
    starts_at = _U(starts.ctypes.data)
    window = (_ONE << m2) - _ONE
    size, room = _U(LEDGER_BATCH), _U(FLAGS - 2 * LEDGER_BATCH)
    nf, c, tried, started = _ZERO, _ZERO, _ZERO, _ZERO
    place = start
    while True:
        ended = place >= stop or nf >= room
        if not ended:
            a = odd[place]
            qa, inv, total, r, at = powers[a], inverse[a], count[place], residue[place], begin[place]
            outlay = spent[place] << _U(32)
        z, e = _ZERO, _ZERO
        while ended or z < blocks:
            if not ended:
                first = z << m2
                low, high = class_value(qa, r, offset, beta[place], m1, height + first)
                label = r + (first << m1)
                geometry = (inv, _ZERO - low * inv, window, masks[(base_mod + label) % modulus], reciprocal, modulus)
                before = c
                while e < total and c <= size - _LANES:
                    c += ledger_leaf(
                        entries_at, slopes_at, shifts_at, at + e, ids_at, lows_at, highs_at, ledgers_at, c, label, m1,
                        qa, low, high, m2, starts_at, outlay, floor_low, floor_high, geometry,
                    )  # fmt: skip
                    e += _LANES
                started += c - before
            if ended or c > size - _LANES:
                for ceiling in ceilings:
                    for i in range(c, (c + _U(7)) // _LANES * _LANES):
                        highs[i], ledgers[i] = _ZERO, _TOP
                    i, k = _ZERO, _ZERO
                    while i < c:
                        over = upper_over(highs_at, i, limit_high)
                        if over:
                            for lane in range(8):
                                if (over >> _U(lane)) & _ONE:
                                    flags[nf] = ids[i + _U(lane)]
                                    nf += _ONE
                                    highs[i + _U(lane)], ledgers[i + _U(lane)] = _ZERO, _TOP
                        k += ledger_step(
                            ids_at, lows_at, highs_at, ledgers_at, i, k, large_at, floor_low, floor_high, budget, cap,
                            ceiling,
                        )  # fmt: skip
                        i += _LANES
                    c = k
                for i in range(c):
                    flags[nf] = ids[i]
                    nf += _ONE
                c = _ZERO
            if ended:
                break
            if e >= total:
                tried += total
                e = _ZERO
                z += _ONE
        if ended:
            return nf, place, tried, started
        place += 1
