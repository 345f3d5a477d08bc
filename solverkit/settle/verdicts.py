"""From complete lists of several methods to verdicts on the cells of the window."""

from __future__ import annotations

from collections import defaultdict
from typing import TYPE_CHECKING, TypeVar

from solverkit.findings import CellFinding, Cycle, Evidence, Verdict
from solverkit.methods import LIST_AT_MOST
from solverkit.settle.choice import method_named

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from solverkit.methods import Listing
    from solverkit.settle.triage import LiveCell
    from solverkit.window import Cell, Window

__all__ = ["conclude", "lists_by_cell"]

_Key = tuple[int, int, int, int]
_Item = TypeVar("_Item")
_SAMPLE = 20


def _key(cell: Cell) -> _Key:
    return (cell.multiplier, cell.offset, cell.length, cell.odd)


def lists_by_cell(listings: Sequence[Listing]) -> dict[_Key, list[Listing]]:
    """Return (q, d, k, x) of reduced cells -> their lists, in the order given."""
    grouped: dict[_Key, list[Listing]] = defaultdict(list)
    for listing in listings:
        grouped[_key(listing.cell)].append(listing)
    return grouped


def conclude(
    window: Window,
    live: LiveCell,
    lists: Mapping[_Key, list[Listing]],
    refused: Mapping[_Key, str],
    list_at_most: int = LIST_AT_MOST,
) -> CellFinding:
    """Return the finding on one live cell.

    Lists of the reduced cell with a bound at or below the cell's own count; what they hold above that bound is
    multiplied back and checked by iteration. A cell with more than ``list_at_most`` cycles reports their exact
    number and a sample, spread over the list. Methods that contradict each other leave the cell open, with the
    cycles of all of them.
    """
    small = live.reduction.cell
    usable = [entry for entry in lists.get(_key(small), ()) if entry.cell.above <= small.above]
    complete = [
        entry for entry in usable if entry.complete and (entry.total is None or entry.cell.above == small.above)
    ]
    known = sorted({n for entry in usable for n in entry.least if n > small.above})
    number = len(known)
    filtered = window.primitive or window.shape is not None
    if number > list_at_most and not filtered:
        known = _spread(known)
    cycles = tuple(
        cycle for cycle in sorted((_cycle(live, n) for n in known), key=Cycle.sort_key) if _wanted(window, cycle)
    )
    seconds = sum(entry.seconds for entry in usable)
    names = tuple(sorted({entry.method for entry in complete}))
    if not complete:
        reason = "; ".join(f"{entry.method}: {entry.reason}" for entry in usable) or refused.get(
            _key(small), "not yet run"
        )
        return CellFinding(live.cell, Verdict.OPEN, cycles, seconds=seconds, reason=reason)
    listed = {_above(entry, small) for entry in complete if entry.total is None}
    counts = {entry.total for entry in complete if entry.total is not None} | {len(least) for least in listed}
    # Also a cycle that an incomplete list has and a complete one lacks is a contradiction.
    if len(listed) > 1 or len(counts) > 1 or (listed and counts != {number}):
        reason = "; ".join(_told(entry, small) for entry in usable)
        return CellFinding(
            live.cell, Verdict.OPEN, cycles, methods=names, seconds=seconds, reason=reason, contradiction=True
        )
    families = {method_named(name).family for name in names}
    evidence = Evidence.CONFIRMED if len(families) > 1 else Evidence.COMPUTED
    (count,) = counts
    total = None if count == len(known) else count
    if total is not None and not listed and filtered:
        reason = f"{total} cycles were counted, not listed, so conditions on them can't be checked"
        return CellFinding(live.cell, Verdict.OPEN, cycles, seconds=seconds, reason=reason)
    if filtered:
        total = len(cycles) if len(cycles) > list_at_most else None
        cycles = tuple(_spread(cycles)) if total is not None else cycles
    verdict = Verdict.FOUND if cycles else Verdict.NONE
    return CellFinding(live.cell, verdict, cycles, evidence, names, seconds, total=total)


def _spread(items: Sequence[_Item]) -> list[_Item]:
    """Return a sample that is spread evenly over ``items``, both ends included."""
    return [items[i * (len(items) - 1) // (_SAMPLE - 1)] for i in range(_SAMPLE)]


def _above(entry: Listing, small: Cell) -> tuple[int, ...]:
    return tuple(n for n in entry.least if n > small.above)


def _told(entry: Listing, small: Cell) -> str:
    if entry.total is not None:
        return f"{entry.method} counts {entry.total}"
    least = _above(entry, small)
    return f"{entry.method} lists {len(least)}: {', '.join(map(str, least[:5]))}{' …' if len(least) > 5 else ''}"


def _cycle(live: LiveCell, least: int) -> Cycle:
    cell = live.cell
    return Cycle(cell.multiplier, cell.offset, live.reduction.factor * least, cell.length)


def _wanted(window: Window, cycle: Cycle) -> bool:
    if window.primitive and not cycle.is_primitive:
        return False
    return window.shape is None or window.shape.holds(cycle)
