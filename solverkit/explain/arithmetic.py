"""What arithmetic alone says of a cell: the sign of D, the bound U', reduction, repeated words."""

from __future__ import annotations

from dataclasses import dataclass

from solverkit.exact.bounds import balanced_bound
from solverkit.exact.reduction import reduced
from solverkit.window import Cell

__all__ = ["Exclusion", "arithmetic_exclusion", "number"]

_MINUS = "\N{MINUS SIGN}"
_MOST_DIGITS = 40


@dataclass(frozen=True, slots=True)
class Exclusion:
    """A reason of arithmetic for which a cell holds no cycle.

    Args:
        reason: sign, bound, reduction or words.
        text: the inequality, with its integers.
    """

    reason: str
    text: str


def arithmetic_exclusion(cell: Cell) -> Exclusion | None:
    """Return why arithmetic alone excludes a cell of positive elements, or None when it does not.

    >>> arithmetic_exclusion(Cell(3, 1, 5, 3, above=9)).reason
    'bound'
    """
    k, x, q, d = cell.length, cell.odd, cell.multiplier, cell.offset
    determinant = cell.determinant
    if (determinant > 0) != (d > 0):
        sides = f"2^{k} {'>' if determinant > 0 else '<'} {q}^{x}"
        return Exclusion(
            "sign",
            f"n·D = d·β with β > 0, but D = 2^{k} {_MINUS} {q}^{x} = {number(determinant)} and d = {number(d)} have "
            f"different signs ({sides}), so no element is positive",
        )
    if x == k > 1:
        return Exclusion("words", f"all {k} steps are odd, a word that repeats the word of length 1")
    bound = balanced_bound(cell)
    if bound <= cell.above:
        return Exclusion(
            "bound", f"every least element n is at most U' = ⌊|d|·β*/|D|⌋ = {number(bound)}, and {_needs(cell)}"
        )
    reduction = reduced(cell)
    small, factor = reduction.cell, abs(reduction.factor)
    bound = balanced_bound(small)
    if bound <= small.above:
        return Exclusion(
            "reduction",
            f"every element is a multiple of |d|/gcd(|d|, |D|) = {number(factor)}, n = {number(factor)}·m; every least "
            f"m is at most U' = {number(bound)}, and m > {number(small.above)} is asked for",
        )
    return None


def _needs(cell: Cell) -> str:
    return f"n > B = {number(cell.above)} is asked for" if cell.above else "n ≥ 1 is asked for"


def number(value: int) -> str:
    """Return an integer as people read it, rounded to a power of ten beyond 40 digits."""
    sign, size = (_MINUS if value < 0 else ""), abs(value)
    if size < 10**_MOST_DIGITS:
        return f"{sign}{size}"
    digits = size.bit_length() * 30103 // 100000
    return f"{sign}≈10^{digits}"
