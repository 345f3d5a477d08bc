"""Blocks of candidates and the tables with which a kernel sweeps them."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING, Any

import numpy as np

from solverkit.engines._sweep_ledger import charges, start_ratio
from solverkit.engines._sweep_tree import Classes, continuations, surviving

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from solverkit.engines._sweep_ledger import Allowance
    from solverkit.engines._sweep_residues import Residues

__all__ = [
    "LEAST_START",
    "Block",
    "Tables",
    "aligned",
    "block_at",
    "fits",
    "ledger_tables",
    "macro_table",
    "plain_tables",
]

#: Candidates below this are not worth tables: a plain pass over all of them takes milliseconds.
LEAST_START = 1 << 22
_LEAST_DEPTH, _MOST_DEPTH = 20, 38
_MOST_FIRST, _MOST_SECOND, _MOST_REPEAT = 22, 16, 16
_SLOPE_BITS = 46
_WORD = (1 << 64) - 1
_PADDING = 8


@dataclass(frozen=True, slots=True)
class Block:
    """The integers base + [0, repeat·2^(first + second)), swept together.

    Args:
        base: a multiple of 2^first.
        first: m1, depth of the residue tree.
        second: m2, depth of the continuations.
        repeat: how often the residues mod 2^(m1 + m2) are run through.
    """

    base: int
    first: int
    second: int
    repeat: int = 1

    @property
    def depth(self) -> int:
        """Steps that the tables take."""
        return self.first + self.second

    @property
    def end(self) -> int:
        """One past the last integer."""
        return self.base + (self.repeat << self.depth)


def _most_steps(multiplier: int, bits: int) -> int:
    """Return the largest e with q^e < 2^bits, or 0."""
    steps = 0
    while bits > 0 and multiplier ** (steps + 1) < 1 << bits:
        steps += 1
    return steps


def fits(multiplier: int, offset: int, block: Block) -> bool:
    """Tell whether the kernels' words hold what a block of this map meets, whatever its classes.

    After m steps a value is below 2·(n + |d|)·(q/2)^m in absolute value. The upper limb of a value after m1 steps,
    divided by 2^m2, is multiplied by at most q^m2: 2^93 keeps that within 62 bits.
    """
    bound = (block.end + abs(offset) + 1) * multiplier**block.depth >> block.depth - 1
    return bound < 1 << 93 and abs(offset) * multiplier**4 < 1 << 58 and multiplier**4 < 1 << 32


def block_at(multiplier: int, offset: int, start: int, last: int, deepest: int = _MOST_DEPTH) -> Block | None:
    """Return the block that begins at or just below ``start``, or None when a plain pass serves better.

    Args:
        multiplier: q.
        offset: d.
        start: first candidate.
        last: last candidate wanted; the block ends beyond it only when little is left.
        deepest: most steps that the tables may take.

    The block is at most a quarter of its start long, so that one floor fits all its candidates. Depths are cut so
    that q^m1, q^m2 and |d|·q^m2 stay within the kernels' words.
    """
    left = last - start + 1
    whole = min(start.bit_length() - 3, left.bit_length() - (left > 1 << 27))
    second_most = min(_MOST_SECOND, _most_steps(multiplier, 60 - abs(offset).bit_length()), _most_steps(multiplier, 31))
    first_most = min(_MOST_FIRST, _most_steps(multiplier, _SLOPE_BITS))
    if start < LEAST_START or abs(offset) >= 1 << 56:
        return None
    for depth in range(min(_MOST_DEPTH, deepest, whole, first_most + second_most), _LEAST_DEPTH - 1, -1):
        second = min(second_most, depth // 2)
        first = min(first_most, depth - second)
        repeat = max(1, min(_MOST_REPEAT, left >> first + second, start >> first + second + 3))
        block = Block(start >> first << first, first, second, repeat)
        if fits(multiplier, offset, block):
            return block if second >= 4 else None
    return None


@dataclass(frozen=True, slots=True)
class Tables:
    """What a kernel reads; plain arrays.

    Args:
        classes: the surviving classes.
        arrays: (residue, odd, beta, count, powers, inverse, masks, entries, slopes, shifts).
        extra: (begin, spent, starts) for ledgers, else empty.
        most_slope: largest q^a of a continuation, by odd count of the class.
        cumulated: continuations of the classes up to each one.
        most_shift: largest |t| of a continuation.
        modulus: of the residues.
    """

    classes: int
    arrays: tuple[NDArray[Any], ...]
    extra: tuple[NDArray[Any], ...]
    cumulated: NDArray[np.uint64]
    most_slope: dict[int, int]
    most_shift: int
    modulus: int


def aligned(count: int, kind: Any) -> NDArray[Any]:  # noqa: ANN401 - a numpy type
    """Return an array of zeros that begins at a multiple of 64 bytes."""
    size = count * np.dtype(kind).itemsize
    raw = np.zeros(size + 64, np.uint8)
    begin = -raw.ctypes.data % 64
    return raw[begin : begin + size].view(kind)


def _filled(values: NDArray[Any], kind: Any, padding: int = 0) -> NDArray[Any]:  # noqa: ANN401 - a numpy type
    array = aligned(len(values) + _PADDING, kind)
    array[: len(values)] = values
    array[len(values) :] = padding
    return array


def _masks(residues: Residues, first: int) -> NDArray[np.uint64]:
    """Return, for each residue r of a place, the bit mask of the c for which r + c·2^first is allowed."""
    modulus, step = residues.modulus, 1 << first
    words = [sum(1 << c for c in range(modulus) if residues.allowed[(r + c * step) % modulus]) for r in range(modulus)]
    return np.array(words, np.uint64)


def _by_odd(multiplier: int, first: int, second: int) -> tuple[NDArray[np.uint64], NDArray[np.uint64]]:
    """Return q^a mod 2^64 and q^(−a) mod 2^second for a = 0 … first."""
    powers = [pow(multiplier, a) & _WORD for a in range(first + 1)]
    inverse = [pow(multiplier, -a, 1 << second) for a in range(first + 1)]
    return np.array(powers, np.uint64), np.array(inverse, np.uint64)


@lru_cache(maxsize=32)
def _all_classes(multiplier: int, offset: int, fewest: tuple[int, ...], first: int) -> Classes:
    free = np.zeros((first, first + 1), np.int64)
    return surviving(multiplier, offset, fewest, first, first, free, 0)


@lru_cache(maxsize=16)
def _sorted_by_need(
    multiplier: int, offset: int, fewest: tuple[int, ...], first: int, second: int
) -> tuple[NDArray[Any], NDArray[Any], NDArray[Any], tuple[int, ...], NDArray[Any]]:
    """Return entries, slopes, shifts and needs of the continuations, sorted by the odd count they need."""
    table = continuations(multiplier, offset, second)
    need = np.zeros(1 << second, np.int64)
    for j in range(second):
        need = np.maximum(need, fewest[first + j + 1] - table.before[j] - table.parity[j])
    order = np.argsort(need, kind="stable")
    powers = np.array([multiplier**a for a in range(second + 1)], np.int64)
    shift = np.array(table.shift, np.int64)
    return (
        _filled(order, np.uint32),
        _filled(powers[table.odd[order]], np.uint32),
        _filled(shift[order], np.int64, -1),
        tuple(need[order].tolist()),
        powers[table.odd[order]],
    )


@lru_cache(maxsize=16)
def plain_tables(
    multiplier: int, offset: int, fewest: tuple[int, ...], first: int, second: int, residues: Residues
) -> Tables:
    """Return the tables of a block without ledgers: one sorted list of continuations serves all classes."""
    classes = _all_classes(multiplier, offset, fewest, first)
    entries, slopes, shifts, need, sorted_slopes = _sorted_by_need(multiplier, offset, fewest, first, second)
    powers, inverse = _by_odd(multiplier, first, second)
    admitted = np.searchsorted(np.array(need), np.arange(first + 1), side="right")
    most_slope = {a: int(sorted_slopes[: admitted[a]].max(initial=1)) for a in range(first + 1)}
    count = admitted[classes.odd].astype(np.uint64)
    arrays = (
        classes.residue, classes.odd, classes.beta, count, powers, inverse, _masks(residues, first),
        entries, slopes, shifts,
    )  # fmt: skip
    most_shift = int(np.abs(shifts).max())
    return Tables(len(count), arrays, (), np.cumsum(count), most_slope, most_shift, residues.modulus)


@lru_cache(maxsize=8)
def ledger_tables(
    multiplier: int, offset: int, fewest: tuple[int, ...], first: int, second: int, residues: Residues, most: Allowance
) -> Tables:
    """Return the tables of a block with ledgers: continuations sorted by what they spend, for each odd count."""
    fees = charges(multiplier, most.ratio, first + second)
    classes = surviving(multiplier, offset, fewest, first, most.most_odd, fees, most.budget)
    table = continuations(multiplier, offset, second)
    powers, inverse = _by_odd(multiplier, first, second)
    own = np.array([multiplier**a for a in range(second + 1)], np.int64)
    shift = np.array(table.shift, np.int64)
    parts: list[tuple[NDArray[Any], NDArray[Any], NDArray[Any], NDArray[Any]]] = []
    count = np.zeros(len(classes.odd), np.uint64)
    begin = np.zeros(len(classes.odd), np.uint64)
    most_slope: dict[int, int] = {}
    place = 0
    for a in np.unique(classes.odd).tolist():
        spent = np.zeros(1 << second, np.int64)
        alive = a + table.odd <= most.most_odd
        for j in range(second):
            spent += np.where(table.parity[j], fees[first + j, np.minimum(a + table.before[j], first + second)], 0)
            alive &= a + table.before[j] + table.parity[j] >= fewest[first + j + 1]
        alive &= spent <= most.budget
        chosen = np.flatnonzero(alive)
        chosen = chosen[np.argsort(spent[chosen], kind="stable")]
        odd = table.odd[chosen]
        ratios = np.array(
            [start_ratio(multiplier, most.ratio, first + second, a + b) for b in range(second + 1)], np.int64
        )
        starts = (spent[chosen] << 32) + ratios[odd]
        parts.append((chosen, own[odd], shift[chosen], starts))
        mine = classes.odd == a
        count[mine] = np.searchsorted(spent[chosen], most.budget - classes.spent[mine], side="right")
        begin[mine] = place
        place += len(chosen)
        most_slope[a] = int(own[odd].max(initial=1))
    columns = [np.concatenate(column) for column in zip(*parts, strict=True)] if parts else [np.zeros(0, np.int64)] * 4
    arrays = (
        classes.residue, classes.odd, classes.beta, count, powers, inverse, _masks(residues, first),
        _filled(columns[0], np.uint32), _filled(columns[1], np.uint32), _filled(columns[2], np.int64, -1),
    )  # fmt: skip
    extra = (begin, classes.spent.astype(np.uint64), _filled(columns[3], np.uint64, _WORD >> 1))
    most_shift = int(np.abs(columns[2]).max(initial=0))
    return Tables(len(count), arrays, extra, np.cumsum(count), most_slope, most_shift, residues.modulus)


@lru_cache(maxsize=64)
def macro_table(multiplier: int, offset: int) -> tuple[NDArray[np.uint16], int] | None:
    """Return the 64 macro-steps of six steps as 16-bit entries and the bias of t, or None when they do not fit."""
    if multiplier**6 >= 1 << 16 or abs(offset) >= 1 << 16:
        return None
    slopes, shifts = [], []
    for residue in range(64):
        value, odd = residue, 0
        for _ in range(6):
            if value & 1:
                value, odd = (multiplier * value + offset) >> 1, odd + 1
            else:
                value >>= 1
        slopes.append(multiplier**odd)
        shifts.append(value)
    bias = max(0, -min(shifts))
    if max(shifts) + bias >= 1 << 16:
        return None
    table = aligned(128, np.uint16)
    table[:] = slopes + [shift + bias for shift in shifts]
    return table, bias
