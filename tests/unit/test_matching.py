"""The parts of word matching, each against the definition it replaces, and the engine on published cycles."""

from itertools import combinations
from math import comb, gcd

import numpy as np
import pytest

from solverkit.engines import _matching_buckets as buckets
from solverkit.engines import _matching_plan as plans
from solverkit.engines import matching
from solverkit.engines._matching_enumeration import ballot_words
from solverkit.engines._matching_fractions import fractions, slack, unit
from solverkit.engines._matching_halves import Half, HalfWords, build
from solverkit.engines._matching_split import Split, best_split
from solverkit.engines._matching_substitution import modulus, substituted
from solverkit.engines.matching import ENGINE
from solverkit.errors import CapacityError, ContradictionError
from solverkit.methods import Budget, Hit, Piece, merged
from solverkit.registry import load
from solverkit.window import Cell, Sign
from solverkit.words import beta, lyndon_words, rotations
from tests.published import published
from tests.reference import cycles_of_cell

CIRCLE = buckets.CIRCLE


def letters(word, length):
    return "".join(str(word >> j & 1) for j in range(length))


def least_elements(cell, count=1, budget=None):
    results = [ENGINE.run(Piece("matching", (cell,), i, count), budget or Budget()) for i in range(count)]
    (listing,) = merged((cell,), results)
    assert listing.complete, listing.reason
    return list(listing.least)


@pytest.fixture(params=["enumerated", "sorted", "streamed"])
def way(request, monkeypatch):
    """Take this rung of the ladder for every cell of at least two steps."""
    if request.param != "enumerated":
        monkeypatch.setattr(plans, "_FEW_WORDS", 0)
        monkeypatch.setattr(plans, "_SHORT_HALF", 1 << 40 if request.param == "sorted" else -1)
    plans.plan.cache_clear()
    yield request.param
    plans.plan.cache_clear()


@pytest.fixture
def streamed(monkeypatch):
    """Stream every cell, in small buckets."""
    monkeypatch.setattr(plans, "_FEW_WORDS", 0)
    monkeypatch.setattr(plans, "_SHORT_HALF", -1)
    monkeypatch.setattr(buckets, "_BUCKET", 50)
    monkeypatch.setattr(buckets, "_RUN", 1)
    plans.plan.cache_clear()
    yield
    plans.plan.cache_clear()


def test_ballot_words_meet_every_necklace_and_number_c_k_x_over_k_when_coprime():
    for k in range(1, 11):
        for x in range(1, k + 1):
            words = [letters(word, k) for word in ballot_words(k, x)]
            assert len(set(words)) == len(words)
            if gcd(k, x) == 1:
                assert len(words) == comb(k, x) // k
            met = {min(rotations(word)) for word in words}
            assert met == {min(rotations("".join("1" if i in places else "0" for i in range(k))))
                           for places in combinations(range(k), x)}  # fmt: skip


