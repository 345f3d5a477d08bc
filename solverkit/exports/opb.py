"""Pseudo-Boolean OPB, from clauses or from linear inequalities of bounded integers.

A clause is one constraint, "the sum of its literals is at least 1", with 1 − x in place of a negated x. An integer
variable becomes its lower bound and bits, least significant first; a constraint says when the bits may not exceed the
upper bound, and each row becomes one equation or up to two inequalities. Comments begin with ``*`` and say what
`solverkit.exports.dimacs` says, with constraints in place of clauses; the first is the header that the format wants.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from solverkit.exports.comments import heading, plain, variable_notes

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence

    from cycle_encodings._formula import Encoding

__all__ = ["expanded", "inequality_lines", "opb_lines"]


def opb_lines(encoding: Encoding, name: str) -> Iterator[str]:
    """Yield the lines of a file with one constraint for each clause.

    Args:
        encoding: the formula.
        name: of the encoder.
    """
    yield f"* #variable= {max(1, encoding.variables)} #constraint= {len(encoding.clauses)}"
    for note in heading(encoding.cell, name, encoding.digest()):
        yield f"* {note}"
    for note in variable_notes(encoding):
        yield f"* {note}"
    for clause in encoding.clauses:
        literals = set(clause)
        weights = {abs(literal): 0 for literal in sorted(literals, key=abs)}
        for literal in literals:
            weights[abs(literal)] += 1 if literal > 0 else -1
        yield _constraint(weights, ">=", 1 - sum(literal < 0 for literal in literals))


def _constraint(weights: Mapping[int, int], sense: str, bound: int) -> str:
    """Return one line; a constraint without a variable gets one of weight 0, as the format has no empty sum."""
    terms = {variable: weight for variable, weight in weights.items() if weight} or {1: 0}
    return " ".join(f"{weight:+d} x{variable}" for variable, weight in terms.items()) + f" {sense} {bound} ;"


def inequality_lines(model: Any, name: str) -> Iterator[str]:  # noqa: ANN401 - any model of bounded integers and rows
    """Yield the lines of a file for a linear model.

    Args:
        model: with ``cell``, ``sizes()``, ``digest()``, ``variables`` (each with name, low, high), ``rows`` (each with
            terms of variable index and weight, and low, high, one of which may be None) and ``least``, the index of
            n0.
        name: of the encoder.
    """
    variables = [(str(each.name), int(each.low), int(each.high)) for each in model.variables]
    rows = [(tuple(row.terms), row.low, row.high) for row in model.rows]
    bits, constraints = expanded([(low, high) for _, low, high in variables], rows)
    yield f"* #variable= {max(1, sum(map(len, bits)))} #constraint= {len(constraints)}"
    for note in heading(model.cell, name, model.digest()):
        yield f"* {note}"
    yield f"* least {' '.join(map(str, bits[model.least]))}"
    yield f"* offset {variables[model.least][1]} (to be added to the number that these bits write)"
    for (text, low, _), places in zip(variables, bits, strict=True):
        yield " ".join([f"* integer {plain(text)} = {low} +", *(f"{1 << i}*x{bit}" for i, bit in enumerate(places))])
    yield from constraints


def expanded(
    bounds: Sequence[tuple[int, int]], rows: Iterable[tuple[Sequence[tuple[int, int]], int | None, int | None]]
) -> tuple[list[range], list[str]]:
    """Return the bits of each integer variable and the constraints of a linear model.

    Args:
        bounds: least and largest value of each variable, in order.
        rows: terms (variable from 0, weight), least and largest value of the sum; None for no bound.
    """
    bits: list[range] = []
    following = 1
    for low, high in bounds:
        bits.append(range(following, following := following + max(0, high - low).bit_length()))
    constraints = []
    for (low, high), places in zip(bounds, bits, strict=True):
        if high - low != (1 << len(places)) - 1:
            downwards = {bit: -(1 << place) for place, bit in enumerate(places)}
            constraints.append(_constraint(downwards, ">=", low - high))
    for terms, least, most in rows:
        weights: dict[int, int] = {}
        shift = 0
        for index, weight in terms:
            shift += weight * bounds[index][0]
            for place, bit in enumerate(bits[index]):
                weights[bit] = weights.get(bit, 0) + (weight << place)
        if least is not None and least == most:
            constraints.append(_constraint(weights, "=", least - shift))
            continue
        if least is not None:
            constraints.append(_constraint(weights, ">=", least - shift))
        if most is not None:
            constraints.append(_constraint({bit: -weight for bit, weight in weights.items()}, ">=", shift - most))
    return bits, constraints
