"""census: one enumeration of words gives the primitive cycles of every offset."""

import pickle
import random
import time
from fractions import Fraction
from math import inf

import numpy as np
import pytest

from solverkit.engines import _census_cycles as cycles
from solverkit.engines import _census_scan as scan
from solverkit.engines import census
from solverkit.engines._census_cycles import Frame, smooth_part, wanted_cycles
from solverkit.engines._census_scan import Share, rare_weights, screened_words
from solverkit.engines.census import ENGINE, Census, offset_counts, primitive_cycles
from solverkit.errors import CapacityError
from solverkit.findings import Cycle
from solverkit.maps import Map
from solverkit.methods import Budget, Family, Hit, merged
from solverkit.numerals import Span
from solverkit.registry import load
from solverkit.window import Cell
from solverkit.words import beta, lyndon_count, lyndon_words, rotations

# Rational cycles of 3x+1, one for every aperiodic word of lengths 1 … 7 and some of length 8, each
# given by its element at the lexicographically largest rotation.
# Source: OEIS A226605, A226606; Lagarias, Acta Arith. 56 (1990) 33-53.
NUMERATORS = [
    -1,
    0,
    1,
    -5,
    1,
    -19,
    5,
    1,
    -65,
    19,
    23,
    5,
    7,
    1,
    -211,
    -65,
    -73,
    19,
    23,
    31,
    1,
    7,
    1,
    -665,
    -211,
    -227,
]
NUMERATORS += [
    65,
    -251,
    73,
    89,
    19,
    85,
    101,
    23,
    31,
    47,
    5,
    37,
    1,
    11,
    1,
    -2059,
    -665,
    -697,
    211,
    -745,
    227,
    259,
    13,
]
NUMERATORS += [251, 283, 73, 331, 89, 121, 19, 319, 17, 101, 19, 23]
DENOMINATORS = [
    1,
    1,
    1,
    1,
    5,
    11,
    7,
    13,
    49,
    5,
    5,
    23,
    23,
    29,
    179,
    17,
    17,
    37,
    37,
    37,
    11,
    55,
    61,
    601,
    115,
    115,
    47,
]
DENOMINATORS += [
    115,
    47,
    47,
    101,
    47,
    47,
    101,
    101,
    101,
    119,
    101,
    17,
    119,
    125,
    1931,
    473,
    473,
    13,
    473,
    13,
    13,
    35,
]
DENOMINATORS += [13, 13, 175, 13, 175, 175, 229, 13, 35, 175, 25, 229]

# Signed offsets with a primitive positive cycle of 3x+d of length n, and their numbers, rows n = 2 … 10.
# Source: OEIS A226619, A226621.
OFFSETS_BY_LENGTH = {
    2: {1: 1},
    3: {-1: 1, 5: 1},
    4: {-11: 1, 7: 1, 13: 1},
    5: {-49: 1, 5: 2, 23: 2, 29: 1},
    6: {-179: 1, -17: 2, 11: 1, 37: 3, 55: 1, 61: 1},
    7: {-601: 1, -115: 3, 17: 1, 47: 5, 101: 5, 119: 2, 125: 1},
    8: {-1931: 1, -473: 3, 13: 7, 25: 1, 35: 2, 175: 5, 229: 7, 247: 3, 253: 1},
    9: {-6049: 1, -1675: 4, -217: 8, -31: 1, 97: 1, 269: 14, 431: 14, 485: 8, 503: 4, 509: 1},
    10: {-18659: 1, -5537: 3, -1163: 12, -791: 1, 59: 6, 71: 2, 145: 1, 203: 1, 295: 14, 781: 23, 943: 20}
    | {997: 12, 1015: 2, 1021: 1},
}

# Least d > 0 such that 3x+d has a primitive positive cycle of length k = 2, 3, …. Source: OEIS A226660.
LEAST_OFFSETS = [
    1,
    5,
    7,
    5,
    11,
    17,
    13,
    97,
    59,
    19,
    55,
    233,
    11,
    73,
    25,
    29,
    47,
    215,
    41,
    103,
    145,
    31,
    13,
    119,
    131,
]