def test_every_aperiodic_word_has_a_rotation_of_the_shape_of_every_split():
    for k in range(2, 12):
        for x in range(1, k):
            for m in range(1, k):
                for c in {m * x // k, -(-m * x // k) - 1}:
                    for word in lyndon_words(k, x):
                        assert any(
                            turned[0] == "0" and turned[m] == "1" and turned[:m].count("1") == c
                            for turned in rotations(word)
                        ), (word, m, c)


def test_the_best_split_counts_its_words():
    for k, x in ((2, 1), (5, 4), (11, 7), (12, 8), (64, 40), (72, 45), (77, 3)):
        split = best_split(k, x)
        heads = [0] if split.left_length == 1 else combinations(range(1, split.left_length), split.left_odd)
        assert k > 20 or split.left_count == len(list(heads))
        assert split.elements <= Split(k, x, k // 2, (k // 2) * x // k).elements


@pytest.mark.parametrize(
    ("q", "k", "x"), [(3, 11, 7), (5, 12, 5), (3, 40, 25), (181, 45, 6), (3, 200, 126), (7, 130, 46)]
)
def test_a_sum_of_fractions_is_within_half_the_odd_count_of_the_exact_fraction(q, k, x):
    cell = Cell(q, 1 if 2**k > q**x else -1, k, x)
    table, size = fractions(cell), modulus(cell)
    for word in rotations(letters(next(iter(ballot_words(k, x))), k)):
        places = [j for j in range(k) if word[j] == "1"]
        total = sum(int(table[i, j]) for i, j in enumerate(places))
        exact = unit(cell) * beta(word, q) % size * CIRCLE
        error = (total * size - exact + size * CIRCLE // 2) % (size * CIRCLE) - size * CIRCLE // 2
        assert 2 * abs(error) <= x * size
        assert slack(x) == x // 2


def two_odd_steps(steps):
    """A cell with D' = 2^(steps − 1) − 1 and the word of a cycle in it, of odd elements 13 and 11.

    q·13 + d = 2^steps·11 and q·11 + d = 2·13, solved for q and d.
    """
    multiplier = (11 << steps - 1) - 13
    cell = Cell(multiplier, (11 << steps) - multiplier * 13, steps + 1, 2)
    return cell, 1 | 1 << steps


@pytest.mark.parametrize("steps", [30, 61, 62, 63, 64, 65, 66, 125, 126, 127, 128, 129, 130, 200])
def test_fractions_of_a_word_that_divides_sum_to_nearly_zero_whatever_the_size_of_the_modulus(steps):
    cell, word = two_odd_steps(steps)
    table = fractions(cell)
    total = (int(table[0, 0]) + int(table[1, steps])) % CIRCLE
    assert beta(letters(word, cell.length), cell.multiplier) % modulus(cell) == 0
    assert modulus(cell) == 2 ** (steps - 1) - 1
    assert min(total, CIRCLE - total) <= slack(2)


HALVES = [
    HalfWords(1, 9, 0, 4),
    HalfWords(3, 15, 2, 5),
    HalfWords(1, 1, 0, 0),
    HalfWords(4, 10, 1, 6),
    HalfWords(2, 9, 0, 0),
]


@pytest.mark.parametrize("words", HALVES)
@pytest.mark.parametrize("most", [1, 7, 10_000])
def test_a_half_has_the_sums_of_its_words_whatever_the_length_of_its_lists(words, most):
    rng = np.random.default_rng(7)
    weights = rng.integers(0, 1 << 64, (12, 16), np.uint64)
    half = build(words, weights, 99, most)
    expected = {}
    for places in combinations(range(words.start, words.stop), words.ones):
        total = 99 + sum(int(weights[words.index + i, j]) for i, j in enumerate(places))
        expected[sum(1 << j for j in places)] = total % CIRCLE
    everywhere = [(s, p) for s in range(len(half.base)) for p in range(half.first[s], half.end[s])]
    found = half.words_at(everywhere)
    sums = {found[s, p]: (int(half.base[s]) + int(half.values[p])) % CIRCLE for s, p in everywhere}
    assert sums == expected
    assert half.count() == len(expected) == len(everywhere)
    for bound in (0, 1, CIRCLE // 3, CIRCLE - 1, CIRCLE):
        assert half.below(bound) == sum(value < bound for value in expected.values())


def test_substitution_refuses_repeated_words_wrong_words_and_what_is_not_above_the_bound():
    assert substituted(Cell(3, 1, 2, 1), 0b01) == Hit(2, 1, 1)
    assert substituted(Cell(3, 1, 4, 2), 0b0101) is None
    assert substituted(Cell(3, 5, 5, 3), 0b00111) == Hit(5, 3, 19)
    assert substituted(Cell(3, 5, 5, 3, above=19), 0b00111) is None
    assert substituted(Cell(3, 7, 5, 3), 0b00111) is None
    assert substituted(Cell(3, -5, 5, 3), 0b00111) is None


@pytest.mark.parametrize("name", ["CY-12", "CY-13", "CY-23"])
def test_published_primitive_cycles_of_3x_plus_d_are_found(name, way):
    """OEIS A226607, A226609, A226610, A226613; Belaga & Mignotte (2000, 2006), as listed in the data file."""
    offset = {"CY-12": 5, "CY-13": 7, "CY-23": 37}[name]
    for least, length, odd in published(name)["cycles"]:
        assert least in least_elements(Cell(3, offset, length, odd)), way


def test_classical_cycles_are_found(way):
    """3x+1: Böhm & Sontacchi (1978), Lagarias (1985); 5x+1 and 181x+1: Crandall (1978), from memory."""
    assert least_elements(Cell(3, -1, 11, 7)) == [17]
    assert least_elements(Cell(3, 1, 27, 17)) == []
    assert least_elements(Cell(5, 1, 7, 3)) == [13, 17]
    assert least_elements(Cell(181, 1, 15, 2)) == [27, 35]
    assert least_elements(Cell(3, 5, 27, 17)) == [187, 347]


@pytest.mark.parametrize("steps", [30, 61, 62, 63, 64, 65, 125, 126, 127, 128, 129, 200])
def test_a_planted_cycle_is_found_at_the_borders_of_machine_words(steps, way):
    cell, word = two_odd_steps(steps)
    assert substituted(cell, word) == Hit(steps + 1, 2, 11)
    assert least_elements(cell) == cycles_of_cell(cell.multiplier, cell.offset, cell.length, 2)
    assert 11 in least_elements(cell)


@pytest.mark.parametrize(("q", "k", "x"), [(3, 10, 6), (3, 16, 10), (5, 12, 5), (7, 14, 5), (3, 12, 8)])
def test_when_d_is_the_determinant_every_aperiodic_word_is_a_cycle(q, k, x, way):
    cell = Cell(q, 2**k - q**x, k, x)
    assert len(least_elements(cell)) == sum(1 for _ in lyndon_words(k, x))


def test_offsets_need_not_be_reduced(way):
    for factor in (7, 2**64 + 1, 2**127 - 1):
        cell = Cell(3, 5 * factor, 27, 17)
        assert gcd(factor, cell.determinant) == 1
        assert least_elements(cell) == [187 * factor, 347 * factor]


def test_the_bound_and_the_sign_exclude(way):
    assert least_elements(Cell(3, 5, 27, 17, above=187)) == [347]
    assert least_elements(Cell(3, 5, 27, 17, above=347)) == []
    assert least_elements(Cell(3, -5, 27, 17)) == []


@pytest.mark.parametrize("count", [1, 2, 3, 7])
def test_the_pieces_of_a_cell_have_its_list_and_compare_every_half_word_once(count, streamed):
    cell = Cell(3, 5, 27, 17)
    split = best_split(27, 17)
    results = [ENGINE.run(Piece("matching", (cell,), i, count), Budget()) for i in range(count)]
    assert {hit.least for result in results for hit in result.hits} == {187, 347}
    assert sum(result.statistics["left"] for result in results) == split.left_count
    assert sum(result.statistics["right"] for result in results) == split.right_count


def test_buffers_and_pools_that_are_too_small_grow(streamed, monkeypatch):
    grown = []
    for name in ("enlarge", "enlarge_pool"):
        method = getattr(buckets._Side, name)
        monkeypatch.setattr(buckets._Side, name, lambda side, m=method, n=name: (grown.append(n), m(side))[1])
    make = buckets._Side.__init__

    def make_tiny(side, *arguments):
        make(side, *arguments)
        side.buffer, side.carry = side.buffer[:20], side.carry[:1]
        side.pool, side.places = side.pool[:2], side.places[:2]

    monkeypatch.setattr(buckets._Side, "__init__", make_tiny)
    cell = Cell(3, 2**16 - 3**10, 16, 10)
    assert least_elements(cell, 2) == cycles_of_cell(3, cell.offset, 16, 10)
    assert {"enlarge", "enlarge_pool"} == set(grown)


def test_a_sum_that_is_lost_is_noticed(streamed, monkeypatch):
    below = Half.below
    monkeypatch.setattr(Half, "below", lambda half, bound: below(half, bound) + (bound > 0))
    with pytest.raises(ContradictionError, match="were compared where"):
        ENGINE.run(Piece("matching", (Cell(3, 5, 27, 17),)), Budget())


def test_a_bucket_that_memory_does_not_hold_ends_a_piece_as_incomplete(streamed, monkeypatch):
    monkeypatch.setattr(matching, "_LEAST_ROOM", 10)
    make = buckets._Side.__init__

    def make_tiny(side, *arguments):
        make(side, *arguments)
        side.buffer = side.buffer[:20]

    monkeypatch.setattr(buckets._Side, "__init__", make_tiny)
    result = ENGINE.run(Piece("matching", (Cell(3, 5, 27, 17),)), Budget(memory=1))
    assert not result.complete
    assert "memory" in result.reason


def test_when_time_is_over_a_piece_is_incomplete_and_says_so(way):
    cell = Cell(3, 1, 27, 17)
    result = ENGINE.run(Piece("matching", (cell,)), Budget(seconds=-1.0))
    assert not result.complete
    assert "time" in result.reason


def test_too_many_matches_end_a_piece_as_incomplete_but_few_words_are_always_tried(way, monkeypatch):
    monkeypatch.setattr(matching, "_MOST_PAIRS", 20)
    result = ENGINE.run(Piece("matching", (Cell(3, 2**16 - 3**10, 16, 10),)), Budget())
    assert result.complete == (way == "enumerated")
    assert way == "enumerated" or "more than" in result.reason


def test_little_memory_gives_the_same_list(streamed):
    assert least_elements(Cell(3, 5, 27, 17), budget=Budget(memory=1)) == [187, 347]


def test_pieces_grow_fewer_with_their_duration_and_are_the_same_each_time():
    cell = Cell(3, 1, 80, 50)
    counts = [len(ENGINE.pieces((cell,), seconds)) for seconds in (0.001, 5.0, 20.0, 1e9)]
    assert counts == sorted(counts, reverse=True)
    assert counts[0] > 3
    assert counts[-1] == 1
    assert ENGINE.pieces((cell,), 5.0) == ENGINE.pieces((cell,), 5.0)


@pytest.mark.parametrize(
    ("cell", "reason"),
    [
        (Cell(3, 1, 8, 5, sign=Sign.NEGATIVE), "negative"),
        (Cell(3, 1, 114208327604, 72057431991), "over 5000"),
        (Cell(3, 1, 200, 126), "half words"),
        (Cell(3, 2**60 - 3**37, 60, 37), "too many cycles are expected"),
    ],
)
def test_a_refusal_gives_its_reason_and_running_anyway_raises(cell, reason):
    assert reason in ENGINE.refusal(cell)
    assert ENGINE.estimate([cell]) == float("inf")
    with pytest.raises(CapacityError, match=reason):
        ENGINE.pieces((cell,), 1.0)


def test_a_cell_of_the_wrong_sign_is_answered_at_once():
    cell = Cell(3, -1, 84, 52)
    assert ENGINE.estimate([cell]) < 0.01
    assert least_elements(cell) == []


@pytest.mark.slow
@pytest.mark.parametrize(
    ("cell", "number"), [(Cell(3, 47351, 60, 37), 23), (Cell(3, 2495, 64, 40), 2), (Cell(3, 1041197, 68, 42), 367)]
)
def test_long_cells_of_real_size_agree_with_the_sweep(cell, number):
    sweep = load("engines", "sweep")
    (batch,) = sweep.batches([cell])
    (listing,) = merged(batch, [sweep.run(piece, Budget()) for piece in sweep.pieces(batch, 60.0)])
    assert listing.complete
    assert least_elements(cell, 2) == list(listing.least)
    assert len(listing.least) == number
