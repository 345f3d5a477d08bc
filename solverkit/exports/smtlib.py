"""SMT-LIB 2 in the logic QF_BV, written from the cell: the definition of a cycle, as a reader would write it.

Bit vectors n0 … nk; assertions named after the condition groups: ``step``, ``closing``, ``odd-count``, ``order``,
``lower-bound``, ``upper-bound``, ``ranges``. The last one bounds every element by M, the largest that
`element_windows` admits, and with W bits, q·M + |d| < 2^(W−1), nothing wraps around: the script is exact. Solving it
and excluding each value of n0 that comes out lists the cell.

A solver answers the last line, ``get-value``, with an error when there is no cycle.

About 2·k additions and k multiplications by the constant q, of W bits.
"""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise
from typing import TYPE_CHECKING

from solverkit.errors import CapacityError
from solverkit.exact.bounds import EXACT_LENGTH
from solverkit.exact.windows import element_windows
from solverkit.exports.comments import heading

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from solverkit.exact.windows import Windows
    from solverkit.window import Cell

__all__ = ["smtlib_lines"]


def smtlib_lines(cell: Cell, name: str = "") -> Iterator[str]:
    """Yield the lines of the script.

    Args:
        cell: of positive elements, at most `EXACT_LENGTH` long.
        name: not used; every writer takes it.

    Raises:
        CapacityError: the cell is longer.
    """
    if cell.length > EXACT_LENGTH:
        raise CapacityError("SMT-LIB 2", f"length {cell.length} is above {EXACT_LENGTH}")
    # The bound B stays a condition of its own: it does not narrow the ranges.
    windows = element_windows(replace(cell, above=0))
    for note in heading(cell, name):
        yield f"; {note}"
    yield "; for the conditions that exclude a cycle, set :produce-unsat-cores and ask get-unsat-core"
    yield "(set-option :produce-models true)"
    yield "(set-logic QF_BV)"
    yield from _empty() if windows.empty else _conditions(cell, windows)
    yield "(check-sat)"
    yield "(get-value (n0))"
    yield "(exit)"


def _empty() -> Iterator[str]:
    yield "; the ranges of the elements alone leave nothing"
    yield "(declare-const n0 (_ BitVec 1))"
    yield _named("ranges", ["false"])


def _conditions(cell: Cell, windows: Windows) -> Iterator[str]:
    q, d, k = cell.multiplier, cell.offset, cell.length
    largest = max(windows.elements(i).high for i in range(k + 1))
    width = (q * largest + abs(d)).bit_length() + 1
    sort = f"(_ BitVec {width})"
    elements = [f"n{i}" for i in range(k + 1)]
    for element in elements:
        yield f"(declare-const {element} {sort})"

    def number(value: int) -> str:
        return f"(_ bv{value % (1 << width)} {width})"

    yield f"(define-fun image ((n {sort})) {sort} (ite (= ((_ extract 0 0) n) #b1)"
    yield f"  (bvashr (bvadd (bvmul {number(q)} n) {number(d)}) {number(1)}) (bvlshr n {number(1)})))"
    yield _named("step", [f"(= {image} (image {each}))" for each, image in pairwise(elements)])
    yield _named("closing", [f"(= {elements[-1]} {elements[0]})"])
    yield _named("odd-count", [_count(elements[:-1], cell.odd)])
    yield _named("order", [f"(bvult n0 {each})" for each in elements[1:-1]])
    yield _named("lower-bound", [f"(bvugt n0 {number(min(cell.above, windows.bound))})"])
    yield _named("upper-bound", [f"(bvule n0 {number(windows.bound)})"])
    yield _named("ranges", [f"(bvule {each} {number(largest)})" for each in elements])


def _count(elements: Sequence[str], odd: int) -> str:
    """Return the statement that so many of the elements are odd, as a chain of additions too narrow to be costly."""
    width = len(elements).bit_length()
    parities = [f"((_ extract 0 0) {each})" for each in elements]
    if width > 1:
        parities = [f"((_ zero_extend {width - 1}) {parity})" for parity in parities]
    total = parities[0] if len(parities) == 1 else f"(bvadd {' '.join(parities)})"
    return f"(= {total} (_ bv{odd} {width}))"


def _named(group: str, statements: Sequence[str]) -> str:
    body = statements[0] if len(statements) == 1 else f"(and {' '.join(statements)})" if statements else "true"
    return f"(assert (! {body} :named {group}))"
