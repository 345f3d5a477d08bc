"""Counting the cycles of a cell by residues, and listing or sampling them."""

from __future__ import annotations

import math
import time
from math import gcd
from typing import TYPE_CHECKING

from solverkit.engines import _tally_listing as listing
from solverkit.engines._tally_count import MAX_PLANES, Plan, solution_words
from solverkit.engines._tally_sampling import sample_words
from solverkit.errors import CapacityError, ContradictionError
from solverkit.methods import Family, Hit, Piece, PieceResult
from solverkit.words import lyndon_count, moebius

if TYPE_CHECKING:
    from collections.abc import Sequence

    from solverkit.methods import Budget
    from solverkit.window import Cell

__all__ = ["ENGINE", "Tally", "count_cycles"]

_LARGEST_MODULUS = 1 << 31
_LARGEST_LENGTH = 10_000
_SEED = 20_231

# Measured on one core; seconds. Tables beyond the cache wait for memory.
_START = 0.002
_CACHED = 200_000
_ADDITION, _ADDITION_FAR = 0.12e-9, 0.45e-9
_LOOK_UP, _LOOK_UP_FAR = 6e-9, 30e-9
_PRODUCT = 1.5e-9
_SUFFIX_ADDITIONS = 200
_HALF_WORD = 1.2e-7
_LISTED_STEP = 6e-7


def modulus_of(cell: Cell) -> int:
    """Return |D|/gcd(D, d): a word is a cycle of the cell's map exactly when this divides its β."""
    determinant = cell.determinant
    return abs(determinant) // gcd(determinant, cell.offset)


def count_cycles(cell: Cell, deadline: float | None = None, memory: int | None = None) -> int:
    """Return the exact number of cycles of ``cell``; its bound ``above`` is not used.

    Args:
        cell: of positive elements.
        deadline: value of ``time.monotonic()`` after which to give up, or None.
        memory: bytes that a table may take, or None.

    A word that is a word v repeated e times has the elements of v, so it is a solution exactly when v solves
    the cell (q, d, k/e, x/e) with its own modulus. Möbius inversion over e leaves the aperiodic solutions; a
    cycle has k.

    Raises:
        CapacityError: the time or the memory does not suffice.

    >>> from solverkit.window import Cell
    >>> count_cycles(Cell(3, 5077565, 27, 17))
    312455
    """
    if (cell.determinant > 0) != (cell.offset > 0):
        return 0
    common = gcd(cell.length, cell.odd)
    words = 0
    for folds in range(1, common + 1):
        sign = moebius(folds) if common % folds == 0 else 0
        if sign:
            length, odd = cell.length // folds, cell.odd // folds
            determinant = (1 << length) - cell.multiplier**odd
            modulus = abs(determinant) // gcd(determinant, cell.offset)
            words += sign * solution_words(cell.multiplier, length, odd, modulus, deadline=deadline, memory=memory)
    cycles, rest = divmod(words, cell.length)
    if rest:
        raise ContradictionError(f"{cell}: {words} aperiodic solutions are not a multiple of the length")
    return cycles


def _bound_is_idle(cell: Cell) -> bool:
    """Tell whether every element of every cycle exceeds the cell's bound.

    All odd steps first give the least β, (q^x − 2^x)/(q − 2).
    """
    smallest = int(cell.multiplier**cell.odd - 2**cell.odd) // (cell.multiplier - 2)
    return cell.above * abs(cell.determinant) < abs(cell.offset) * smallest


