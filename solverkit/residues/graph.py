"""The residue transition graph mod 2^m and what lies on its closed walks of given length and odd count.

r leads to T(r) mod 2^m and to T(r) + 2^(m−1) mod 2^m, since T(n) mod 2^(m−1) depends only on n mod 2^m. The parity of
r labels both edges. Reading off the next m parities carries the graph onto the de Bruijn graph B(2, m), for every odd
q and d (Terras 1976; Lagarias, Amer. Math. Monthly 92 (1985) 3-23), so its closed walks of length k with x odd steps,
counted with their starting point, number C(k, x).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import networkx as nx

from solverkit.errors import InputError

if TYPE_CHECKING:
    from collections.abc import Container

    from solverkit.maps import Map

__all__ = ["MAX_DEPTH", "closed_walk_count", "parity_code", "pruned", "transition_graph"]

#: Largest m; the graph has 2^m vertices and 2^(m+1) edges.
MAX_DEPTH = 20


def transition_graph(map_: Map, depth: int, allowed: Container[int] | None = None) -> nx.DiGraph:
    """Return the residue transition graph mod 2^depth.

    Args:
        map_: the map (q, d).
        depth: m, 1 … 20.
        allowed: residues that elements may have; all when None.

    Returns:
        A directed graph on the allowed residues; every vertex has the attribute ``odd`` (0 or 1) and the graph the
        attributes ``map`` and ``depth``.

    Raises:
        InputError: ``depth`` outside 1 … 20.
    """
    if not 1 <= depth <= MAX_DEPTH:
        raise InputError("depth", depth, f"an integer from 1 to {MAX_DEPTH}")
    size, half = 1 << depth, 1 << (depth - 1)
    graph = nx.DiGraph(map=map_, depth=depth)
    keep = [r for r in range(size) if allowed is None or r in allowed]
    graph.add_nodes_from((r, {"odd": r & 1}) for r in keep)
    for r in keep:
        image = map_.step(r) % half
        graph.add_edges_from((r, s) for s in (image, image + half) if s in graph)
    return graph


def parity_code(map_: Map, residue: int, depth: int) -> int:
    """Return the first ``depth`` parities from ``residue`` as a binary number, first parity most significant.

    The vertex of B(2, m) that the residue corresponds to.
    """
    return int(map_.parity_word(residue, depth), 2)


def closed_walk_count(graph: nx.DiGraph, length: int, odd: int) -> int:
    """Return the number of closed walks with ``length`` edges, ``odd`` of them leaving odd residues.

    A walk counts once for each starting vertex. Exact; costs about |V|·|E|·k·x additions at worst.
    """
    following = {r: tuple(graph.successors(r)) for r in graph}
    return sum(_walks_from(graph, following, start, length, odd) for start in graph)


def _walks_from(graph: nx.DiGraph, following: dict[int, tuple[int, ...]], start: int, length: int, odd: int) -> int:
    # The coefficient of 2^(j·width) counts the walks with j odd steps; counts stay below 2^width.
    width = 2 * length + 2
    mask = (1 << (width * (odd + 1))) - 1
    layer = {start: 1}
    for _ in range(length):
        after: dict[int, int] = {}
        for r, counts in layer.items():
            moved = (counts << width) & mask if graph.nodes[r]["odd"] else counts
            if moved:
                for s in following[r]:
                    after[s] = after.get(s, 0) + moved
        layer = after
    return layer.get(start, 0) >> (width * odd)


def pruned(graph: nx.DiGraph, length: int, odd: int, starts: Container[int] | None = None) -> nx.DiGraph:
    """Return the subgraph of the edges that lie on a closed walk of ``length`` with ``odd`` odd steps.

    Args:
        graph: of `transition_graph`, or a subgraph of one.
        length: k ≥ 1.
        odd: x.
        starts: where the walk must start; anywhere when None. With the survivors of the least-element sieve this
            keeps what cycles written from their least element can use.

    Exact: for every start, the odd counts with which each vertex is reached after i steps meet those with which the
    start is reached again. Costs about |starts|·|E|·k operations on integers of x bits.
    """
    following = {r: tuple(graph.successors(r)) for r in graph}
    kept: set[tuple[int, int]] = set()
    for component in nx.strongly_connected_components(graph):
        inside = {r: tuple(s for s in following[r] if s in component) for r in component}
        for start in component:
            if starts is None or start in starts:
                kept |= _edges_on_walks(inside, start, length, odd)
    result: nx.DiGraph = graph.edge_subgraph(kept).copy()
    return result


def _edges_on_walks(following: dict[int, tuple[int, ...]], start: int, length: int, odd: int) -> set[tuple[int, int]]:
    # Bit j of an integer: reachable with j odd steps. Backwards: bit j says that j more odd steps close the walk.
    mask = (1 << (odd + 1)) - 1
    back = [{start: 1}]
    preceding: dict[int, list[int]] = {}
    for r, after in following.items():
        for s in after:
            preceding.setdefault(s, []).append(r)
    for _ in range(length):
        layer: dict[int, int] = {}
        for s, counts in back[-1].items():
            for r in preceding.get(s, ()):
                moved = (counts << (r & 1)) & mask
                if moved:
                    layer[r] = layer.get(r, 0) | moved
        back.append(layer)
    edges: set[tuple[int, int]] = set()
    ahead = {start: 1}
    for i in range(length):
        behind = back[length - i - 1]
        layer = {}
        for r, counts in ahead.items():
            moved = (counts << (r & 1)) & mask
            for s in following[r]:
                if s in behind and _sums_to(moved, behind[s], odd):
                    edges.add((r, s))
                    layer[s] = layer.get(s, 0) | moved
        ahead = layer
    return edges


def _sums_to(one: int, two: int, total: int) -> bool:
    """Tell whether some bit i of ``one`` and bit ``total`` − i of ``two`` are both set."""
    while one:
        low = one & -one
        if two >> (total - low.bit_length() + 1) & 1:
            return True
        one ^= low
    return False
