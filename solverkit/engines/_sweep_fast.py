"""Driver of the block kernels: from one block to the few candidates that need an exact look."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from solverkit.engines import _sweep_blocks as kernels
from solverkit.engines._sweep_ledger import Allowance, cap, macro_entries
from solverkit.engines._sweep_plan import aligned, ledger_tables, macro_table, plain_tables
from solverkit.engines._sweep_tree import fewest_odd

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from numpy.typing import NDArray

    from solverkit.engines._sweep_plan import Block, Tables
    from solverkit.engines._sweep_residues import Residues

__all__ = ["survivors"]

#: Passes of twelve (or eight) steps after which a candidate that never dropped is looked at exactly.
_PASSES = 96
_WORD = (1 << 64) - 1
_U = np.uint64
#: Continuations tried between two looks at the clock: some tenths of a second.
_SLICE = 1 << 26
_FREE = Allowance((1 << 30) - 1, 32, 1 << 62, 1 << 62, 1 << 20)


def survivors(
    multiplier: int,
    offset: int,
    block: Block,
    residues: Residues,
    most: Allowance | None,
    counters: dict[str, int],
) -> Iterator[NDArray[np.uint64]]:
    """Yield the candidates of ``block`` that sieves and macro-steps leave over, as distances from its base.

    Every n of the block that is the least element of a cycle is among them (without an allowance: or an integer that
    runs into its cycle and is tested in its stead, see `_sweep_residues`); most of what is yielded is neither.

    Args:
        multiplier: q.
        offset: d.
        block: integers that `fits`.
        residues: sound for all of them.
        most: what cells allow, for maps whose orbits mostly grow; None for maps whose orbits fall.
        counters: "tried" and "started" grow by the continuations looked at and the candidates iterated.

    Each item comes after some tenths of a second of work, so that the caller can look at the clock.
    """
    fewest = fewest_odd(multiplier, offset, max(1, block.base), block.depth)
    small = macro_table(multiplier, offset) if most is None else None
    if small is not None:
        tables = plain_tables(multiplier, offset, fewest, block.first, block.second, residues)
    else:
        tables = ledger_tables(multiplier, offset, fewest, block.first, block.second, residues, most or _FREE)
    flags = aligned(kernels.FLAGS, np.uint64)
    cut = (
        _U(block.first), _U(block.second), _U(block.base >> block.first), _U(block.repeat),
        _U(block.base % tables.modulus), _U(tables.modulus), _U((1 << 24) // tables.modulus + 1),
    )  # fmt: skip
    for low, high, kernel in _parts(multiplier, offset, block, tables, small, most, cut, flags):
        place = low
        while place < high:
            before = int(tables.cumulated[place - 1]) if place else 0
            stop = max(place + 1, int(np.searchsorted(tables.cumulated, before + max(1, _SLICE // block.repeat))))
            count, place, tried, started = (int(part) for part in kernel(place, min(stop, high)))
            counters["tried"] = counters.get("tried", 0) + tried
            counters["started"] = counters.get("started", 0) + started
            yield flags[:count]


def _ceilings(block: Block, most: Allowance | None) -> NDArray[np.uint64]:
    """Return, for each pass of eight steps, the largest upper limb from which an orbit can still return.

    A value v > n·2^r with r steps left never returns to n, since T(v) ≥ v/2 above a least element (see `closes`).
    All passes end before the shortest cycle does: a ledger holds for one round only.
    """
    if most is None:
        return np.full(_PASSES, 1 << 62, np.uint64)
    ends = range(block.depth + 8, most.shortest, 8)
    return np.array([min(1 << 62, (block.end << most.longest - end) >> 32) for end in ends], np.uint64)


def _parts(
    multiplier: int,
    offset: int,
    block: Block,
    tables: Tables,
    small: tuple[NDArray[np.uint16], int] | None,
    most: Allowance | None,
    cut: tuple[Any, ...],
    flags: NDArray[np.uint64],
) -> list[tuple[int, int, Callable[[int, int], tuple[int, ...]]]]:
    """Return (first class, one past the last, kernel) of the parts of a block, classes being sorted by odd count."""
    signed = _U(offset & _WORD)
    floor = max(1, block.base)
    if small is None:
        entries = macro_entries(multiplier, offset)
        large = aligned(len(entries), np.uint64)
        large[:] = entries
        budget = most or _FREE
        ceilings = _ceilings(block, most)
        scalars = (
            signed, _U(floor & 0xFFFFFFFF), _U(floor >> 32), _U(budget.budget), _U(cap(budget.ratio)),
            _U((1 << 61) // multiplier**8 << 8),
        )  # fmt: skip

        def with_ledger(place: int, stop: int) -> tuple[int, ...]:
            done: tuple[int, ...] = kernels.ledger_classes(
                place, stop, cut, tables.arrays, tables.extra, scalars, ceilings, large, flags
            )
            return done

        return [(0, tables.classes, with_ledger)]
    table, bias = small
    narrow_limit, broad_limit = (((1 << bits) // multiplier**12) << 12 for bits in (62, 61))
    one = (signed, _U(bias), _U(min(floor, 1 << 62)), _U(narrow_limit), _U(broad_limit), _PASSES)
    two = (signed, _U(bias), _U(floor >> 32), _U(0), _U(broad_limit), _PASSES)

    def narrow(place: int, stop: int) -> tuple[int, ...]:
        return kernels.narrow_classes(place, stop, cut, tables.arrays, one, table, flags)  # type: ignore[no-any-return]

    def broad(place: int, stop: int) -> tuple[int, ...]:
        return kernels.broad_classes(place, stop, cut, tables.arrays, two, table, flags)  # type: ignore[no-any-return]

    split = 0
    for a in sorted(tables.most_slope):
        middle = multiplier**a * (block.end + abs(offset) + 1) >> block.first - 1
        leaf = ((middle >> block.second) + 1) * tables.most_slope[a] + tables.most_shift
        if middle >= 1 << 62 or leaf >= 1 << 62 or floor >= 1 << 55:
            break
        split = int(np.searchsorted(tables.arrays[1], a, side="right"))
    return [part for part in ((0, split, narrow), (split, tables.classes, broad)) if part[0] < part[1]]