class Tally:
    """Exact count by dynamic programming over (step, odd count, residue of β mod |D|/gcd(D, d)).

    Args:
        list_at_most: a cell with more cycles reports its exact count and a sample, unless the budget says otherwise.
        sample: number of cycles in a sample.
        memory: bytes that one cell may take, unless the budget says less.

    Cells of few words are listed without counting them first. A cell with a bound ``above`` is listed whole
    and then filtered, since a count knows no least elements.
    """

    name = "tally"
    family = Family.WORD

    def __init__(self, list_at_most: int = 10_000, sample: int = 20, memory: int = 4 << 30) -> None:
        self.list_at_most, self.sample, self.memory = list_at_most, sample, memory

    def refusal(self, cell: Cell) -> str | None:
        """Return why tally can't take ``cell``: a long word, a large modulus or a large table; else None."""
        if cell.length > _LARGEST_LENGTH:
            return f"length {cell.length} is above {_LARGEST_LENGTH}"
        if (cell.determinant > 0) != (cell.offset > 0):
            return None
        modulus = modulus_of(cell)
        if self._is_small(cell, modulus):
            return None
        expected = lyndon_count(cell.length, cell.odd) // modulus
        if expected > 2 * self.list_at_most and not _bound_is_idle(cell):
            return f"about 2^{expected.bit_length()} cycles are too many to compare with the bound {cell.above}"
        if modulus == 1:
            return None
        if modulus >= _LARGEST_MODULUS:
            return f"the modulus |D|/gcd(D, d) has {modulus.bit_length()} bits; at most 31 are possible"
        plan = Plan.halves(cell.length, cell.odd, modulus)
        if plan.planes > MAX_PLANES:
            return f"counts of {56 * plan.planes} bits; at most {56 * MAX_PLANES} are possible"
        if plan.bytes > self.memory:
            return f"the table of residues mod {modulus} takes {plan.bytes >> 20} MiB of {self.memory >> 20} MiB"
        return None

    def _is_small(self, cell: Cell, modulus: int) -> bool:
        return modulus < listing.LARGEST_MODULUS and lyndon_count(cell.length, cell.odd) <= self.list_at_most

    def estimate(self, cells: Sequence[Cell]) -> float:
        """Return the expected time of ``cells``, in seconds on one core; infinite for refused ones."""
        return sum(self._estimate(cell) for cell in cells)

    def _estimate(self, cell: Cell) -> float:
        if self.refusal(cell) is not None:
            return math.inf
        if (cell.determinant > 0) != (cell.offset > 0):
            return _START
        modulus = modulus_of(cell)
        expected = lyndon_count(cell.length, cell.odd) // modulus
        step = _LISTED_STEP * (1 + cell.length / 2000)
        counting = 0.0
        if modulus > 1 and not self._is_small(cell, modulus):
            plan = Plan.halves(cell.length, cell.odd, modulus)
            near = modulus <= _CACHED
            addition, look_up = (_ADDITION, _LOOK_UP) if near else (_ADDITION_FAR, _LOOK_UP_FAR)
            pairs = (plan.high - plan.low + 1) * modulus * (2.0 if cell.length % 2 else 0.5)
            counting = addition * plan.additions + (look_up + _PRODUCT * plan.planes**2) * pairs
            if expected > self.list_at_most:
                counting += addition * _SUFFIX_ADDITIONS * modulus
        if expected > self.list_at_most:
            return _START + counting + step * self.sample * cell.length
        return _START + counting + _HALF_WORD * listing.list_cost(cell) + step * (expected + 1) * cell.length

    def batches(self, cells: Sequence[Cell]) -> list[tuple[Cell, ...]]:
        """Return every cell as a batch of its own: the moduli differ, so there is nothing to share."""
        return [(cell,) for cell in cells]

    def pieces(self, batch: tuple[Cell, ...], seconds: float) -> list[Piece]:  # noqa: ARG002 - not divisible
        """Return one piece: the table of a cell is filled in one go."""
        return [Piece(self.name, batch)]

    def run(self, piece: Piece, budget: Budget) -> PieceResult:
        """Count, list or sample the cells of ``piece``."""
        started = time.thread_time()
        deadline = None if budget.seconds is None else time.monotonic() + budget.seconds
        memory = self.memory if budget.memory is None else min(self.memory, budget.memory)
        list_at_most = self.list_at_most if budget.list_at_most is None else budget.list_at_most
        hits: list[Hit] = []
        totals: list[tuple[int, int, int]] = []
        reasons: list[str] = []
        for cell in piece.cells:
            try:
                least, total = self._decide(cell, deadline, memory, list_at_most)
            except CapacityError as limit:
                reasons.append(limit.reason)
                continue
            hits.extend(Hit(cell.length, cell.odd, n) for n in least if n > cell.above)
            if total is not None:
                totals.append((cell.length, cell.odd, total))
        seconds = time.thread_time() - started
        return PieceResult(piece, tuple(sorted(hits)), not reasons, "; ".join(reasons), tuple(totals), seconds=seconds)

    def _decide(
        self, cell: Cell, deadline: float | None, memory: int, list_at_most: int
    ) -> tuple[list[int], int | None]:
        """Return least elements, and the number of cycles when they are a sample."""
        if (cell.determinant > 0) != (cell.offset > 0):
            return [], None
        modulus = modulus_of(cell)
        if self._is_small(cell, modulus):
            return listing.list_cycles(cell, modulus, deadline), None
        if modulus >= _LARGEST_MODULUS:
            raise CapacityError(self.name, f"the modulus |D|/gcd(D, d) has {modulus.bit_length()} bits, more than 31")
        total = count_cycles(cell, deadline, memory)
        if total == 0:
            return [], None
        if total > list_at_most:
            if not _bound_is_idle(cell):
                raise CapacityError(
                    self.name, f"{total} cycles are too many to list and compare with the bound {cell.above}"
                )
            return self._sample(cell, modulus, total, deadline, memory), total
        if 8 * listing.list_cost(cell) > memory:
            raise CapacityError(self.name, f"listing {total} cycles takes {listing.list_cost(cell)} half words")
        least = listing.list_cycles(cell, modulus, deadline)
        if len(least) != total:
            raise ContradictionError(f"{cell}: {total} cycles counted but {len(least)} listed")
        return least, None

    def _sample(self, cell: Cell, modulus: int, total: int, deadline: float | None, memory: int) -> list[int]:
        least: set[int] = set()
        for word in sample_words(cell, modulus, _SEED, memory, deadline):
            n = listing.element(cell, word)
            if n is None:
                raise ContradictionError(f"{word} solves {cell} mod {modulus} but gives no positive integer")
            least.add(listing.least_element(cell, n))
            if len(least) >= min(self.sample, total):
                break
        return sorted(least)


ENGINE = Tally()
