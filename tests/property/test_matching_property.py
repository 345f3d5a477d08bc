"""Word matching against the definition on random cells, and the bucket join against all pairs on random halves."""

from unittest.mock import patch

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from solverkit.engines import _matching_buckets as buckets
from solverkit.engines import _matching_plan as plans
from solverkit.engines._matching_halves import HalfWords, build
from solverkit.engines._matching_pairs import near_pairs
from solverkit.engines.matching import ENGINE
from solverkit.methods import Budget, Piece, merged
from tests.reference import cycles_of_cell
from tests.strategies import cells

CIRCLE = 1 << 64
residues = st.one_of(st.integers(0, 60), st.integers(CIRCLE - 60, CIRCLE - 1), st.integers(0, CIRCLE - 1))


def distance(y, z):
    return min((y - z) % CIRCLE, (z - y) % CIRCLE)


@settings(max_examples=300)
@given(
    cell=cells(14),
    way=st.sampled_from(["enumerated", "sorted", "streamed"]),
    count=st.integers(1, 4),
    bucket=st.sampled_from([3, 40, 80_000]),
    memory=st.sampled_from([None, 1]),
)
def test_every_way_lists_exactly_the_cycles(cell, way, count, bucket, memory):
    if cell.length == cell.odd or way == "enumerated":
        way, count = "enumerated", 1
    few, short = {"enumerated": (10**9, 0), "sorted": (-1, 10**9), "streamed": (-1, -1)}[way]
    count = count if way == "streamed" else 1
    with (
        patch.object(plans, "_FEW_WORDS", few),
        patch.object(plans, "_SHORT_HALF", short),
        patch.object(buckets, "_BUCKET", bucket),
        patch.object(buckets, "_RUN", 1),
    ):
        plans.plan.cache_clear()
        results = [ENGINE.run(Piece("matching", (cell,), i, count), Budget(memory=memory)) for i in range(count)]
    plans.plan.cache_clear()
    (listing,) = merged((cell,), results)
    assert listing.complete, listing.reason
    assert list(listing.least) == cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)


@given(left=st.lists(residues, max_size=12), right=st.lists(residues, max_size=12), slack=st.integers(0, 40))
def test_near_pairs_are_all_pairs_that_are_near(left, right, slack):
    expected = {(i, j) for i, y in enumerate(left) for j, z in enumerate(right) if distance(y, z) <= slack}
    ys, zs = np.array(left, np.uint64), np.array(right, np.uint64)
    found = near_pairs(ys, zs, slack, len(expected))
    assert sorted(map(tuple, found.tolist())) == sorted(expected)
    if expected:
        assert near_pairs(ys, zs, slack, len(expected) - 1) is None


@st.composite
def halves(draw, border):
    """Two halves whose sums crowd round a few residues, among them borders of the pieces."""
    rng = np.random.default_rng(draw(st.integers(0, 2**32)))
    sides = []
    for start, stop, ones in ((1, 9, 3), (2, 11, 5)):
        near = rng.integers(-30, 30, (6, 12)).astype(np.int64).view(np.uint64)
        far = rng.integers(0, CIRCLE, (6, 12), np.uint64)
        weights = np.where(rng.random((6, 12)) < draw(st.sampled_from([0.0, 0.5, 0.9, 1.0])), near, far)
        base = draw(st.sampled_from([0, border, border - 25, border + 25, 1 << 63])) % CIRCLE
        sides.append(build(HalfWords(start, stop, 0, ones), weights, base, draw(st.sampled_from([1, 20, 1000]))))
    return sides


@settings(max_examples=150)
@given(data=st.data(), count=st.integers(1, 5), slack=st.integers(0, 40), bucket=st.sampled_from([2, 10, 80_000]))
def test_the_join_of_all_ranges_finds_every_near_pair(data, count, slack, bucket):
    left, right = data.draw(halves(CIRCLE // count))
    everything = [
        {
            (int(half.base[s]) + int(v)) % CIRCLE
            for s in range(len(half.base))
            for v in half.values[half.first[s] : half.end[s]]
        }
        for half in (left, right)
    ]
    expected = {(y, z) for y in everything[0] for z in everything[1] if distance(y, z) <= slack}
    found, emitted = set(), [0, 0]
    with patch.object(buckets, "_BUCKET", bucket), patch.object(buckets, "_RUN", 1):
        for i in range(count):
            low, high = CIRCLE * i // count, CIRCLE * (i + 1) // count
            joined = buckets.join_range(left, right, low, high, slack, 10**6, 10**7, float("inf"))
            ys, zs = joined.left, joined.right
            for one, other in near_pairs(ys.residues, zs.residues, slack, 10**7).tolist():
                found.add((int(ys.residues[one]), int(zs.residues[other])))
            emitted = [a + b for a, b in zip(emitted, joined.emitted, strict=True)]
            for half, pool in ((left, ys), (right, zs)):
                streams, places = pool.places.T
                assert (half.base[streams] + half.values[places] == pool.residues).all()
    assert found == expected
    assert emitted == [left.count(), right.count()]
