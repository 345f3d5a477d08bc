"""The least-element sieve mod 2^m in a formula: dead classes, guarded bounds, and the jump over the first m steps."""

from __future__ import annotations

from typing import TYPE_CHECKING

from cycle_encodings._orbit_draft import member_literals
from cycle_encodings._sizes import most_classes
from solverkit.residues.graph import pruned, transition_graph
from solverkit.residues.sieve import PrefixTree, prefix_tree

if TYPE_CHECKING:
    from collections.abc import Container, Sequence

    from cycle_encodings._orbit_draft import OrbitDraft
    from solverkit.exact.windows import Windows
    from solverkit.numerals import Span

__all__ = ["class_tree", "exclude_classes", "exclude_residues", "jump", "walked"]


def class_tree(windows: Windows, depth: int, spare: int, leaves: int = 1 << 16) -> PrefixTree:
    """Return the sieve of a cell, capped ``spare`` bits below the width of U'; deeper is enumeration in disguise.

    The bounds of a class take as many literals as the square of the bits above it, so wide cells get fewer classes.
    """
    bits = windows.elements(0).high.bit_length()
    return prefix_tree(windows, max(0, min(depth, bits - spare)), min(leaves, most_classes(bits)))


def exclude_classes(draft: OrbitDraft, tree: PrefixTree) -> None:
    """State which classes hold no least element, and the exact bounds of the least elements in the others."""
    builder, least = draft.builder, draft.elements[0]
    builder.group("residues")
    for steps, residue in tree.dead:
        builder.add(*(-literal for literal in member_literals(least, steps, residue)))
    for steps, residue, span in tree.live:
        _bound_class(draft, member_literals(least, steps, residue), steps, residue, span)


def _bound_class(draft: OrbitDraft, member: Sequence[int], steps: int, residue: int, span: Span) -> None:
    """State that the literals of ``member`` together imply the exact bounds of the high bits of n_0."""
    builder, high, outer = draft.builder, draft.elements[0][steps:], draft.spans[0]
    unless = [-literal for literal in member]
    low, top = (span.low - residue) >> steps, (span.high - residue) >> steps
    if top < outer.high >> steps:
        builder.at_most(high, top, unless)
    if low > outer.low >> steps:
        builder.at_least(high, low, unless)


def walked(windows: Windows, depth: int) -> frozenset[int]:
    """Return the residues mod 2^depth that elements can have.

    They are the vertices of the residue transition graph, pruned to the closed walks of length k with x odd steps from
    a residue that the sieve leaves for the least element.
    """
    cell, tree = windows.cell, prefix_tree(windows, depth)
    steps = tree.live[0][0] if tree.live else 0
    left = {residue for _, residue, _ in tree.live}
    starts = {r for r in range(1 << depth) if r % (1 << steps) in left}
    return frozenset(pruned(transition_graph(cell.map, depth), cell.length, cell.odd, starts))


def exclude_residues(draft: OrbitDraft, depth: int, allowed: Container[int]) -> None:
    """State that no element has a residue mod 2^depth outside ``allowed``, by clauses on the lowest bits."""
    draft.builder.group("residues")
    for i in draft.positions[:-1]:
        padded = [*draft.elements[i], *[-draft.builder.true] * depth]
        for residue in range(1 << depth):
            if residue not in allowed:
                draft.builder.add(*(-literal for literal in member_literals(padded, depth, residue)))


def jump(draft: OrbitDraft, tree: PrefixTree) -> tuple[int, ...]:
    """State n_0 = 2^m·u + r and n_m = q^j·u + T^m(r) for the live class r of n_0, instead of the first m steps.

    A literal for each node of the tree says that n_0 lies in the class; its parent and the bit decide it. The literal
    of a leaf gives r, the state (m, j), the exact bounds of u, and T^m(r); u·q^j is one addition for each bit of u,
    with the bits of q^j chosen by the state (Terras, Acta Arith. 30 (1976) 241-252).

    Args:
        draft: whose second element comes after as many steps as the tree is deep, after `OrbitDraft.count_odd`.
        tree: of its windows, with live classes.

    Returns:
        The literals of the leaves, of which exactly one holds.
    """
    builder, steps, map_ = draft.builder, draft.positions[1], draft.cell.map
    leaves = _nodes(draft, tree)
    orbits = {residue: map_.orbit(residue, steps) for residue in leaves}
    odd = {residue: sum(value & 1 for value in orbit[:-1]) for residue, orbit in orbits.items()}
    slopes = {j: map_.multiplier**j for j in sorted(set(odd.values()))}
    high, image = draft.elements[0][steps:], draft.elements[steps]
    reach = (max(slopes.values()) << len(high)) + max(abs(orbit[-1]) for orbit in orbits.values())
    width = max(reach, 1 << len(image)).bit_length() + 1
    total = [builder.variable() for _ in range(width)]
    for residue, leaf in leaves.items():
        builder.add(-leaf, draft.states[steps, odd[residue]])
        for place, bit in enumerate(total):
            builder.add(-leaf, bit if orbits[residue][-1] >> place & 1 else -bit)
    for j in slopes:
        builder.add(-draft.states[steps, j], *(leaf for residue, leaf in leaves.items() if odd[residue] == j))
    slope = _chosen(draft, slopes)
    for place, bit in enumerate(high):
        addend = [-builder.true] * place + [builder.both(bit, one) for one in slope]
        total = builder.add_numbers(total, addend, -builder.true, width)
    builder.equal_numbers(total, image)
    return tuple(leaves.values())


def _nodes(draft: OrbitDraft, tree: PrefixTree) -> dict[int, int]:
    """State the nodes of the tree and the bounds of its leaves; return residue -> literal of the leaf."""
    builder, steps, least = draft.builder, draft.positions[1], draft.elements[0]
    builder.group("residues")
    nodes = {0: builder.true}
    for i in range(steps):
        size, bit = 1 << i, least[i]
        following: dict[int, int] = {}
        for residue in sorted({r % (2 * size) for _, r, _ in tree.live}):
            following[residue] = builder.variable(f"n[0]={residue} mod {2 * size}")
        for residue, node in nodes.items():
            clear, set_ = (following.get(r, -builder.true) for r in (residue, residue + size))
            builder.add(-node, bit, clear)
            builder.add(-node, -bit, set_)
            builder.add(-node, clear, set_)
            for child, literal in ((clear, -bit), (set_, bit)):
                builder.add(-child, node)
                builder.add(-child, literal)
        nodes = following
    for _, residue, span in tree.live:
        _bound_class(draft, [nodes[residue]], steps, residue, span)
    return nodes


def _chosen(draft: OrbitDraft, slopes: dict[int, int]) -> list[int]:
    """Return the bits of q^j for the state (m, j) that holds."""
    builder, chosen = draft.builder, []
    for place in range(max(slopes.values()).bit_length()):
        ones = [draft.states[draft.positions[1], j] for j, slope in slopes.items() if slope >> place & 1]
        if len(ones) in (0, len(slopes)):
            chosen.append(builder.true if ones else -builder.true)
            continue
        bit = builder.variable()
        for j in slopes:
            state = draft.states[draft.positions[1], j]
            builder.add(-state, bit if state in ones else -bit)
        chosen.append(bit)
    return chosen
