"""Which residue classes mod 2^m can hold the least element of a cycle.

Written from the least element n, every prefix of i steps with j odd ones satisfies q^j·n + d·β_i ≥ 2^i·n, and the first
m steps depend only on n mod 2^m (Terras, Acta Arith. 30 (1976) 241-252).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from solverkit.exact.windows import Room, Windows, in_order
from solverkit.numerals import Span

if TYPE_CHECKING:
    from solverkit.maps import Map

__all__ = ["PrefixTree", "drop_threshold", "prefix_tree", "survivor_count", "survivors"]


def survivors(map_: Map, depth: int) -> list[int]:
    """Return the classes r mod 2^depth with q^j > 2^i on every prefix of i ≤ depth steps, ascending.

    These are the classes that hold arbitrarily large n which do not drop below themselves within ``depth`` steps.

    >>> from solverkit.maps import Map
    >>> survivors(Map(3, 1), 5)
    [7, 15, 27, 31]
    """
    nodes = [(0, 0, 1)]  # residue, image T^i of it, q^j
    for i in range(depth):
        following = []
        for residue, value, slope in nodes:
            for r, v in ((residue, value), (residue + (1 << i), value + slope)):
                grown = slope * map_.multiplier if v & 1 else slope
                if grown > 1 << (i + 1):
                    following.append((r, map_.step(v), grown))
        nodes = following
    return sorted(residue for residue, _, _ in nodes)


def survivor_count(multiplier: int, depth: int) -> int:
    """Return the number of `survivors` mod 2^depth, by counting words; it does not depend on d.

    Source for q = 3: OEIS A076227.

    >>> [survivor_count(3, m) for m in range(9)]
    [1, 1, 1, 2, 3, 4, 8, 13, 19]
    """
    counts = {0: 1}
    for i in range(1, depth + 1):
        following: dict[int, int] = {}
        for j, count in counts.items():
            for grown in (j, j + 1):
                if multiplier**grown > 1 << i:
                    following[grown] = following.get(grown, 0) + count
        counts = following
    return sum(counts.values())


def drop_threshold(map_: Map, depth: int) -> int:
    """Return N0: every n > N0 outside `survivors` drops below itself within ``depth`` steps, or becomes ≤ 0.

    For d < 0 the classes outside drop always, and N0 is 0. For d > 0 a class whose first failing prefix has i steps,
    j odd, drops when n > d·β_i/(2^i − q^j); the largest such quotient over all failing prefixes is returned, with the
    largest β_i for each (i, j).
    """
    if map_.offset < 0:
        return 0
    q, threshold = map_.multiplier, 0
    most = {0: 0}  # odd count -> largest β over the surviving prefixes
    for i in range(1, depth + 1):
        following: dict[int, int] = {}
        for j, beta in most.items():
            for grown, value in ((j, beta), (j + 1, q * beta + (1 << (i - 1)))):
                gap = (1 << i) - int(q**grown)
                if gap > 0:
                    threshold = max(threshold, map_.offset * value // gap)
                else:
                    following[grown] = max(following.get(grown, 0), value)
        most = following
    return threshold


@dataclass(frozen=True, slots=True)
class PrefixTree:
    """The least-element sieve of one cell, exact on the interval B < n ≤ U'.

    Args:
        dead: (i, r): no least element is ≡ r mod 2^i; minimal, so no class contains another.
        live: (i, r, range): classes left at the last depth, with the range of the least elements in them.
    """

    dead: tuple[tuple[int, int], ...]
    live: tuple[tuple[int, int, Span], ...]


def prefix_tree(windows: Windows, depth: int, most_leaves: int = 1 << 16) -> PrefixTree:
    """Return the classes mod 2^depth that the windows of a cell rule out as least elements, and those they leave.

    Args:
        windows: of the cell; when empty, the class 0 mod 1 is dead.
        depth: m ≥ 0; more than the cell's length is the same as the length.
        most_leaves: the tree stops growing before a level has more classes than this.

    Each node knows its prefix exactly, so the range of γ that `Windows` has for its state gives the exact range of the
    least elements in it; a node is dead when that range holds no member of the class.
    """
    if windows.empty:
        return PrefixTree(((0, 0),), ())
    cell = windows.cell
    root = windows.rooms[0, 0]
    dead: list[tuple[int, int]] = []
    # residue, odd count, β, image of the residue, range of n
    nodes = [(0, 0, 0, 0, root.least)]
    steps = 0
    while steps < min(depth, cell.length) and len(nodes) * 2 <= most_leaves:
        following = []
        for residue, j, beta, value, span in nodes:
            for r, v in ((residue, value), (residue + (1 << steps), value + cell.multiplier**j)):
                odd = v & 1
                grown = cell.multiplier * beta + (1 << steps) if odd else beta
                room = windows.rooms.get((steps + 1, j + odd))
                left = None if room is None else _members(windows, room, steps + 1, j + odd, grown, r, span)
                if left is None:
                    dead.append((steps + 1, r))
                else:
                    following.append((r, j + odd, grown, cell.map.step(v), left))
        nodes = following
        steps += 1
    return PrefixTree(tuple(dead), tuple((steps, r, span) for r, _, _, _, span in sorted(nodes)))


def _members(windows: Windows, room: Room, i: int, j: int, beta: int, residue: int, span: Span) -> Span | None:
    """Return the range from the least to the largest n ≡ residue mod 2^i that the prefix leaves, or None."""
    cell = windows.cell
    size, gap = abs(cell.offset), abs(cell.determinant)
    head = cell.multiplier ** (cell.odd - j) * beta
    low = max(span.low, room.least.low, -(-size * (head + (room.gamma.low << i)) // gap))
    high = min(span.high, room.least.high, size * (head + (room.gamma.high << i)) // gap)
    strictly = int(0 < i < cell.length) << i
    ordered = in_order(cell.multiplier**j, cell.offset * beta, 1 << i, low, high, strictly)
    if ordered is None:
        return None
    first = ordered.low + (residue - ordered.low) % (1 << i)
    last = ordered.high - (ordered.high - residue) % (1 << i)
    return Span(first, last) if first <= last else None
