"""The residue transition graph mod 2^m and the least-element sieve."""

from itertools import pairwise, product
from math import comb

import networkx as nx
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from solverkit.errors import InputError
from solverkit.exact.windows import element_windows
from solverkit.maps import Map
from solverkit.residues.graph import closed_walk_count, parity_code, pruned, transition_graph
from solverkit.residues.sieve import drop_threshold, prefix_tree, survivor_count, survivors
from tests.published import published
from tests.reference import cycles_of_cell
from tests.strategies import cells, maps


@pytest.mark.parametrize("map_", [Map(3, 1), Map(5, -7), Map(9, 5), Map(181, 1)], ids=str)
@pytest.mark.parametrize("depth", range(1, 6))
def test_graph_is_isomorphic_to_the_de_bruijn_graph(map_, depth):
    """Lagarias (1985); the isomorphism is found by networkx, and the parity code is one."""
    graph = transition_graph(map_, depth)
    size = 2**depth
    shift = nx.DiGraph([(a, (2 * a + b) % size) for a in range(size) for b in (0, 1)])
    assert nx.is_isomorphic(graph, shift)
    code = {r: parity_code(map_, r, depth) for r in graph}
    assert nx.utils.graphs_equal(nx.relabel_nodes(nx.DiGraph(graph.edges), code), shift)


@given(maps, st.integers(1, 6), st.integers(1, 9), st.data())
def test_closed_walks_number_binomials(map_, depth, length, data):
    odd = data.draw(st.integers(0, length))
    assert closed_walk_count(transition_graph(map_, depth), length, odd) == comb(length, odd)


def _walks(graph, start, length):
    if length == 0:
        yield (start,)
        return
    for following in graph.successors(start):
        for rest in _walks(graph, following, length - 1):
            yield (start, *rest)


@settings(max_examples=40)
@given(maps, st.integers(1, 3), st.integers(1, 7), st.data())
def test_pruning_keeps_exactly_the_edges_on_closed_walks(map_, depth, length, data):
    allowed = data.draw(st.sets(st.integers(0, 2**depth - 1), min_size=1))
    starts = data.draw(st.none() | st.sets(st.sampled_from(sorted(allowed))))
    odd = data.draw(st.integers(0, length))
    graph = transition_graph(map_, depth, allowed)
    expected = set()
    for start in graph if starts is None else starts:
        for walk in _walks(graph, start, length):
            if walk[-1] == start and sum(r & 1 for r in walk[:-1]) == odd:
                expected |= set(pairwise(walk))
    assert set(pruned(graph, length, odd, starts).edges) == expected


@pytest.mark.parametrize("depth", [0, -1, 21])
def test_depth_is_bounded(depth):
    with pytest.raises(InputError, match="depth"):
        transition_graph(Map(3, 1), depth)


def test_survivor_counts_are_the_published_ones():
    """OEIS A076227, m = 0 … 39."""
    assert [survivor_count(3, m) for m in range(40)] == published("CT-05")


@pytest.mark.parametrize("depth", range(4, 9))
def test_survivors_are_the_published_classes(depth):
    """OEIS A076227."""
    assert survivors(Map(3, 1), depth) == published("CT-08")[f"mod{2**depth}"]


def test_2114_classes_survive_mod_65536():
    """OEIS A076227."""
    assert len(survivors(Map(3, 1), 16)) == published("CT-11")["survivors"]


@given(maps, st.integers(1, 8), st.integers(1, 3000))
def test_classes_outside_the_survivors_drop_beyond_the_threshold(map_, depth, more):
    n = drop_threshold(map_, depth) + more
    if n % 2**depth not in survivors(map_, depth):
        assert min(map_.orbit(n, depth)) < n


@given(cells(longest=11), st.integers(0, 9))
def test_prefix_tree_splits_all_residues_and_keeps_every_cycle(cell, depth):
    tree = prefix_tree(element_windows(cell), depth)
    steps = max([i for i, _ in tree.dead] + [i for i, _, _ in tree.live], default=0)
    cover = [0] * 2**steps
    for i, r in [*tree.dead, *((i, r) for i, r, _ in tree.live)]:
        for high in range(2 ** (steps - i)):
            cover[r + high * 2**i] += 1
    assert set(cover) == {1}
    for least in cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above):
        assert any(least % 2**i == r and least in span for i, r, span in tree.live)


def test_product_of_depths_is_consistent():
    """A class that survives mod 2^m lies over one that survives mod 2^(m−1)."""
    for map_, depth in product([Map(3, 1), Map(3, -5), Map(7, 3)], range(2, 10)):
        upper, lower = survivors(map_, depth), set(survivors(map_, depth - 1))
        assert {r % 2 ** (depth - 1) for r in upper} <= lower
