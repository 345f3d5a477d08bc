"""The search of one stretch of candidates: which kernel takes which part, and what becomes of what it leaves over."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from solverkit.engines import _sweep_processor as processor
from solverkit.engines._sweep_orbit import closes, reached
from solverkit.engines._sweep_residues import every_element, without_tails
from solverkit.maps import Map
from solverkit.residues.sieve import drop_threshold

if TYPE_CHECKING:
    from collections.abc import Callable, Generator, Iterator

    from numpy.typing import NDArray

    from solverkit.engines._sweep_plan import Block
    from solverkit.window import Cell

__all__ = ["Search"]

_PYTHON_STEPS = 20_000  # candidates × steps below which no kernel is loaded
_WORK = 60_000_000  # steps between two looks at the clock: some tenths of a second
_FEWEST_FALLING, _FEWEST_GROWING = 1 << 24, 1 << 22  # integers below which tables do not pay
_FEWEST_SIEVED, _SIEVE_DEPTH = 1 << 18, 16
_FIRST_LOOK = 4096  # steps after which an orbit that never fell is examined in Python integers
_WORD = (1 << 64) - 1


@dataclass(slots=True)
class Search:
    """Looks for least elements of cycles of the map (q, d) in a stretch of the positive integers.

    Args:
        multiplier: q.
        offset: d.
        low: candidates above this are looked at by this search or by others of the same batch.
        limits: candidate ↦ (most steps, most odd steps) of a cycle with at least that least element.
        reaching: candidate ↦ cells that allow at least that least element; empty when they are not known.
        found: (least element, k, x) of the cycles met.
        counters: what was done, for the record.
    """

    multiplier: int
    offset: int
    low: int
    limits: Callable[[int], tuple[int, int]]
    reaching: Callable[[int], tuple[Cell, ...]]
    found: set[tuple[int, int, int]] = field(default_factory=set)
    counters: dict[str, int] = field(default_factory=dict)

    def stretch(self, first: int, last: int) -> Iterator[int]:
        """Search ``first`` … ``last``; yield now and then the integer up to which all is done, at last ``last``."""
        done = first - 1
        while done < last:
            if not self.limits(done + 1)[0]:
                break  # no cell reaches so far
            block = self._block(done + 1, last)
            if block is None:
                done = yield from self._plainly(done + 1, min(last, 2 * done + 4096))
            else:
                yield from self._by_block(block, done)
                done = min(last, block.end - 1)
                yield done
        yield last

    def _count(self, name: str, number: int) -> None:
        self.counters[name] = self.counters.get(name, 0) + number

    def _fits_words(self, last: int) -> bool:
        return self.multiplier < 1 << 31 and abs(self.offset) < 1 << 61 and last < 1 << 62

    def _block(self, start: int, last: int) -> Block | None:
        """Return the block to sweep with tables from ``start`` on, or None when a plain pass is in order."""
        falling = self.multiplier == 3
        if last - start < (_FEWEST_FALLING if falling else _FEWEST_GROWING):
            return None
        if not processor.available():
            return None
        from solverkit.engines import _sweep_plan as plan  # noqa: PLC0415 - tables load only when they pay

        deepest = 62
        if not falling:
            cells = self.reaching(start)
            if not cells:
                return None
            deepest = min(cell.length for cell in cells) - 9
        return plan.block_at(self.multiplier, self.offset, start, last, deepest)

    def _by_block(self, block: Block, done: int) -> Iterator[int]:
        """Sweep a block; what it leaves over is decided exactly. Yields ``done`` between two slices of work."""
        from solverkit.engines._sweep_fast import survivors  # noqa: PLC0415

        q, d = self.multiplier, self.offset
        floor = max(1, block.base)
        length, odd = self.limits(done + 1)
        most, residues = None, every_element(q, d)
        if q == 3:
            shorter = without_tails(q, d, self.low)
            if floor >= shorter.valid_from and block.end < 1 << 80:
                residues = shorter
        else:
            from solverkit.engines._sweep_ledger import allowance  # noqa: PLC0415

            most = allowance(self.reaching(done + 1), floor)
        for labels in survivors(q, d, block, residues, most, self.counters):
            if len(labels):
                self._settle(block.base, labels, length, odd, residues.tail)
            yield done

    def _settle(self, base: int, labels: NDArray[Any], length: int, odd: int, tail: int) -> None:
        """Decide candidates base + label exactly."""
        import numpy as np  # noqa: PLC0415

        from solverkit.engines import _sweep_wide as wide  # noqa: PLC0415

        q, d = self.multiplier, self.offset
        falling = q == 3
        steps = min(length, _FIRST_LOOK) + tail if falling else length
        rows = np.zeros((len(labels), 4), np.int64)
        count = wide.follow_all(
            labels, np.uint64(base >> 64), np.uint64(base & _WORD), np.uint64(q), d, steps,
            steps if falling else odd, np.uint64((1 << 61) // q), falling, rows,
        )  # fmt: skip
        self._count("examined", len(labels))
        for index, state, k, x in rows[:count].tolist():
            n = base + int(labels[index])
            if state == wide.CLOSED:
                self.found.add((n, k, x))
                continue
            self._count("handed_over", 1)
            if falling:
                if cycle := reached(q, d, n, tail, length):
                    self.found.add(cycle)
            elif end := closes(q, d, n, length, odd):
                self.found.add((n, *end))

    def _jumps(self, first: int, last: int) -> NDArray[Any]:
        """Return, by residue, the distances to the next candidate: odd, or in a class that can hold least elements."""
        from solverkit.engines._sweep_jumps import classes_apart, odd_apart  # noqa: PLC0415

        here = Map(self.multiplier, self.offset)
        if self.multiplier == 3 and last - first >= _FEWEST_SIEVED and first > drop_threshold(here, _SIEVE_DEPTH):
            return classes_apart(here, _SIEVE_DEPTH)
        return odd_apart()

    def _plainly(self, first: int, last: int) -> Generator[int, None, int]:
        """Iterate every odd candidate; return the last integer done after some tenths of a second."""
        q, d = self.multiplier, self.offset
        length, odd = self.limits(first)
        brief = (last - first) * min(length, 100) < _PYTHON_STEPS
        if brief or not self._fits_words(last):
            stop = min(last, (first | 1) + 2 * max(1, 10 * _PYTHON_STEPS // max(1, min(length, 100))))
            for candidate in range(first | 1, stop + 1, 2):
                if end := closes(q, d, candidate, length, odd):
                    self.found.add((candidate, *end))
            yield stop
            return stop
        import numpy as np  # noqa: PLC0415 - numba loads only when it pays

        from solverkit.engines import _sweep_simple as simple  # noqa: PLC0415

        residues = every_element(q, d)
        allowed = np.array(residues.allowed, np.bool_)
        rows = np.zeros((simple.ROWS, 3), np.int64)
        limit = ((1 << 63) - 1 - abs(d)) // q
        count, after, _, tall = simple.scan(
            q,
            d,
            first,
            last,
            length,
            odd,
            limit,
            np.uint64((1 << 61) // q),
            allowed,
            self._jumps(first, last),
            _WORK,
            rows,
        )
        self._count("wide", int(tall))
        for candidate, k, x in rows[:count].tolist():
            if k:
                self.found.add((candidate, k, x))
                continue
            self._count("handed_over", 1)
            if end := closes(q, d, candidate, length, odd):
                self.found.add((candidate, *end))
        done = min(last, int(after) - 1)
        yield done
        return done
