# ruff: noqa: ANN001, ANN202 - numba infers the types
# mypy: disable-error-code="no-untyped-def,misc,no-any-return,untyped-decorator"
"""Compiled loops of the count: add a shifted row, carry between digits, multiply two rows.

A table holds one row of ``modulus`` counts for every odd count that still matters. A count is a sequence of
digits of base 2^56 in unsigned 64-bit words, one *plane* of the table a digit. The spare 8 bits absorb 8
additions before a carry is due, so that the inner loop adds whole planes without looking at overflow. Rows of
the table are reused: the row of odd count a lies in slot a mod ``slots``.
"""

import numpy as np
from numba import njit

__all__ = ["DIGIT", "HEADROOM", "add_steps", "carry", "correlate"]

#: Bits of one digit, and doublings that fit above it in a 64-bit word.
DIGIT = 56
HEADROOM = 64 - DIGIT

_DIGIT = np.uint64(DIGIT)
_DIGIT_MASK = np.uint64((1 << DIGIT) - 1)
_PIECE = np.uint64(28)
_PIECE_MASK = np.uint64((1 << 28) - 1)
_ZERO = np.uint64(0)


@njit(cache=True, nogil=True)
def _add_plane(target, origin):
    for r in range(target.shape[0]):
        target[r] += origin[r]


@njit(cache=True, nogil=True)
def add_steps(counts, active, start, steps, low, high, length, twos, inverses):
    """Extend the words of ``start`` letters by ``steps`` letters, in place.

    Args:
        counts: uint64 array (planes, slots, modulus).
        active: int64 array, number of planes in use, a slot each.
        start: letters that the words have now.
        steps: letters to append; between two carries at most 8 in all.
        low: least odd count wanted in the end.
        high: largest odd count wanted in the end.
        length: letters that the words will have in the end.
        twos: int64 array, 2^i mod modulus.
        inverses: int64 array, q^(−1−a) mod modulus.

    The rows are visited so that a group of steps passes over a row while it is still in the cache: letter
    ``start + t`` of row b + t follows letter ``start + t − 1`` of row b + t − 1.
    """
    slots, modulus = counts.shape[1], counts.shape[2]
    for base in range(high, 1 - steps, -1):
        for ahead in range(steps):
            step, odd = start + ahead, base + ahead
            if odd < 1 or odd > high or odd > step + 1 or odd < low - (length - step - 1):
                continue
            shift = twos[step] * inverses[odd - 1] % modulus
            into, source = odd % slots, (odd - 1) % slots
            if odd == step + 1:
                active[into] = 0
            for plane in range(active[source]):
                target, origin = counts[plane, into], counts[plane, source]
                if plane < active[into]:
                    _add_plane(target[shift:], origin[: modulus - shift])
                    _add_plane(target[:shift], origin[modulus - shift :])
                else:
                    target[shift:] = origin[: modulus - shift]
                    target[:shift] = origin[modulus - shift :]
            active[into] = max(active[into], active[source])


@njit(cache=True, nogil=True)
def carry(counts, active):
    """Bring every digit below 2^56; return False when a count needs more planes than there are."""
    for slot in range(counts.shape[1]):
        used = active[slot]
        for plane in range(used):
            digits = counts[plane, slot]
            if plane + 1 < used:
                above = counts[plane + 1, slot]
                for r in range(digits.shape[0]):
                    above[r] += digits[r] >> _DIGIT
                    digits[r] &= _DIGIT_MASK
                continue
            spill = _ZERO
            for r in range(digits.shape[0]):
                spill |= digits[r] >> _DIGIT
            if spill == _ZERO:
                continue
            if used == counts.shape[0]:
                return False
            above = counts[used, slot]
            for r in range(digits.shape[0]):
                above[r] = digits[r] >> _DIGIT
                digits[r] &= _DIGIT_MASK
            active[slot] = used + 1
    return True


@njit(cache=True, nogil=True)
def correlate(counts, active, left, right, start, stride):
    """Return Σ_r left[r]·right[start + stride·r mod modulus] as digits of base 2^28, lowest first.

    Args:
        counts: uint64 array (planes, slots, modulus), carried, with at most 100 planes.
        active: int64 array, number of planes in use, a slot each.
        left: slot of the one row.
        right: slot of the other row.
        start: index into the right row for r = 0.
        stride: its growth with r, below the modulus.
    """
    modulus = counts.shape[2]
    ours, theirs = active[left], active[right]
    total = np.zeros(2 * (ours + theirs) + 3, np.uint64)
    pieces = np.zeros(2 * theirs, np.uint64)
    added, place = 0, start
    for r in range(modulus):
        for plane in range(theirs):
            digit = counts[plane, right, place]
            pieces[2 * plane] = digit & _PIECE_MASK
            pieces[2 * plane + 1] = digit >> _PIECE
        for plane in range(ours):
            digit = counts[plane, left, r]
            if digit == _ZERO:
                continue
            low, high = digit & _PIECE_MASK, digit >> _PIECE
            for j in range(2 * theirs):
                total[2 * plane + j] += low * pieces[j]
                total[2 * plane + j + 1] += high * pieces[j]
        place += stride
        if place >= modulus:
            place -= modulus
        # Each row of r adds fewer than 2^56 to one digit at most 2·min(ours, theirs) times.
        added += 2 * min(ours, theirs)
        if added + 2 * min(ours, theirs) > 250:
            added = 0
            for j in range(total.shape[0] - 1):
                total[j + 1] += total[j] >> _PIECE
                total[j] &= _PIECE_MASK
    return total