# Primitive positive cycles of 3x+d as (least, length, odd), those of length at most 24.
# Source: OEIS A226607, A226609, A226610, A226613; Belaga & Mignotte 2000, 2006 as cited there.
PUBLISHED = {
    1: [(1, 2, 1)],
    5: [(1, 3, 1), (19, 5, 3), (23, 5, 3)],
    7: [(5, 4, 2)],
    11: [(1, 6, 2), (13, 14, 8)],
    13: [(1, 4, 1), *((n, 8, 5) for n in (211, 227, 251, 259, 283, 287, 319)), (131, 24, 15)],
    17: [(1, 7, 2)],
    19: [(5, 11, 5)],
    23: [(5, 5, 2), (7, 5, 2)],
    25: [(17, 8, 4), (7, 16, 8)],
    29: [(1, 5, 1), (11, 17, 9)],
    31: [(13, 23, 12)],
    35: [(13, 8, 4), (17, 8, 4)],
    37: [(19, 6, 3), (23, 6, 3), (29, 6, 3)],
    41: [(1, 20, 8)],
}


@pytest.fixture(scope="module")
def small_offsets():
    return list(primitive_cycles(3, Span(1, 24), offsets_at_most=300))


def words_of(length, odd, **options):
    """Return the least rotations of the words that are visited, and the number of words visited."""
    found, visited = [], 0
    for block in screened_words(3, length, odd, **options):
        visited = block.visited
        found.extend("".join("1" if i in ones else "0" for i in range(length)) for ones in block.ones(length))
    return sorted(min(rotations(word)) for word in found), visited


def run(cell, engine=ENGINE, budget=None, seconds=60.0):
    (batch,) = engine.batches([cell])
    results = [engine.run(piece, budget or Budget()) for piece in engine.pieces(batch, seconds)]
    (answer,) = merged(batch, results)
    return answer


def test_the_room_offers_it():
    assert load("engines", "census") is ENGINE
    assert ENGINE.name == "census"
    assert ENGINE.family is Family.WORD


