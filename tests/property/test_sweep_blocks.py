"""The sweep's block kernels against its plain pass and against counts, on maps with many cycles at large elements.

Cells with d = D, or D over a factor, have cycles in plenty, so that a candidate dropped wrongly would be missed.
"""

import pytest

from solverkit.engines import _sweep_fast, _sweep_plan, _sweep_processor, _sweep_search
from solverkit.engines._sweep_residues import every_element
from solverkit.engines.sweep import ENGINE
from solverkit.engines.tally import count_cycles
from solverkit.methods import Budget, Piece, merged
from solverkit.window import Cell


def _swept(q, d, first, last, length=300, odd=250, above=0):
    """Return the cycles with least element in first … last, and what the search counted."""
    cell = Cell(q, d, length, min(length, odd), above)
    result = ENGINE.run(Piece("sweep", (cell,), 0, 1, (first, last, length, odd)), Budget())
    assert result.complete
    return [hit for hit in result.hits if first <= hit.least <= last], result.statistics


@pytest.fixture
def plain(monkeypatch):
    def forced(*arguments, **named):
        with monkeypatch.context() as patch:
            patch.setattr(_sweep_search, "_FEWEST_FALLING", 1 << 60)
            patch.setattr(_sweep_search, "_FEWEST_GROWING", 1 << 60)
            patch.setattr(_sweep_search, "_FEWEST_SIEVED", 1 << 60)
            return _swept(*arguments, **named)

    return forced


@pytest.mark.parametrize(
    ("d", "first"),
    [
        (-7153 * 101, 1 << 25),
        (-7153 * 1001, 1 << 29),
        (6487 * 333, 1 << 25),
        (-139 * 100003, 1 << 27),
        (3 * 7153 * -35, 1 << 25),
        (5 * ((1 << 20) + 7), 1 << 27),
    ],
)
@pytest.mark.parametrize("above", [0, "first"])
def test_blocks_find_what_a_plain_pass_finds(d, first, above, plain):
    last = first + (1 << 26)
    least = first - 1 if above else 0
    found, statistics = _swept(3, d, first, last, above=least)
    assert statistics["tried"] > 0
    assert found == plain(3, d, first, last)[0]


def test_a_block_with_thousands_of_cycles_loses_none(plain):
    first = 120_000_000
    found, statistics = _swept(3, 5077565, first, first + (1 << 24))
    assert statistics["tried"] > 0
    assert found == plain(3, 5077565, first, first + (1 << 24))[0]
    assert len(found) == 4919


@pytest.mark.parametrize("d", [7153, -7153, 6487, -139 * 51, 11 * 601, -12001, 3 * 2385])
@pytest.mark.parametrize("limbs", [1, 2])
def test_one_and_two_limb_kernels_of_small_offsets_agree_with_a_plain_pass(d, limbs, plain, monkeypatch):
    """Blocks from 2^18 on instead of 2^22, since cycles of small offsets have small elements."""
    monkeypatch.setattr(_sweep_plan, "LEAST_START", 1 << 18)
    monkeypatch.setattr(_sweep_plan, "_LEAST_DEPTH", 12)
    monkeypatch.setattr(_sweep_search, "_FEWEST_FALLING", 1 << 14)
    if limbs == 2:
        real = _sweep_fast.plain_tables

        def wide(*arguments):
            tables = real(*arguments)
            most = dict.fromkeys(tables.most_slope, 1 << 62)  # looks too large for one limb
            return _sweep_plan.Tables(
                tables.classes, tables.arrays, tables.extra, tables.cumulated, most, tables.most_shift, tables.modulus
            )

        monkeypatch.setattr(_sweep_fast, "plain_tables", wide)
    first, last = 1 << 18, 1 << 22
    found, statistics = _swept(3, d, first, last)
    assert statistics["tried"] > 0
    assert found == plain(3, d, first, last)[0]
    assert len(found) > 1000 or d != -7153


