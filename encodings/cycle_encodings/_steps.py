"""One step of the map on bits: out = n/2 for even n, (q·n + d)/2 for odd n.

All forms are exact: they admit the pair of bit lists if and only if the second number is the image of the first.
"""

from __future__ import annotations

from itertools import product
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Sequence

    from cycle_encodings._gates import Builder
    from solverkit.window import Cell

__all__ = ["MOST_COPIES", "adder_step", "additions", "copies", "lean_step", "serial_step", "sum_step"]

#: Beyond so many copies of n, `adder_step` is shorter than `sum_step`, whose columns have 2^copies combinations.
MOST_COPIES = 3


def additions(cell: Cell) -> int:
    """Return the number of adders of `adder_step`.

    >>> from solverkit.window import Cell
    >>> additions(Cell(3, 1, 8, 5)), additions(Cell(7, 5, 8, 5))
    (1, 3)
    """
    return ((cell.multiplier - 1) // 2).bit_count() + (cell.offset not in (1, -1))


def adder_step(builder: Builder, cell: Cell, bits: Sequence[int], image: Sequence[int]) -> None:
    """State image = T(n) by adding: out = h + p·(((q − 1)/2)·n + (d + 1)/2), n = 2h + p, in two's complement.

    One adder for each one in (q − 1)/2 and one for the constant, none for d = ±1.
    """
    odd = bits[0]
    factor, constant = (cell.multiplier - 1) // 2, (cell.offset + 1) // 2
    # The exact value lies in [−|d|, q·2^w + |d|]; with this width only the true image agrees mod 2^width.
    reach = max((cell.multiplier << len(bits)) + abs(cell.offset), (1 << len(image)) + abs(cell.offset))
    width = reach.bit_length() + 1
    masked = [builder.both(odd, bit) for bit in bits]
    carry, rest = (odd, constant - 1) if constant & 1 else (-builder.true, constant)
    total = list(bits[1:])
    for place in range(factor.bit_length()):
        if factor >> place & 1:
            total = builder.add_numbers(total, [-builder.true] * place + masked, carry, width)
            carry = -builder.true
    if rest:
        mask = [odd if rest >> place & 1 else -builder.true for place in range(width)]
        total = builder.add_numbers(total, mask, -builder.true, width)
    for place in range(width):
        builder.equal(total[place], image[place] if place < len(image) else -builder.true)


def serial_step(builder: Builder, cell: Cell, bits: Sequence[int], image: Sequence[int]) -> None:
    """State image = T(n) by one serial multiplier whose carry is order-encoded.

    Column z of q·n + d holds q·n_z + d_z + c_z; its parity is bit z − 1 of the image when n is odd, its half is the
    next carry. The carry, at most q, is a row of literals c ≥ t. For even n the image takes the bits of n, and the
    carries are free: following them would cost most of the propagation, as most steps of many cells are even.
    """
    q, d, true = cell.multiplier, cell.offset, builder.true
    odd = bits[0]
    columns = max(len(bits), len(image) + 1, abs(d).bit_length()) + q.bit_length() + 2
    low = high = (q + 1) // 2  # the carry into column 1 when n is odd
    least: dict[int, int] = {}

    def reaches(threshold: int) -> int:
        return true if threshold <= low else -true if threshold > high else least[threshold]

    for place in range(1, columns):
        inside = place < len(bits)
        bit = bits[place] if inside else -true
        out = image[place - 1] if place <= len(image) else -true
        ones = d >> place & 1
        builder.add(odd, -bit, out)
        builder.add(odd, bit, -out)
        for carry in range(low, high + 1):
            outside = (-reaches(carry), reaches(carry + 1))
            for value in (0, 1) if inside else (0,):
                differs = -bit if value else bit
                parity = q * value + ones + carry & 1
                builder.add(-odd, *outside, differs, out if parity else -out)
        after_low, after_high = (ones + low) >> 1, ((q if inside else 0) + ones + high) >> 1
        after: dict[int, int] = {}
        for threshold in range(after_low + 1, after_high + 1):
            gate = after[threshold] = builder.variable()
            plain, raised = reaches(2 * threshold - ones), reaches(2 * threshold - ones - q)
            builder.add(-odd, bit, -plain, gate)
            builder.add(-odd, bit, plain, -gate)
            builder.add(-odd, -bit, -raised, gate)
            builder.add(-odd, -bit, raised, -gate)
            builder.add(-odd, -plain, gate)
            builder.add(-odd, raised, -gate)
            if threshold > after_low + 1:
                builder.add(-gate, after[threshold - 1])
        low, high, least = after_low, after_high, after


def copies(multiplier: int) -> tuple[tuple[int, int], ...]:
    """Return (shift, sign) with q = Σ sign·2^shift, as few as possible; signs are used only when they save one.

    Source: G. W. Reitwiesner, Binary arithmetic, Advances in Computers 1 (1960) 231-308, for the signed form.

    >>> copies(11), copies(7)
    (((0, 1), (1, 1), (3, 1)), ((0, -1), (3, 1)))
    """
    plain = tuple((place, 1) for place in range(multiplier.bit_length()) if multiplier >> place & 1)
    signed, rest, place = [], multiplier, 0
    while rest:
        if rest & 1:
            sign = 2 - (rest & 3)
            signed.append((place, sign))
            rest -= sign
        rest, place = rest >> 1, place + 1
    return plain if len(plain) <= len(signed) else tuple(signed)


def sum_step(builder: Builder, cell: Cell, bits: Sequence[int], image: Sequence[int]) -> None:
    """State image = T(n) by one sum of shifted copies of n a column, with a carry as small as their number.

    Column z of q·n + d holds the bits n_(z−shift) of the `copies`, d_z and a carry; for r copies the carry has at most
    r + 1 values, whatever q is. It is order-encoded, and free at even steps, as in `serial_step`. A carry threshold is
    monotone in every bit, so its clauses name only the bits that raise it, or only those that do not.
    """
    q, d, true = cell.multiplier, cell.offset, builder.true
    odd, add = bits[0], builder.add
    columns = max(len(bits), len(image) + 1, abs(d).bit_length()) + q.bit_length() + 2
    low = high = 0
    least: dict[int, int] = {}

    def reaches(threshold: int) -> int:
        return true if threshold <= low else -true if threshold > high else least[threshold]

    for place in range(columns):
        out = -true
        if place:
            bit = bits[place] if place < len(bits) else -true
            out = image[place - 1] if place <= len(image) else -true
            add(odd, -bit, out)
            add(odd, bit, -out)
        raising, base = _column(bits, copies(q), place)
        base += d >> place & 1
        values = tuple(product((0, 1), repeat=len(raising)))
        after_low, after_high = (base + low) >> 1, (base + len(raising) + high) >> 1
        for chosen in values if place else ():
            differs = [-literal if one else literal for literal, one in zip(raising, chosen, strict=True)]
            for carry in range(low, high + 1):
                parity = base + sum(chosen) + carry & 1
                add(-odd, *differs, -reaches(carry), reaches(carry + 1), out if parity else -out)
        after = {threshold: builder.variable() for threshold in range(after_low + 1, after_high + 1)}
        for threshold, gate in after.items():
            for chosen in values:
                needed = 2 * threshold - base - sum(chosen)
                if needed <= high:
                    ones = (-literal for literal, one in zip(raising, chosen, strict=True) if one)
                    add(-odd, *ones, -reaches(needed), gate)
                if needed > low:
                    zeros = (literal for literal, one in zip(raising, chosen, strict=True) if not one)
                    add(-odd, *zeros, reaches(needed), -gate)
            if threshold > after_low + 1:
                add(-gate, after[threshold - 1])
        low, high, least = after_low, after_high, after


def lean_step(builder: Builder, cell: Cell, bits: Sequence[int], image: Sequence[int]) -> None:
    """State image = T(n) by `sum_step`, or by `adder_step` for q with many copies."""
    step = sum_step if len(copies(cell.multiplier)) <= MOST_COPIES else adder_step
    step(builder, cell, bits, image)


def _column(bits: Sequence[int], shifted: Sequence[tuple[int, int]], place: int) -> tuple[list[int], int]:
    """Return the literals that raise the sum of a column by 1 each, and what it is when none holds.

    The lowest bit is taken as 1: what follows concerns odd n only.
    """
    raising, base = [], 0
    for shift, sign in shifted:
        if place == shift:
            base += sign
        elif 0 < place - shift < len(bits):
            raising.append(sign * bits[place - shift])
            base -= sign < 0
    return raising, base