class TestScan:
    @pytest.mark.parametrize("length", range(1, 15))
    def test_visits_every_lyndon_word_once(self, length):
        for odd in range(1, length + 1):
            expected = list(lyndon_words(length, odd))
            assert words_of(length, odd) == (expected, len(expected))

    @pytest.mark.parametrize("count", [2, 3, 7])
    def test_shares_are_a_partition(self, count):
        for length, odd in [(2, 1), (6, 3), (9, 2), (9, 7), (13, 5), (13, 8), (16, 8)]:
            shares = [words_of(length, odd, share=Share(i, count)) for i in range(count)]
            assert sorted(word for words, _ in shares for word in words) == list(lyndon_words(length, odd))
            assert sum(visited for _, visited in shares) == lyndon_count(length, odd)

    def test_goes_on_where_a_full_buffer_stopped_it(self):
        """The least buffer has 32 rows; the 805 words of length 16 with 8 ones fill it many times."""
        blocks = [block.count for block in screened_words(3, 16, 8, capacity=1)]
        assert len(blocks) > 25
        assert sum(blocks) == lyndon_count(16, 8)

    def test_goes_on_where_its_quota_stopped_it(self, monkeypatch):
        monkeypatch.setattr(scan, "_QUOTA", 10)
        assert words_of(14, 6) == (list(lyndon_words(14, 6)), lyndon_count(14, 6))

    @pytest.mark.parametrize(("length", "odd"), [(13, 5), (13, 8), (14, 4), (15, 11)])
    @pytest.mark.parametrize("divisor", [5, 7, 11, 13])
    def test_screen_loses_no_word_whose_beta_is_divisible(self, length, odd, divisor):
        """Nor keeps it another here. The divisors need not divide D."""
        kept, visited = set(), 0
        for block in screened_words(3, length, odd, divisor):
            visited = block.visited
            for ones in block.ones(length):
                kept.add(sum(3 ** (odd - 1 - j) << p for j, p in enumerate(ones)))
        assert visited == lyndon_count(length, odd)
        everything = {
            sum(3 ** (odd - 1 - j) << p for j, p in enumerate(ones))
            for block in screened_words(3, length, odd)
            for ones in block.ones(length)
        }
        divisible = {value for value in everything if value % divisor == 0}
        assert divisible
        assert kept == divisible

    @pytest.mark.parametrize(("length", "odd"), [(18, 12), (20, 10)])
    def test_screen_keeps_a_word_whose_beta_is_a_divisor_beyond_64_bits(self, length, odd):
        """R is the β of one visited word, for q = 181; it passes, and hardly another."""
        everything = [ones for block in screened_words(181, length, odd) for ones in block.ones(length)]
        planted = everything[len(everything) // 3]
        divisor = sum(181 ** (odd - 1 - j) << p for j, p in enumerate(planted))
        assert divisor.bit_length() > 64
        kept = [ones for block in screened_words(181, length, odd, divisor) for ones in block.ones(length)]
        assert planted in kept
        assert len(kept) == 1

    def test_screen_is_sharp_where_nearly_all_steps_are_odd(self):
        """There β is just above |D| for most words of (3, 120, 117), by less than one part in 2^64."""
        determinant = 3**117 - 2**120
        assert sum(block.count for block in screened_words(3, 120, 117, determinant)) < 5

    @pytest.mark.parametrize(("length", "odd"), [(1, 1), (7, 3), (8, 4), (8, 5), (9, 8), (20, 13)])
    def test_weights_of_the_rarer_letter_add_up_to_beta(self, length, odd):
        weights, constant = rare_weights(length, odd, lambda j, p: 3 ** (odd - 1 - j) << p)
        for word in list(lyndon_words(length, odd))[:500]:
            rare = "1" if 2 * odd <= length else "0"
            places = [i for i, letter in enumerate(word) if letter == rare]
            total = int(constant) + sum(int(weights[t, p]) for t, p in enumerate(places))
            assert total % 2**64 == beta(word, 3)

    def test_stops_at_the_deadline(self):
        with pytest.raises(CapacityError, match="time"):
            list(screened_words(3, 30, 15, deadline=time.monotonic() - 1))


class TestCheck:
    @pytest.mark.parametrize(
        "frame",
        [
            Frame(3, 14, 8),
            Frame(3, 13, 5),
            Frame(5, 12, 7),
            Frame(15, 11, 4),
            Frame(181, 9, 5),
            Frame(3, 38, 36),
        ],
        ids=str,
    )
    @pytest.mark.parametrize("at_most", [1, 100, 10**9])
    def test_compiled_and_plain_agree(self, frame, at_most):
        assert frame.fits_word()
        for block in screened_words(frame.multiplier, frame.length, frame.odd):
            compiled = cycles._check_compiled(frame, block, None, at_most)
            assert compiled == cycles._check_plain(frame, block, None, at_most)

    def test_compiled_is_used_up_to_63_bits_and_no_further(self):
        """q·β + |D| of (3, 39, x) passes 2^63 between x = 36 and x = 39."""
        fits = [Frame(3, 39, odd).fits_word() for odd in range(34, 40)]
        assert fits == sorted(fits, reverse=True)
        assert fits[0]
        assert not fits[-1]

    @pytest.mark.parametrize("length", [38, 39, 40])
    def test_elements_at_the_border_of_63_bits_pass_iteration(self, length):
        """With all steps but two odd, β has 60 bits and more; the offsets are about as large."""
        odd = length - 2
        rows = list(primitive_cycles(3, [length], [odd]))
        assert len(rows) == lyndon_count(length, odd)
        for row in random.Random(5).sample(rows, 5):
            assert Cycle(3, row.offset, row.least, length).is_primitive

    @pytest.mark.parametrize(
        ("number", "most", "expected"),
        [(1, 5, 1), (2**4 * 3 * 7 * 101, 7, 336), (101**3, 100, 1), (101**3, 101, 101**3)],
    )
    def test_smooth_part(self, number, most, expected):
        assert smooth_part(number, most) == expected


class TestPrimitiveCycles:
    def test_are_the_published_rational_cycles(self):
        """n/d runs through the rational cycles of 3x+1; the word 0 is outside of every cell."""
        found = {}
        for row in primitive_cycles(3, range(1, 9)):
            word = Map(3, row.offset).parity_word(row.least, row.length)
            largest = max(rotations(word))
            determinant = 2**row.length - 3**row.odd
            found.setdefault(row.length, set()).add(Fraction(beta(largest, 3), determinant))
        found[1].add(Fraction(0))
        published = [Fraction(n, d) for n, d in zip(NUMERATORS, DENOMINATORS, strict=True)]
        start = 0
        for length in range(1, 8):
            count = len(found[length])
            assert set(published[start : start + count]) == found[length]
            start += count
        assert set(published[start:]) < found[8]
        assert len(found[8]) == 30

    @pytest.mark.parametrize("length", OFFSETS_BY_LENGTH)
    def test_belong_to_the_published_offsets(self, length):
        counts = {}
        for odd in range(1, length + 1):
            for offset, count in offset_counts(3, length, odd).items():
                counts[offset] = counts.get(offset, 0) + count
        assert dict(sorted(counts.items())) == OFFSETS_BY_LENGTH[length]

    def test_number_one_for_each_lyndon_word(self):
        """Sums over the odd counts, less the word 0 of length 1. Source: OEIS A001037."""
        published = [2, 1, 2, 3, 6, 9, 18, 30, 56, 99, 186, 335, 630, 1161, 2182, 4080]
        for length, expected in enumerate(published, start=1):
            total = sum(sum(offset_counts(5, length, odd).values()) for odd in range(1, length + 1))
            assert total == expected - (length == 1)

    def test_least_offset_of_each_length_is_the_published_one(self, small_offsets):
        for length, expected in zip(range(2, 25), LEAST_OFFSETS, strict=False):
            offsets = [row.offset for row in small_offsets if row.length == length and row.offset > 0]
            assert min(offsets) == expected

    @pytest.mark.parametrize("offset", PUBLISHED)
    def test_of_an_offset_are_the_published_ones(self, small_offsets, offset):
        found = [(row.least, row.length, row.odd) for row in small_offsets if row.offset == offset]
        assert sorted(found) == sorted(PUBLISHED[offset])

    def test_pass_iteration_and_are_primitive(self, small_offsets):
        for row in small_offsets:
            cycle = Cycle(3, row.offset, row.least, row.length)
            assert cycle.is_primitive
            assert cycle.odd == row.odd

    @pytest.mark.parametrize("multiplier", [3, 5, 7, 15])
    def test_up_to_a_bound_are_those_of_all_offsets_cut_there(self, multiplier):
        everything = list(primitive_cycles(multiplier, range(1, 15)))
        for most in (1, 30, 1000):
            cut = list(primitive_cycles(multiplier, range(1, 15), offsets_at_most=most))
            assert sorted(cut) == sorted(row for row in everything if abs(row.offset) <= most)

    def test_of_all_shares_are_all(self):
        shares = [primitive_cycles(3, range(1, 15), None, 1000, Share(i, 3)) for i in range(3)]
        whole = list(primitive_cycles(3, range(1, 15), None, 1000))
        assert sorted(row for rows in shares for row in rows) == sorted(whole)

    def test_can_be_limited_to_some_odd_counts(self):
        rows = list(primitive_cycles(3, [8, 11], [5, 7, 9]))
        assert {(row.length, row.odd) for row in rows} == {(8, 5), (8, 7), (11, 5), (11, 7), (11, 9)}

    def test_come_as_a_stream(self):
        """The first of 2.5·10^12 words of length 50 arrives without a wait for the last."""
        first = next(primitive_cycles(3, [50], [25]))
        assert (first.length, first.odd) == (50, 25)


class TestMethod:
    @pytest.mark.parametrize(
        ("cell", "least"),
        [
            (Cell(3, 5, 5, 3), (19, 23)),
            (Cell(3, 25, 5, 3), (95, 115)),
            (Cell(3, 5, 3, 1), (1,)),
            (Cell(3, 5, 5, 3, above=19), (23,)),
            (Cell(3, -5, 5, 3), ()),
            (Cell(3, 1, 4, 2), ()),
            (Cell(3, 5, 27, 17), (187, 347)),
            (Cell(3, 13, 24, 15), (131,)),
        ],
        ids=str,
    )
    def test_lists_cells(self, cell, least):
        """Multiples of cycles of a divisor of d included. Source: OEIS A226607, A226609, A226610, A226613."""
        answer = run(cell)
        assert answer.complete
        assert answer.least == least

    def test_pieces_together_are_the_whole(self):
        cell = Cell(3, 499, 16, 10)
        whole = run(cell)
        for count in (2, 5):
            results = []
            for index in range(count):
                (piece,) = ENGINE.pieces((cell,), 60.0)
                part = type(piece)(piece.method, piece.cells, index, count)
                results.append(ENGINE.run(pickle.loads(pickle.dumps(part)), Budget()))
            (answer,) = merged((cell,), results)
            assert answer.least == whole.least

    def test_long_work_is_cut_into_pieces_of_the_wanted_length(self):
        cell = Cell(3, 5, 36, 22)
        pieces = ENGINE.pieces((cell,), ENGINE.estimate([cell]) / 7.5)
        assert len(pieces) == 8
        assert [piece.index for piece in pieces] == list(range(8))

    def test_groups_cells_by_map(self):
        cells = [Cell(3, 5, 5, 3), Cell(3, 7, 4, 2), Cell(3, 5, 3, 1)]
        assert ENGINE.batches(cells) == [(cells[0], cells[2]), (cells[1],)]

    def test_kept_words_and_a_fresh_enumeration_agree(self, monkeypatch):
        cells = [Cell(3, 499, 16, 10), Cell(3, 35, 8, 4), Cell(3, 175, 8, 4), Cell(5, -3, 3, 2)]
        kept = [run(cell) for cell in cells]
        monkeypatch.setattr(census, "_KEPT_WORDS", 0)
        assert [run(cell).least for cell in cells] == [answer.least for answer in kept]

    def test_wide_numbers_are_checked_with_python_integers(self):
        """181·β passes 2^63 for length 14 with 8 odd steps."""
        frame = Frame(181, 14, 8)
        assert not frame.fits_word()
        determinant = frame.determinant
        assert len(run(Cell(181, determinant, 14, 8)).least) == lyndon_count(14, 8)

    @pytest.mark.parametrize(
        ("cell", "reason"),
        [
            (Cell(3, 1, 100_000, 1000), "length"),
            (Cell(3, 1, 60, 37), "words"),
            (Cell(3, 2**33 - 3**20, 33, 20), "cycles"),
        ],
        ids=str,
    )
    def test_says_which_cells_it_refuses_and_why(self, cell, reason):
        assert reason in ENGINE.refusal(cell)
        assert ENGINE.estimate([cell]) == inf

    def test_takes_the_empty_cells_of_the_wrong_sign(self):
        cell = Cell(3, -1, 60, 37)
        assert ENGINE.refusal(cell) is None
        assert run(cell).least == ()

    def test_ends_as_incomplete_when_the_time_is_over(self):
        (piece,) = ENGINE.pieces((Cell(3, 5, 40, 25),), 1e9)
        result = ENGINE.run(piece, Budget(seconds=0.05))
        assert not result.complete
        assert "time" in result.reason

    def test_ends_as_incomplete_when_the_cycles_outgrow_the_memory(self):
        cell = Cell(3, 6487, 16, 10)
        (piece,) = ENGINE.pieces((cell,), 60.0)
        result = ENGINE.run(piece, Budget(memory=3000))
        assert not result.complete
        assert "more than 10 cycles" in result.reason

    def test_reports_hits_in_order(self):
        (piece,) = Census().pieces((Cell(3, 5, 5, 3),), 1.0)
        assert ENGINE.run(piece, Budget()).hits == (Hit(5, 3, 19), Hit(5, 3, 23))

    def test_reports_hits_above_the_bound_only(self):
        (piece,) = ENGINE.pieces((Cell(3, 5, 5, 3, above=19),), 1.0)
        assert ENGINE.run(piece, Budget()).hits == (Hit(5, 3, 23),)


def test_offsets_of_a_frame_multiply_to_the_imprimitive_cycles():
    """The cycles of an offset are the primitive ones of its divisors; (3, 8, 4) has D = 175."""
    primitive = offset_counts(3, 8, 4)
    for offset in (1, 5, 7, 25, 35, 175):
        expected = sum(count for d, count in primitive.items() if offset % d == 0)
        assert len(run(Cell(3, offset, 8, 4)).least) == expected


def test_a_wrong_number_of_visited_words_is_noticed(monkeypatch):
    block = scan.Block(np.zeros((0, 3), np.uint16), 0, 1, 4)
    monkeypatch.setattr(cycles, "screened_words", lambda *_, **__: iter([block]))
    with pytest.raises(Exception, match="visited 4 words, not all 7"):
        list(wanted_cycles(Frame(3, 8, 3)))
