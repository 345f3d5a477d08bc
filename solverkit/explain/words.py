"""An explanation in sentences that claim what was established and nothing else."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from solverkit.exact.bounds import balanced_bound
from solverkit.explain.arithmetic import number
from solverkit.findings import Verdict

if TYPE_CHECKING:
    from collections.abc import Sequence

    from solverkit.explain.explanation import Explained, Explanation
    from solverkit.findings import Cycle
    from solverkit.window import Cell

__all__ = ["sentences"]

_CYCLES_SHOWN = 20


def sentences(explanation: Explanation) -> list[str]:
    """Return the explanation in words, one sentence each, without a full stop."""
    lines = []
    if explanation.exclusion is not None:
        lines.append(f"no cycle, by arithmetic alone: {explanation.exclusion.text}")
    if explanation.status is Verdict.OPEN:
        lines.append("open: neither a cycle nor a refutation was found")
    if explanation.status is Verdict.NONE and not explanation.cores and explanation.exclusion is None:
        lines.append("no cycle: all the conditions together exclude it; no minimal core was found in time")
    for explained in explanation.cores:
        lines += _core(explanation, explained)
    if explanation.cycles:
        lines += _found(explanation)
    if not explanation.complete:
        lines.append(f"incomplete: {explanation.reason}")
    return lines


def _condition(cell: Cell, group: str) -> str:
    if group == "lower bound":
        return f"the lower bound B = {number(cell.above)}" if cell.above else "that the elements are positive"
    return {
        "step": "the map",
        "closing": "the closing condition",
        "odd count": f"the odd count {cell.odd}",
        "order": "the order (least element first)",
        "upper bound": f"the upper bound U' = {number(balanced_bound(cell))}",
    }[group]


def _joined(parts: Sequence[str]) -> str:
    return parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} and {parts[-1]}"


def _core(explanation: Explanation, explained: Explained) -> list[str]:
    cell, groups = explanation.cell, explained.core.groups
    reach = explained.reach
    # A core that needs n > 0 only must not boast of the bound.
    positive = "lower bound" in groups and (cell.above == 0 or (reach is not None and reach.above == 0))
    shown = replace(cell, above=0) if positive else cell
    named = [_condition(shown, group) for group in groups if group != "step"]
    text = f"no cycle: {_joined(named)} alone exclude{'s' if len(named) == 1 else ''} it"
    if "step" not in groups:
        text += ", whatever the map"
    scope = "" if explained.every_number else f" for every n below 2^{explanation.width}, which is as far as was looked"
    text += scope
    idle = [
        _condition(cell, group)
        for group in ("odd count", "order", "closing", "lower bound", "upper bound")
        # That a positive element is at least 1 is no achievement.
        if (group not in groups or (group == "lower bound" and positive)) and (group != "lower bound" or cell.above)
    ]
    if idle:
        text += f"; {_joined(idle)} {'was' if len(idle) == 1 else 'were'} not needed"
    lines = [text]
    if reach is None:
        return lines
    if "lower bound" in groups and not positive:
        least = f"B = {number(reach.above)}"
        lines.append(f"the same conditions exclude it for every bound from {least} on{scope}")
    if "upper bound" in groups and reach.up_to is not None:
        start = f" above {number(shown.above)}" if "lower bound" in groups else ""
        lines.append(f"the same conditions exclude every n{start} up to {number(reach.up_to)}")
    return lines


def _found(explanation: Explanation) -> list[str]:
    cell, cycles = explanation.cell, explanation.cycles
    count = f"{len(cycles)} cycle{'s' if len(cycles) > 1 else ''}"
    listed = explanation.complete or bool(explanation.relaxations)
    lines = [f"{'' if listed else 'at least '}{count}: {'; '.join(_told(c) for c in cycles[:_CYCLES_SHOWN])}"]
    if len(cycles) > _CYCLES_SHOWN:
        lines[0] += f"; and {len(cycles) - _CYCLES_SHOWN} more"
    if listed:
        lines.append(f"the cell is empty for every bound from B = {number(cycles[-1].least)} on")
    for relaxation in explanation.relaxations:
        name = _condition(cell, relaxation.group)
        if relaxation.least is not None:
            lines.append(f"without {name}, n = {number(relaxation.least)} would be admitted as well")
        else:
            lines.append(f"without {name}, no other n below 2^{explanation.width} would be admitted")
    return lines


def _told(cycle: Cycle) -> str:
    word = cycle.word if len(cycle.word) <= 64 else f"{cycle.word[:40]}…{cycle.word[-8:]}"
    circuits = f"{cycle.circuits} circuit{'s' if cycle.circuits > 1 else ''}"
    return f"n = {number(cycle.least)}, word {word}, gcd {number(cycle.gcd)}, {circuits}"
