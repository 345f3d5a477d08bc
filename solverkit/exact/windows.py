"""Exact ranges of the odd count and of the elements at every step of the cycles of a cell.

After i steps from the least element n_0, with j of them odd, n_i = (q^j·n_0 + d·β_i)/2^i; closing the cycle takes the
remaining steps, 2^(k−i)·n_0 = q^(x−j)·n_i + d·γ_i. Both n_0 and n_i are then fixed by β_i and γ_i:

    n_0 = (d/D)·(q^(x−j)·β_i + 2^i·γ_i),    n_i = (d/D)·(q^j·γ_i + 2^(k−i)·β_i).

Dynamic programming over the states (i, j) gives the least and the largest β_i and γ_i over the words that stay on
admissible states; a state that leaves no room for B < n_0 ≤ U', n_0 < n_i is dropped, which narrows the ranges of
the others, until nothing changes. Source of the two identities: Böhm & Sontacchi (1978).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from solverkit.exact.bounds import balanced_bound
from solverkit.numerals import Span

if TYPE_CHECKING:
    from collections.abc import Mapping

    from solverkit.window import Cell

__all__ = ["Room", "Windows", "element_windows", "in_order"]

State = tuple[int, int]


@dataclass(frozen=True, slots=True)
class Room:
    """What one state (i, j) leaves open.

    Args:
        least: range of the least element n_0.
        element: range of the element n_i.
        beta: range of β_i over the admissible prefixes.
        gamma: range of γ_i over the admissible suffixes.
    """

    least: Span
    element: Span
    beta: Span
    gamma: Span


@dataclass(frozen=True, slots=True)
class Windows:
    """The admissible states of a cell of positive elements, to a fixpoint; no state when the cell is empty.

    Args:
        cell: the cell.
        bound: upper bound of the least element that was used.
        rooms: (i, j) -> Room, for 0 ≤ i ≤ k.
    """

    cell: Cell
    bound: int
    rooms: Mapping[State, Room]

    @property
    def empty(self) -> bool:
        """Whether no cycle is left, which the ranges alone have then established."""
        return not self.rooms

    def odd_counts(self, step: int) -> tuple[int, ...]:
        """Return the odd counts that the first ``step`` steps may have, ascending."""
        return tuple(j for j in range(min(step, self.cell.odd) + 1) if (step, j) in self.rooms)

    def elements(self, step: int) -> Span:
        """Return the range of the element after ``step`` steps.

        Raises:
            ValueError: the windows are empty.
        """
        rooms = [self.rooms[step, j] for j in self.odd_counts(step)]
        return Span(min(r.element.low for r in rooms), max(r.element.high for r in rooms))


def in_order(slope: int, shift: int, denominator: int, low: int, high: int, least: int = 0) -> Span | None:
    """Return the n in low … high with slope·n + shift ≥ denominator·n + least, an interval, or None when empty.

    This is the prefix condition: T^i(n) ≥ n for (slope, shift, denominator) = (q^j, d·β_i, 2^i).
    """
    gain = slope - denominator
    if gain > 0:
        low = max(low, -((shift - least) // gain))
    elif gain < 0:
        high = min(high, (shift - least) // -gain)
    elif shift < least:
        return None
    return Span(low, high) if low <= high else None


def element_windows(cell: Cell, bound: int | None = None, rounds: int = 30) -> Windows:
    """Return the exact windows of ``cell``.

    Args:
        cell: of positive elements, length at most 20,000; not necessarily reduced.
        bound: upper bound of the least element; the balanced bound when None.
        rounds: at most so many rounds; the result is sound after each.

    Costs about k·w big-integer operations a round, w the number of odd counts admissible at one step.
    """
    q, d, k, x = cell.multiplier, cell.offset, cell.length, cell.odd
    top = balanced_bound(cell) if bound is None else bound
    empty = Windows(cell, top, {})
    if (cell.determinant > 0) != (d > 0) or top <= cell.above:
        return empty
    power = [1]
    for _ in range(x):
        power.append(power[-1] * q)
    size, gap = abs(d), abs(cell.determinant)
    allowed: set[State] | None = None
    for _ in range(rounds):
        prefix = _prefixes(cell, top, power, allowed)
        suffix = _suffixes(cell, power, prefix)
        rooms: dict[State, Room] = {}
        for (i, j), (gamma_low, gamma_high) in suffix.items():
            beta_low, beta_high = prefix[i, j]
            left, right = power[x - j], power[j]
            least_low = max(cell.above + 1, -(-size * (left * beta_low + (gamma_low << i)) // gap))
            least_high = min(top, size * (left * beta_high + (gamma_high << i)) // gap)
            low = -(-size * (right * gamma_low + (beta_low << (k - i))) // gap)
            high = size * (right * gamma_high + (beta_high << (k - i))) // gap
            strictly = 0 < i < k
            low = max(low, least_low + strictly)
            least_high = min(least_high, high - strictly)
            if not strictly:
                least_low, least_high = max(least_low, low), min(least_high, high)
                low, high = least_low, least_high
            shift = d * (beta_high if d > 0 else beta_low)
            ordered = in_order(right, shift, 1 << i, least_low, least_high, strictly << i)
            if ordered is None or low > high:
                continue
            # The same from the other end: n_0 = (q^(x−j)·n_i + d·γ_i)/2^(k−i) < n_i.
            back = in_order(
                1 << (k - i), -d * (gamma_low if d > 0 else gamma_high), left, ordered.low, ordered.high, strictly
            )
            if back is None:
                continue
            rooms[i, j] = Room(back, Span(low, high), Span(beta_low, beta_high), Span(gamma_low, gamma_high))
        if len({i for i, _ in rooms}) <= k or (k, x) not in rooms:
            return empty
        if allowed is not None and len(rooms) == len(allowed):
            return Windows(cell, top, rooms)
        allowed = set(rooms)
    return Windows(cell, top, rooms)


def _prefixes(cell: Cell, top: int, power: list[int], allowed: set[State] | None) -> dict[State, tuple[int, int]]:
    """Return (i, j) -> least and largest β_i over the prefixes on admissible states, forwards."""
    q, d, k, x = cell.multiplier, cell.offset, cell.length, cell.odd
    reach: dict[State, tuple[int, int]] = {(0, 0): (0, 0)}
    layer = {0: (0, 0)}
    for i in range(1, k + 1):
        following: dict[int, tuple[int, int]] = {}
        for j, (low, high) in layer.items():
            following[j] = _hull(following.get(j), (low, high))
            if j < x:
                bit = 1 << (i - 1)
                following[j + 1] = _hull(following.get(j + 1), (q * low + bit, q * high + bit))
        layer = {}
        for j, ends in following.items():
            if x - j > k - i or (allowed is not None and (i, j) not in allowed):
                continue
            shift = d * (ends[1] if d > 0 else ends[0])
            if in_order(power[j], shift, 1 << i, cell.above + 1, top) is not None:
                layer[j] = reach[i, j] = ends
    return reach


def _suffixes(cell: Cell, power: list[int], prefix: dict[State, tuple[int, int]]) -> dict[State, tuple[int, int]]:
    """Return (i, j) -> least and largest γ_i over the suffixes on admissible states, backwards."""
    k, x = cell.length, cell.odd
    reach: dict[State, tuple[int, int]] = {}
    if (k, x) not in prefix:
        return reach
    reach[k, x] = (0, 0)
    layer = {x: (0, 0)}
    for i in range(k - 1, -1, -1):
        before: dict[int, tuple[int, int]] = {}
        for j, (low, high) in layer.items():
            if (i, j) in prefix:
                before[j] = _hull(before.get(j), (2 * low, 2 * high))
            if (i, j - 1) in prefix:
                first = power[x - j]
                before[j - 1] = _hull(before.get(j - 1), (first + 2 * low, first + 2 * high))
        layer = before
        reach.update(((i, j), ends) for j, ends in layer.items())
    return reach


def _hull(one: tuple[int, int] | None, two: tuple[int, int]) -> tuple[int, int]:
    return two if one is None else (min(one[0], two[0]), max(one[1], two[1]))
