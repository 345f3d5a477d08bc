"""tally, census and plain enumeration of all words agree on random cells."""

from itertools import combinations
from math import gcd

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from solverkit.engines.census import Census, offset_counts
from solverkit.engines.tally import Tally, count_cycles, modulus_of
from solverkit.exact.reduction import reduced
from solverkit.findings import Cycle
from solverkit.methods import Budget, merged
from solverkit.window import Cell
from solverkit.words import lyndon_count


@st.composite
def cells(draw, longest=12):
    """Cells of either sign whose offset has a factor in common with D, and possibly others besides."""
    multiplier = draw(st.sampled_from([3, 5, 7, 9, 11, 13, 15, 181]))
    length = draw(st.integers(1, longest))
    odd = draw(st.integers(1, length))
    determinant = 2**length - multiplier**odd
    size = abs(determinant)
    divisors = [d for d in range(1, min(size, 2000) + 1, 2) if size % d == 0]
    common = draw(st.sampled_from([*divisors, *(size // d for d in divisors)]))
    offset = common * draw(st.sampled_from([1, 1, 1, 3, 5, 7, 15]))
    sign = draw(st.sampled_from([1, 1, 1, -1]))
    above = draw(st.sampled_from([0, 0, 0, 1, 100]))
    return Cell(multiplier, sign * offset if determinant > 0 else -sign * offset, length, odd, above)


def plain_cycles(cell):
    """Run over all C(k, x) words: substitute, iterate, keep least elements of cycles of this length."""
    found = set()
    for places in combinations(range(cell.length), cell.odd):
        beta = 0
        for place in places:
            beta = cell.multiplier * beta + (1 << place)
        n, rest = divmod(cell.offset * beta, cell.determinant)
        if rest or n <= 0:
            continue
        orbit = cell.map.orbit(n, cell.length)
        assert orbit[-1] == n
        if len(set(orbit)) == cell.length:
            found.add(min(orbit))
    return sorted(found)


def listed(engine, cell, seconds=60.0):
    (batch,) = engine.batches([cell])
    (answer,) = merged(batch, [engine.run(piece, Budget()) for piece in engine.pieces(batch, seconds)])
    return answer


def check(cell):
    expected = plain_cycles(cell)
    above = [n for n in expected if n > cell.above]
    small = reduced(cell)
    assert [n * small.factor for n in listed(Census(), small.cell).least] == above
    assert list(listed(Census(), cell).least) == above
    assert [n * small.factor for n in listed(Tally(), small.cell).least] == above
    if modulus_of(cell) < 100_000:
        assert count_cycles(cell) == len(expected)
        counted = listed(Tally(list_at_most=0, sample=3), small.cell)
        if counted.total is not None:
            assert counted.total == len(expected)
            assert len(counted.least) == min(3, len(expected))
            assert {n * small.factor for n in counted.least} <= set(above)


@given(cells())
@settings(max_examples=400, deadline=None)
def test_all_agree(cell):
    """On lists, counts and samples, for reduced and unreduced cells alike."""
    check(cell)


@pytest.mark.slow
@given(cells(longest=16))
@settings(max_examples=6000, deadline=None)
def test_all_agree_up_to_length_16(cell):
    """On lists, counts and samples, for reduced and unreduced cells alike."""
    check(cell)


@given(cells())
@settings(max_examples=100, deadline=None)
def test_count_is_the_number_of_primitive_cycles_of_all_divisors(cell):
    """Tally counts what the census finds for the divisors of d, by another way."""
    if modulus_of(cell) < 100_000 and (cell.determinant > 0) == (cell.offset > 0):
        primitive = offset_counts(cell.multiplier, cell.length, cell.odd)
        assert sum(primitive.values()) == lyndon_count(cell.length, cell.odd)
        assert count_cycles(cell) == sum(n for d, n in primitive.items() if cell.offset % d == 0)


@given(cells(longest=20), st.integers(1, 50))
@settings(max_examples=50, deadline=None)
def test_pieces_of_any_number_give_one_list(cell, count):
    """The shares of the enumeration together visit each word once."""
    cell = reduced(cell).cell
    engine = Census()
    if engine.refusal(cell) is None and lyndon_count(cell.length, cell.odd) < 20_000:
        whole = listed(engine, cell)
        (piece,) = engine.pieces((cell,), 60.0)
        parts = [type(piece)(piece.method, piece.cells, i, count) for i in range(count)]
        assert merged((cell,), [engine.run(part, Budget()) for part in parts])[0].least == whole.least
        for n in whole.least[:3]:
            cycle = Cycle(cell.multiplier, cell.offset, n, cell.length)
            assert gcd(cycle.gcd, cell.offset) == cycle.gcd
            assert cycle.lies_in(cell)
