"""Primitive cycles of one frame (q, k, x), whatever the offset.

Every aperiodic word is a primitive cycle for exactly one |d|, namely |D|/gcd(D, β), with the sign of D when
the elements are positive: n = d·β/D is an integer exactly when |D|/gcd(D, β) divides d, and for that d itself
n and d have no common factor. The cycles of any other offset are those of its divisors, multiplied.

Source: Lagarias, Acta Arith. 56 (1990) 33-53 (rational cycles of 3x+1; those of q·x + d follow by scaling).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from math import gcd
from typing import TYPE_CHECKING

import numpy as np
from flint import fmpz

from solverkit.engines._census_scan import Share, rare_weights, screened_words
from solverkit.errors import ContradictionError
from solverkit.maps import Map
from solverkit.words import lyndon_count

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from solverkit.engines._census_scan import Block

__all__ = ["Found", "Frame", "smooth_part", "wanted_cycles"]

#: Up to this bound the product of all primes is made, 1.4 million bits at 10^6.
_LONGEST_PRIMORIAL = 10_000_000


@dataclass(frozen=True, slots=True)
class Frame:
    """What a cell is without its offset.

    Args:
        multiplier: q.
        length: k.
        odd: x, 1 … k.
    """

    multiplier: int
    length: int
    odd: int

    @property
    def determinant(self) -> int:
        """D = 2^k − q^x."""
        return (1 << self.length) - int(self.multiplier**self.odd)

    def fits_word(self) -> bool:
        """Tell whether q·β + |D| < 2^63 for every word, so that 64-bit words can do the checks.

        The largest β has all odd steps last: 2^(k−x)·(q^x − 2^x)/(q − 2).
        """
        q = self.multiplier
        largest = (q**self.odd - 2**self.odd) // (q - 2) << (self.length - self.odd)
        return bool(q * largest + abs(self.determinant) < 1 << 63)


@dataclass(frozen=True, slots=True)
class Found:
    """Primitive cycles of one block of words.

    Args:
        offsets: |d| of each.
        least: least element of each, positive.
        visited: words visited so far, by all blocks of the frame together.
    """

    offsets: list[int]
    least: list[int]
    visited: int


@lru_cache(maxsize=8)
def _primorial(most: int) -> fmpz:
    return fmpz.primorial_ui(fmpz(most))


def smooth_part(number: int, most: int) -> int:
    """Return the largest divisor of ``number`` ≥ 1 whose prime factors are at most ``most``.

    Beyond 10^7 the number itself is returned: any offset that divides it divides that as well.

    >>> smooth_part(2**4 * 3 * 7 * 101, 7)
    336
    """
    if most > _LONGEST_PRIMORIAL or most >= number:
        return number
    product = int(_primorial(most) % number)
    return gcd(number, pow(product, number.bit_length(), number))


def wanted_cycles(
    frame: Frame,
    *,
    dividing: int | None = None,
    at_most: int | None = None,
    share: Share | None = None,
    deadline: float | None = None,
) -> Iterator[Found]:
    """Yield the primitive cycles of positive elements whose |d| divides or does not exceed a given number.

    Args:
        frame: (q, k, x).
        dividing: keep |d| if it divides this divisor of D, or None.
        at_most: keep |d| up to this, or None.
        share: which part of the words to run over, or None for all.
        deadline: value of ``time.monotonic()`` after which to give up, or None.

    Raises:
        CapacityError: the deadline has passed.
        ContradictionError: the number of words visited is not the number of Lyndon words.
    """
    size = abs(frame.determinant)
    divisor = 1
    if dividing is not None:
        divisor = size // gcd(size, dividing)
    elif at_most is not None:
        divisor = size // smooth_part(size, at_most)
    most = size if at_most is None else min(at_most, size)
    check = _check_compiled if frame.fits_word() else _check_plain
    visited = 0
    blocks = screened_words(frame.multiplier, frame.length, frame.odd, divisor, share=share, deadline=deadline)
    for block in blocks:
        visited = block.visited
        offsets, least = check(frame, block, dividing, most) if block.count else ([], [])
        yield Found(offsets, least, visited)
    if (share is None or share.count == 1) and visited != lyndon_count(frame.length, frame.odd):
        raise ContradictionError(f"{frame}: visited {visited} words, not all {lyndon_count(frame.length, frame.odd)}")


@lru_cache(maxsize=4)
def _arrays(frame: Frame) -> tuple[NDArray[np.uint64], np.uint64, NDArray[np.uint64], NDArray[np.uint64]]:
    """Return the terms and the constant of β, the primes of D and their powers in D."""

    def weight(j: int, p: int) -> int:
        return int(frame.multiplier ** (frame.odd - 1 - j)) << p

    factors = sorted(((int(p), int(p) ** e) for p, e in fmpz(frame.determinant).factor()), reverse=True)
    primes, powers = (np.array([pair[i] for pair in factors], np.uint64) for i in (0, 1))
    return *rare_weights(frame.length, frame.odd, weight), primes, powers


def _check_compiled(frame: Frame, block: Block, dividing: int | None, most: int) -> tuple[list[int], list[int]]:
    from solverkit.engines._census_kernels import check_words  # noqa: PLC0415 - numba loads only when it is used

    offsets, least = np.empty(block.count, np.uint64), np.empty(block.count, np.int64)
    kept = check_words(
        block.places,
        block.count,
        *_arrays(frame),
        frame.multiplier,
        frame.determinant < 0,
        np.uint64(dividing or 0),
        np.uint64(most),
        offsets,
        least,
    )
    return offsets[:kept].tolist(), least[:kept].tolist()


def _check_plain(frame: Frame, block: Block, dividing: int | None, most: int) -> tuple[list[int], list[int]]:
    size, sign = abs(frame.determinant), 1 if frame.determinant > 0 else -1
    offsets, least = [], []
    for ones in block.ones(frame.length):
        beta = 0
        for place in ones:
            beta = beta * frame.multiplier + (1 << place)
        common = gcd(size, beta)
        offset = size // common
        if offset <= most and not (dividing and dividing % offset):
            orbit = Map(frame.multiplier, sign * offset).orbit(beta // common, frame.length - 1)
            offsets.append(offset)
            least.append(min(orbit))
    return offsets, least
