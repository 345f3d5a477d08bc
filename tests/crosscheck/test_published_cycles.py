"""Published lists of cycles, settled by two families of methods."""

from fractions import Fraction

import pytest

from solverkit.exact.bounds import product_bound
from solverkit.findings import Cycle, Evidence
from solverkit.maps import Map
from solverkit.numerals import Span
from solverkit.settle.run import Settings, settle
from solverkit.window import Cell, Sign, Window
from solverkit.words import beta, lyndon_words, rotations
from tests.published import published


@pytest.mark.parametrize("name", [f"CY-{i}" for i in range(11, 25)])
def test_primitive_cycles_of_3x_plus_d(name, tmp_path):
    """OEIS A226607, A226609, A226610, A226613; Belaga & Mignotte (2000, 2006)."""
    data = published(name)
    window = Window((Map(3, data["d"]),), Span(1, 45), primitive=True)
    settlement = settle(window, tmp_path / "d", Settings(jobs=1))
    assert settlement.exit_status == 0
    assert all(f.evidence is Evidence.CONFIRMED for f in settlement.findings)
    expected = {tuple(cycle) for cycle in data["cycles"] if cycle[1] <= 45}
    assert {(c.least, c.length, c.odd) for c in settlement.cycles} == expected


@pytest.mark.parametrize(("d", "inner"), [(5, [1]), (35, [1, 5, 7])])
def test_imprimitive_cycles_come_from_the_divisors(d, inner, tmp_path):
    """OEIS A102280 and A102284: one printed table took an imprimitive cycle of d = 35 for a primitive one."""
    everything = settle(Window((Map(3, d),), Span(1, 40)), tmp_path / "all", Settings(jobs=1))
    multiples = {(c.least, c.length) for c in everything.cycles if not c.is_primitive}
    expected = set()
    for e in inner:
        part = settle(Window((Map(3, e),), Span(1, 40), primitive=True), tmp_path / str(e), Settings(jobs=1))
        expected |= {(c.least * (d // e), c.length) for c in part.cycles}
    assert multiples == expected


@pytest.mark.parametrize(("q", "name"), [(5, "CY-02"), (7, "CY-03")])
def test_cycles_of_other_multipliers_on_both_sides(q, name, tmp_path):
    """Crandall (1978), from memory."""
    settlement = settle(
        Window((Map(q, 1),), Span(1, 40), signs=(Sign.POSITIVE, Sign.NEGATIVE)), tmp_path / "d", Settings(jobs=1)
    )
    assert settlement.exit_status == 0
    assert {(c.least, c.length, c.odd) for c in settlement.cycles} == {
        (c["min"], c["k"], c["x"]) for c in published(name)
    }


def test_rational_cycles_of_every_short_word():
    """OEIS A226605, A226606; Lagarias, Acta Arith. 56 (1990): β/D in lowest terms, from the largest rotation."""
    data = published("CY-63")
    table = [Fraction(n, d) for n, d in zip(data["num"], data["den"], strict=True)]
    ours = [
        Fraction(beta(max(rotations(word)), 3), abs(2**k - 3**x)) * (1 if 2**k > 3**x else -1)
        for k in range(1, 8)
        for x in range(k + 1)
        for word in lyndon_words(k, x)
    ]
    assert sorted(map(abs, ours)) == sorted(map(abs, table[: len(ours)]))


def test_every_word_is_a_cycle_when_d_equals_the_determinant(tmp_path):
    """Counts of Lyndon words whose cycle is primitive, computed independently."""
    for k, x, d, words in published("CY-66")[:3]:
        sign = Sign.POSITIVE
        settlement = settle(
            Window((Map(3, d),), Span(k, k), Span(x, x), signs=(sign,)), tmp_path / str(d), Settings(jobs=1)
        )
        assert len(settlement.cycles) == words


def test_eliahou_inequality_holds_for_all_cycles_found(tmp_path):
    """log2(q + d/max) ≤ k/x ≤ log2(q + d/min), as powers of integers; Eliahou (1993)."""
    window = Window(tuple(Map(3, d) for d in range(5, 60, 2)), Span(1, 30))
    cycles = settle(window, tmp_path / "d", Settings(jobs=1)).cycles
    assert len(cycles) > 60
    for c in cycles:
        low, high = (3 * c.largest + c.offset) ** c.odd, (3 * c.least + c.offset) ** c.odd
        assert low <= 2**c.length * c.largest**c.odd
        assert 2**c.length * c.least**c.odd <= high
        assert c.least <= product_bound(Cell(3, c.offset, c.length, c.odd))
        assert Cycle(3, c.offset, c.least, c.length) == c
