"""One step of the map on bits: out = n/2 for even n, (q·n + d)/2 for odd n.

Both forms are exact: they admit the pair of bit lists if and only if the second number is the image of the first.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Sequence

    from cycle_encodings._gates import Builder
    from solverkit.window import Cell

__all__ = ["adder_step", "additions", "serial_step"]


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