@pytest.mark.parametrize(
    ("d", "first"),
    [(-7153 * 101, 1 << 25), (6487 * 333, 1 << 25), (3 * 7153 * -35, 1 << 25), (-7153, 1 << 19)],
)
def test_without_vector_instructions_the_sieved_pass_finds_the_same(d, first, plain, monkeypatch):
    """On processors without AVX-512 no block is swept; the plain pass then skips classes that hold no least element."""
    monkeypatch.setattr(_sweep_processor, "available", lambda: False)
    last = first + (1 << 22)
    found, statistics = _swept(3, d, first, last)
    assert "tried" not in statistics
    assert found == plain(3, d, first, last)[0]
    assert found


@pytest.mark.parametrize(
    "cell",
    [
        Cell(5, -40047847, 33, 18),
        Cell(5, -102142881, 35, 19),
        Cell(7, -47780499, 34, 14),
        Cell(7, -146389151, 35, 16),
        Cell(9, -65910089, 34, 13),
        Cell(9, -278644409, 35, 14),
    ],
)
def test_blocks_of_growing_maps_find_all_cycles_of_a_cell(cell):
    """The tally knows how many there are."""
    (batch,) = ENGINE.batches([cell])
    results = [ENGINE.run(piece, Budget()) for piece in ENGINE.pieces(batch, 60.0)]
    (entry,) = merged(batch, results)
    assert entry.complete
    assert any(result.statistics.get("tried", 0) for result in results)
    assert len(entry.least) == count_cycles(cell)


@pytest.mark.parametrize(("d", "bits"), [(1, 40), (-1, 62), (1, 64), (-5, 70), (10007, 62), (10007, 70)])
def test_no_candidate_that_never_drops_is_lost_at_any_height(d, bits, monkeypatch):
    """With two passes left to the kernels, all that stays up for so many steps is handed back, by plain iteration."""
    monkeypatch.setattr(_sweep_fast, "_PASSES", 2)
    start = (1 << bits) + 12345 * (1 << 20)
    block = _sweep_plan.block_at(3, d, start, start + (1 << 20) - 1)
    residues = every_element(3, d)
    kept = {int(label) for labels in _sweep_fast.survivors(3, d, block, residues, None, {}) for label in labels}
    stays = set()
    for n in range(block.base | 1, block.end, 2):
        value = n
        for _ in range(block.depth + 25):
            value = (3 * value + d) >> 1 if value & 1 else value >> 1
            if value < n:
                break
        else:
            if residues.allowed[n % residues.modulus]:
                stays.add(n - block.base)
    assert len(stays) > 5000
    assert stays <= kept


@pytest.mark.parametrize("bits", [31, 32, 61, 62, 63, 64, 65, 126, 127, 128, 130])
@pytest.mark.parametrize(
    ("q", "base", "least", "length", "odd"), [(3, -1, 17, 11, 7), (3, 5, 347, 27, 17), (5, 1, 13, 7, 3)]
)
def test_planted_cycles_at_the_borders_of_words(bits, q, base, least, length, odd):
    """A known cycle times an odd factor sits where elements or products leave 31, 32, 63, 64, 127 or 128 bits."""
    for shift in (0, 3, 7):
        factor = ((1 << bits) // (least << shift)) | 1
        cell = Cell(q, base * factor, length, odd, above=least * factor - 4001)
        top = Piece("sweep", (cell,), 0, 1, (least * factor - 4000, least * factor + 4000, length, odd))
        result = ENGINE.run(top, Budget())
        assert result.complete
        assert (length, odd, least * factor) in {(h.length, h.odd, h.least) for h in result.hits}


def test_an_orbit_beyond_128_bits_is_followed_in_python_integers():
    """5x+d at 2^126: the orbit of the known cycle leaves the two-limb kernel on the way."""
    factor = (1 << 126) | 1
    cell = Cell(5, factor, 7, 3, above=13 * factor - 101)
    result = ENGINE.run(Piece("sweep", (cell,), 0, 1, (13 * factor - 100, 13 * factor + 100, 7, 3)), Budget())
    assert [hit.least for hit in result.hits] == [13 * factor]


def test_a_budget_ends_a_piece_with_what_is_done():
    cell = Cell(5, 1, 1493, 643)
    (piece,) = ENGINE.pieces((cell,), 1e6)
    result = ENGINE.run(piece, Budget(0.05))
    assert not result.complete
    assert "budget" in result.reason
    assert piece.detail[0] - 1 <= int(result.statistics["swept_to"]) < piece.detail[1]
