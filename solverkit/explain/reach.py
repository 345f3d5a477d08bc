"""How far a core reaches: for which first elements, from which bound B on, up to which number."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Collection

    from solverkit.explain.cores import Core, Oracle
    from solverkit.window import Cell

__all__ = ["Reach", "greatest", "reach_of", "smallest", "speaks_of_every_number"]


@dataclass(frozen=True, slots=True)
class Reach:
    """What the conditions of a core still prove with other bounds.

    Args:
        above: the least B with which they exclude what they exclude; 0 also when they do without a lower bound.
        up_to: the largest U for which they exclude all n_0 ≤ U, or None when they do for every number.
    """

    above: int
    up_to: int | None


def speaks_of_every_number(cell: Cell, groups: Collection[str], width: int) -> bool:
    """Tell whether a set of groups that no n_0 < 2^width meets is met by no number at all.

    Args:
        cell: of positive elements.
        groups: conditions.
        width: of the first element in the grouped encoding, so that 2^width > U*.

    The upper bound leaves nothing beyond 2^width. A number that meets step and closing lies on a cycle, whose least
    element is at most U* and meets them too, with the same odd count; it is above B when B = 0, and it is the number
    itself when the order is among the groups. Without closing, x odd steps and q^x < 2^(k−1) leave n_(k−1) > n_0 to
    n_0 < d·β/(2^(k−1) − q^x) only, with β at most 2^(k−1−x)·(q^x − 2^x)/(q − 2).
    """
    if "upper bound" in groups:
        return True
    if {"step", "closing"} <= set(groups):
        return "order" in groups or "lower bound" not in groups or cell.above == 0
    return {"step", "odd count", "order"} <= set(groups) and cell.length > 1 and _falls(cell, width)


def _falls(cell: Cell, width: int) -> bool:
    """Tell whether every n ≥ 2^width with x odd elements among its first k has T^(k−1)(n) ≤ n."""
    q, before = cell.multiplier, cell.length - 1
    for odd in (cell.odd - 1, cell.odd):
        if odd > before:
            continue
        gap = (1 << before) - int(q**odd)
        beta = (int(q**odd) - (1 << odd) << before - odd) // (q - 2)
        if gap <= 0 or max(cell.offset, 0) * beta > gap << width:
            return False
    return True


def greatest(oracle: Oracle, groups: Collection[str]) -> int | None:
    """Return the greatest n_0 < 2^w that meets the groups, or None; at most w + 1 calls of the solver."""
    return _extreme(oracle, groups, largest=True)


def smallest(oracle: Oracle, groups: Collection[str]) -> int | None:
    """Return the smallest n_0 that meets the groups, or None when none below 2^w does."""
    return _extreme(oracle, groups, largest=False)


def _extreme(oracle: Oracle, groups: Collection[str], *, largest: bool) -> int | None:
    """Fix the bits of n_0 from the top; a bit that the best number so far has as wanted needs no call."""
    found = oracle.elements(groups, within=True)
    if found is None:
        return None
    best = found[0]
    fixed: list[int] = []
    bits = oracle.encoding.least_bits
    for place in range(len(bits) - 1, -1, -1):
        wanted = bits[place] if largest else -bits[place]
        if bool(best >> place & 1) != largest:
            better = oracle.elements(groups, *fixed, wanted, within=True)
            if better is None:
                fixed.append(-wanted)
                continue
            best = better[0]
        fixed.append(wanted)
    return best


def reach_of(oracle: Oracle, core: Core) -> Reach:
    """Return the reach of a minimal core of a cell without cycles."""
    cell = oracle.encoding.cell
    width = len(oracle.encoding.least_bits)
    above, up_to = 0, None
    if "lower bound" in core.groups:
        above = greatest(oracle, [group for group in core.groups if group != "lower bound"]) or 0
    if "upper bound" in core.groups:
        beyond = smallest(oracle, [group for group in core.groups if group != "upper bound"])
        up_to = (1 << width if beyond is None else beyond) - 1
    elif not speaks_of_every_number(cell, core.groups, width):
        up_to = (1 << width) - 1
    return Reach(above, up_to)
