"""The orbit as linear inequalities, for integer programs and pseudo-Boolean solvers.

Step i has the element n_i within its exact window, its half h_i, its parity b_i and a gain z_i:

    n_i = 2·h_i + b_i,    n_{i+1} = h_i + z_i,    z_i = b_i·((q − 1)·h_i + (q + d)/2),    indices mod k.

The product of b_i with a bounded sum s is four rows (McCormick, Math. Programming 10 (1976) 147-175), tight because b_i
is 0 or 1: z between b·min s and b·max s, and s − z between (1 − b)·min s and (1 − b)·max s, the extremes taken over the
window of h_i. n_i > n_0 for 0 < i < k gives leastness, and excludes repeated words. The odd counts of prefixes are
bounded by what the windows leave.

Size: 4·k variables and 8·k − 1 rows, k − 1 rows less without counts; for a cell whose windows are empty, 1 and 1.

The relaxation is weak, and floating point proves nothing: good for U' up to some thousands with the pseudo-Boolean
solver Exact, at k of about 30 (2 s on (3, 419, 28, 17), over 5 s on (7, −7857, 40, 16)), and for less with SCIP and
HiGHS. It is there as another kind of arithmetic, not for speed.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from cycle_encodings._formula import Form
from cycle_encodings._linear_model import LinearDraft, LinearModel
from solverkit.errors import InputError
from solverkit.exact.bounds import balanced_bound
from solverkit.exact.windows import Windows, element_windows

if TYPE_CHECKING:
    from solverkit.window import Cell

__all__ = ["ENCODING", "Inequalities"]


@dataclass(frozen=True, slots=True)
class Inequalities:
    """The orbit as linear inequalities.

    Args:
        counts: whether prefixes have their least and largest odd count.
    """

    counts: bool = True
    name: str = "inequalities"
    form: Form = Form.INEQUALITIES
    summary: str = "rows for integer programs and pseudo-Boolean solvers: the orbit with products made linear"

    def size(self, cell: Cell) -> int:
        """Return a rough number of rows; a long prefix counts for its length, a weight for its words of 64 bits."""
        words = 1 + balanced_bound(cell).bit_length() // 64
        return (8 * cell.length + cell.length**2 // 20) * words

    def encode(self, cell: Cell) -> LinearModel:
        """Return the model of a cell of positive elements.

        Raises:
            InputError: the cell asks for negative elements.
        """
        if cell.sign != 1:
            raise InputError("cell", cell.sign.word, "a cell of positive elements; reflect it first")
        windows, draft = element_windows(cell), LinearDraft(cell)
        if windows.empty:
            least = draft.integer(0, 0, "n[0]")
            draft.group("ranges")
            draft.row([(least, 1)], 1, None)
            return draft.finished(least)
        elements, odd = _orbit(draft, windows)
        draft.group("order")
        for element in elements[1:]:
            draft.row([(element, 1), (elements[0], -1)], 1, None)
        draft.group("odd count")
        draft.row([(parity, 1) for parity in odd], cell.odd, cell.odd)
        if self.counts:
            for i in range(1, cell.length):
                counts = windows.odd_counts(i)
                draft.row([(parity, 1) for parity in odd[:i]], counts[0], counts[-1])
        return draft.finished(elements[0])


def _orbit(draft: LinearDraft, windows: Windows) -> tuple[list[int], list[int]]:
    """State the map, and the closing by giving n_k the variable of n_0; return the n_i and the b_i."""
    cell = windows.cell
    factor, constant = cell.multiplier - 1, (cell.multiplier + cell.offset) // 2
    spans = [windows.elements(i) for i in range(cell.length)]
    elements = [draft.integer(span.low, span.high, f"n[{i}]") for i, span in enumerate(spans)]
    odd = [draft.integer(0, 1, f"odd[{i}]") for i in range(cell.length)]
    draft.group("step")
    for i, span in enumerate(spans):
        half = draft.integer(span.low // 2, span.high // 2, f"half[{i}]")
        low, high = factor * (span.low // 2) + constant, factor * (span.high // 2) + constant
        gain = draft.integer(min(0, low), max(0, high), f"gain[{i}]")
        draft.row([(elements[i], 1), (half, -2), (odd[i], -1)], 0, 0)
        draft.row([(elements[(i + 1) % cell.length], 1), (half, -1), (gain, -1)], 0, 0)
        draft.row([(gain, 1), (odd[i], -low)], 0, None)
        draft.row([(gain, 1), (odd[i], -high)], None, 0)
        draft.row([(half, factor), (gain, -1), (odd[i], low)], low - constant, None)
        draft.row([(half, factor), (gain, -1), (odd[i], high)], None, high - constant)
    return elements, odd


ENCODING = Inequalities()
