"""tally: exact counts of cycles by residues, their lists and samples."""

import pickle
from collections import Counter
from itertools import combinations, islice
from math import comb, gcd, inf

import pytest

from solverkit.engines import _tally_listing as listing
from solverkit.engines._tally_count import Plan, solution_words
from solverkit.engines._tally_sampling import sample_words, suffix_length
from solverkit.engines.tally import ENGINE, Tally, count_cycles, modulus_of
from solverkit.errors import CapacityError
from solverkit.exact.reduction import reduced
from solverkit.findings import Cycle
from solverkit.methods import Budget, Family, Hit, Piece, merged
from solverkit.registry import load
from solverkit.window import Cell
from solverkit.words import beta, is_aperiodic, lyndon_words

# OEIS A051168: Lyndon words of length k with x ones, rows k = 0 … 12, x = 0 … k.
LYNDON_ROWS = """
    1 / 1 1 / 0 1 0 / 0 1 1 0 / 0 1 1 1 0 / 0 1 2 2 1 0 / 0 1 2 3 2 1 0 / 0 1 3 5 5 3 1 0 / 0 1 3 7 8 7 3 1 0
    / 0 1 4 9 14 14 9 4 1 0 / 0 1 4 12 20 25 20 12 4 1 0 / 0 1 5 15 30 42 42 30 15 5 1 0
    / 0 1 5 18 40 66 75 66 40 18 5 1 0
"""
# OEIS A047996: binary necklaces, same arrangement, rows k = 1 … 10.
NECKLACE_ROWS = """
    1 1 / 1 1 1 / 1 1 1 1 / 1 1 2 1 1 / 1 1 2 2 1 1 / 1 1 3 4 3 1 1 / 1 1 3 5 5 3 1 1 / 1 1 4 7 10 7 4 1 1
    / 1 1 4 10 14 14 10 4 1 1 / 1 1 5 12 22 26 22 12 5 1 1
"""


def rows(text):
    return [[int(number) for number in row.split()] for row in text.split("/")]


def every_word(length, odd):
    for places in combinations(range(length), odd):
        yield "".join("1" if i in places else "0" for i in range(length))


def plain_count(multiplier, length, odd, modulus):
    return sum(beta(word, multiplier) % modulus == 0 for word in every_word(length, odd))


def plain_table_count(multiplier, length, odd, modulus):
    """Count solution words letter by letter over the whole length, in Python integers."""
    table = [[0] * modulus for _ in range(odd + 1)]
    table[0][0] = 1
    for i in range(length):
        for a in range(min(i, odd - 1), -1, -1):
            weight = pow(multiplier, odd - 1 - a, modulus) * pow(2, i, modulus) % modulus
            for r, ways in enumerate(table[a]):
                table[a + 1][(r + weight) % modulus] += ways
    return table[odd][0]


def whole(length, odd, multiplier=3):
    """Return the cell with d = D, where every word is a cycle."""
    return Cell(multiplier, 2**length - multiplier**odd, length, odd)


def run(cell, engine=ENGINE, budget=None):
    (piece,) = engine.pieces((cell,), 1.0)
    return engine.run(piece, budget or Budget())


# (3, 2^16 − 3^10 = 13·499, 16, 10) with d = 499: residues mod 13.
MODULUS_13 = Cell(3, 499, 16, 10)


def test_the_room_offers_it():
    assert load("engines", "tally") is ENGINE
    assert ENGINE.name == "tally"
    assert ENGINE.family is Family.WORD


class TestSolutionWords:
    @pytest.mark.parametrize("modulus", [5, 7, 13, 25, 77, 1001])
    @pytest.mark.parametrize(("length", "odd"), [(1, 1), (2, 1), (7, 0), (7, 7), (9, 4), (12, 7), (13, 8)])
    def test_agree_with_plain_enumeration(self, length, odd, modulus):
        """Also for moduli that do not divide D, where rotations of a solution need not be solutions."""
        assert solution_words(3, length, odd, modulus) == plain_count(3, length, odd, modulus)

    @pytest.mark.parametrize(
        ("multiplier", "length", "odd", "modulus"),
        [
            (3, 129, 64, 101),  # halves count up to C(64, 32) < 2^64 < C(65, 32)
            (3, 134, 67, 5),  # C(67, 33) < 2^64
            (3, 136, 68, 5),  # C(68, 34) > 2^64
            (3, 150, 94, 7),
            (5, 300, 129, 13),
            (181, 333, 100, 7),
            (3, 400, 399, 7),
            (3, 400, 3, 7),
        ],
    )
    def test_agree_with_python_integers_beyond_64_bits(self, multiplier, length, odd, modulus):
        expected = plain_table_count(multiplier, length, odd, modulus)
        assert solution_words(multiplier, length, odd, modulus) == expected

    def test_are_all_words_modulo_1(self):
        assert solution_words(3, 200, 126, 1) == comb(200, 126)

    def test_respect_the_memory_limit(self):
        with pytest.raises(CapacityError, match="bytes"):
            solution_words(3, 40, 25, 1001, memory=10_000)

    def test_respect_the_deadline(self):
        with pytest.raises(CapacityError, match="time"):
            solution_words(3, 40, 25, 1001, deadline=0.0)

    def test_refuse_counts_beyond_the_digits(self):
        with pytest.raises(CapacityError, match="bits"):
            solution_words(3, 13_000, 6_500, 5)


class TestPlan:
    def test_keeps_only_rows_that_can_still_matter(self):
        plan = Plan.halves(200, 126, 10**6)
        assert (plan.length, plan.low, plan.high) == (100, 26, 100)
        assert plan.slots == 79

    def test_has_digits_for_the_largest_count(self):
        for length, odd in [(10, 5), (134, 67), (200, 100), (500, 20)]:
            plan = Plan.halves(length, odd, 5)
            assert plan.largest(plan.length) < 1 << (56 * plan.planes)


class TestCount:
    @pytest.mark.parametrize(
        ("length", "odd", "offset", "count"),
        [
            (5, 3, 5, 2),
            (8, 5, 13, 7),
            (11, 7, -139, 30),
            (16, 10, 6487, 497),
            (19, 12, -7153, 2652),
            (27, 17, 5077565, 312455),
        ],
    )
    def test_of_a_map_whose_offset_is_the_determinant_is_that_of_the_lyndon_words(self, length, odd, offset, count):
        """The count; source: OEIS A051168; record offsets of OEIS A226663."""
        assert count_cycles(Cell(3, offset, length, odd)) == count

    def test_follows_the_triangle_of_lyndon_words(self):
        for length, row in enumerate(rows(LYNDON_ROWS)[1:], start=1):
            for odd in range(1, length + 1):
                assert count_cycles(whole(length, odd)) == row[odd]

    def test_and_those_of_shorter_cells_follow_the_triangle_of_necklaces(self):
        for length, row in enumerate(rows(NECKLACE_ROWS), start=1):
            for odd in range(1, length + 1):
                offset = whole(length, odd).offset
                parts = [e for e in range(1, length + 1) if gcd(length, odd) % e == 0]
                cells = [Cell(3, offset, length // e, odd // e) for e in parts]
                assert sum(count_cycles(cell) for cell in cells) == row[odd]

    def test_leaves_repeated_words_to_the_shorter_cell(self):
        """1 → 2 → 1 of 3x+1, run through twice or more, is no cycle of length 4, 6 or 12."""
        assert [count_cycles(Cell(3, 1, 2 * e, e)) for e in (1, 2, 3, 6)] == [1, 0, 0, 0]

    def test_of_repeated_words_uses_the_modulus_of_the_shorter_cell(self):
        """D(12, 6) = 4^6 − 3^6 = 7·13·37; with d = 13 only words of that cell itself count."""
        cell = Cell(3, 13, 12, 6)
        direct = [w for w in every_word(12, 6) if is_aperiodic(w) and beta(w, 3) % modulus_of(cell) == 0]
        assert count_cycles(cell) * 12 == len(direct)

    def test_is_zero_where_the_signs_differ(self):
        assert count_cycles(Cell(3, -5, 5, 3)) == 0
        assert run(Cell(3, -5, 5, 3)).hits == ()

    def test_finds_the_two_long_cycles_of_3x_plus_5(self):
        """187 and 347, length 27, 17 odd steps. Source: OEIS A226607, A226609, A226610, A226613."""
        assert count_cycles(Cell(3, 5, 27, 17)) == 2
        assert [hit.least for hit in run(Cell(3, 5, 27, 17)).hits] == [187, 347]

    def test_of_a_length_of_thousands_is_immediate_when_every_word_is_a_cycle(self):
        result = run(whole(3000, 1890))
        ((length, odd, total),) = result.totals
        assert (length, odd) == (3000, 1890)
        assert total.bit_length() > 2000
        assert len(result.hits) == 20


class TestListing:
    @pytest.mark.parametrize(("length", "odd"), [(1, 1), (2, 1), (3, 2), (6, 3), (9, 1), (9, 8), (10, 4), (12, 7)])
    def test_balanced_rotations_miss_no_word(self, length, odd):
        cell = whole(length, odd)
        expected = {min(cell.map.orbit(beta(w, 3), length)) for w in lyndon_words(length, odd)}
        assert listing.list_cycles(cell, 1) == sorted(expected)

    def test_takes_a_modulus_just_below_its_limit(self):
        """(3, d, 62, x) with D just below 2^62: residues fill 62 bits."""
        cell = Cell(3, 1, 62, 1)
        assert listing.LARGEST_MODULUS // 2 < modulus_of(cell) < listing.LARGEST_MODULUS
        assert listing.list_cycles(cell, modulus_of(cell)) == []
        assert listing.list_cycles(Cell(3, 2**62 - 3, 62, 1), 1) == [1]

    def test_rejects_an_element_of_another_cell(self):
        with pytest.raises(ArithmeticError, match="no cycle"):
            listing.least_element(Cell(3, 5, 5, 3), 7)
        with pytest.raises(ArithmeticError, match="returns"):
            listing.least_element(Cell(3, 1, 4, 2), 1)

    def test_stops_at_the_deadline(self):
        with pytest.raises(CapacityError, match="time"):
            listing.list_cycles(whole(12, 7), 1, deadline=0.0)


class TestSample:
    def test_is_made_of_cycles_of_the_cell_and_comes_with_the_exact_number(self):
        engine = Tally(list_at_most=5, sample=8)
        result = run(MODULUS_13, engine)
        everything = [hit.least for hit in run(MODULUS_13).hits]
        assert result.complete
        assert result.totals == ((16, 10, len(everything)),)
        assert len(result.hits) == 8
        assert {hit.least for hit in result.hits} <= set(everything)

    def test_is_the_same_every_time(self):
        assert run(whole(40, 25)).hits == run(whole(40, 25)).hits

    def test_elements_pass_direct_iteration(self):
        cell = whole(40, 25)
        for hit in run(cell).hits:
            cycle = Cycle(3, cell.offset, hit.least, 40)
            assert cycle.odd == 25

    @pytest.mark.parametrize("cell", [whole(11, 7), MODULUS_13, Cell(3, 481, 12, 6)], ids=str)
    def test_has_every_cycle_with_the_same_chance(self, cell):
        """Pearson's statistic of 200 draws a cycle stays below its mean plus five deviations (fixed seed)."""
        cycles = count_cycles(cell)
        assert cycles > 1
        draws = 200 * cycles
        words = islice(sample_words(cell, modulus_of(cell), 11, 1 << 24), draws)
        seen = Counter(listing.least_element(cell, listing.element(cell, word)) for word in words)
        assert len(seen) == cycles
        excess = sum((count - 200) ** 2 for count in seen.values())
        freedom = cycles - 1
        assert (excess - 200 * freedom) ** 2 < 25 * 2 * freedom * 200**2

    def test_table_of_suffixes_keeps_to_its_memory(self):
        assert suffix_length(MODULUS_13, 10**6 + 3, 20_000_000) < suffix_length(MODULUS_13, 10**6 + 3, 1 << 32)

    def test_of_a_cell_with_a_hundred_digits_of_cycles_is_quick_beside_the_count(self):
        cell = Cell(3, (2**400 - 3**250) // 499, 400, 250)
        assert modulus_of(cell) == 499
        result = run(cell)
        assert result.complete
        assert len(result.hits) == 20
        assert all(Cycle(3, cell.offset, hit.least, 400).odd == 250 for hit in result.hits)


class TestBound:
    def test_filters_a_list(self):
        least = [hit.least for hit in run(whole(16, 10)).hits]
        cut = least[100]
        bounded = Cell(3, 6487, 16, 10, above=cut)
        assert [hit.least for hit in run(bounded).hits] == least[101:]

    def test_leaves_a_count_open(self):
        result = run(Cell(3, 6487, 16, 10, above=60_000), Tally(list_at_most=100))
        assert not result.complete
        assert "497 cycles are too many" in result.reason
        assert result.totals == ()

    def test_below_every_possible_element_does_not_matter(self):
        """The least β of ten odd steps is 3^10 − 2^10 = 58025."""
        assert run(Cell(3, 6487, 16, 10, above=58_024), Tally(list_at_most=100)).complete
        assert not run(Cell(3, 6487, 16, 10, above=58_025), Tally(list_at_most=100)).complete


class TestMethod:
    @pytest.mark.parametrize(
        ("cell", "reason"),
        [
            (Cell(3, 1, 20_000, 12_000), "length"),
            (Cell(3, 1, 60, 37), "bits"),
            (Cell(3, 1, 31, 18), "MiB"),
            (Cell(3, 5077565, 27, 17, above=10**9), "bound"),
        ],
        ids=str,
    )
    def test_says_which_cells_it_refuses_and_why(self, cell, reason):
        assert reason in ENGINE.refusal(cell)
        assert ENGINE.estimate([cell]) == inf

    def test_takes_small_cells_of_any_modulus(self):
        assert ENGINE.refusal(Cell(3, 1, 18, 11)) is None
        assert ENGINE.estimate([Cell(3, 1, 18, 11)]) < 1

    def test_gives_every_cell_its_own_batch(self):
        cells = [Cell(3, 5, 5, 3), Cell(3, 5, 3, 1), Cell(3, 13, 8, 5)]
        assert ENGINE.batches(cells) == [(cell,) for cell in cells]

    def test_results_merge_and_pickle(self):
        (piece,) = ENGINE.pieces((Cell(3, 5, 5, 3),), 1.0)
        result = pickle.loads(pickle.dumps(ENGINE)).run(pickle.loads(pickle.dumps(piece)), Budget())
        assert result.hits == (Hit(5, 3, 19), Hit(5, 3, 23))
        (answer,) = merged(piece.cells, [pickle.loads(pickle.dumps(result))])
        assert (answer.least, answer.complete, answer.total) == ((19, 23), True, None)

    def test_merged_answer_of_a_counted_cell_carries_the_number(self):
        result = run(whole(27, 17))
        (answer,) = merged((whole(27, 17),), [result])
        assert (answer.total, len(answer.least), answer.complete) == (312455, 20, True)

    def test_ends_as_incomplete_when_the_time_is_over(self):
        result = run(Cell(3, 5, 27, 17), budget=Budget(seconds=-1.0))
        assert not result.complete
        assert "time" in result.reason

    def test_ends_as_incomplete_when_the_memory_does_not_suffice(self):
        result = run(Cell(3, 5, 27, 17), budget=Budget(memory=1 << 20))
        assert not result.complete
        assert "bytes" in result.reason

    def test_a_refused_cell_stays_open(self):
        result = run(Cell(3, 1, 60, 37))
        assert not result.complete
        assert "bits" in result.reason

    def test_a_failing_cell_does_not_stop_the_others(self):
        piece = Piece("tally", (Cell(3, 1, 60, 37), Cell(3, 5, 5, 3)))
        result = ENGINE.run(piece, Budget())
        assert [hit.least for hit in result.hits] == [19, 23]
        assert not result.complete


# Primitive positive cycles of 3x+d as (least, length, odd), those of length at most 27.
# Source: OEIS A226607, A226609, A226610, A226613; Belaga & Mignotte 2000, 2006 as cited there.
PUBLISHED = {
    1: [(1, 2, 1)],
    5: [(1, 3, 1), (19, 5, 3), (23, 5, 3), (187, 27, 17), (347, 27, 17)],
    7: [(5, 4, 2)],
    11: [(1, 6, 2), (13, 14, 8)],
    13: [(1, 4, 1), (131, 24, 15), *((n, 8, 5) for n in (211, 227, 251, 259, 283, 287, 319))],
    17: [(1, 7, 2)],
    19: [(5, 11, 5)],
    23: [(5, 5, 2), (7, 5, 2)],
    25: [(7, 16, 8), (17, 8, 4)],
    29: [(1, 5, 1), (11, 17, 9)],
    31: [(13, 23, 12)],
    35: [(13, 8, 4), (17, 8, 4)],
    37: [(19, 6, 3), (23, 6, 3), (29, 6, 3)],
    41: [(1, 20, 8)],
}


@pytest.mark.parametrize("offset", PUBLISHED)
def test_lists_the_published_cycles_of_length_up_to_18(offset):
    found = []
    for length in range(1, 19):
        for odd in range(1, length + 1):
            reduction = reduced(Cell(3, offset, length, odd))
            for hit in run(reduction.cell).hits:
                cycle = Cycle(3, offset, hit.least * reduction.factor, length)
                if cycle.is_primitive:
                    found.append((cycle.least, length, odd))
    assert sorted(found) == sorted(entry for entry in PUBLISHED[offset] if entry[1] <= 18)
