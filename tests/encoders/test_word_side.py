"""The two encodings of the word side, judged by their full solution sets."""

import random
from dataclasses import replace
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pysat.solvers import Solver

from cycle_encodings._orbit_draft import windows_of
from cycle_encodings.accumulation import ENCODING as ACCUMULATION
from cycle_encodings.accumulation import Accumulation
from cycle_encodings.automata import ENCODING as AUTOMATA
from cycle_encodings.automata import Automata, live_residues, prime_powers
from cycle_encodings.serial import guarded_orbit
from solverkit.errors import InputError
from solverkit.window import Cell, Sign
from tests.encoders.judging import drawn_cells, expected_of, solution_set
from tests.strategies import cells

BOTH = [ACCUMULATION, AUTOMATA]
EXACT = Accumulation(exact=True)
CERTAIN = [Cell(3, 5, 27, 17), Cell(3, -49, 30, 19), Cell(3, 13, 46, 29), Cell(3, -3191, 45, 29), Cell(5, 8241, 84, 32)]


@pytest.mark.parametrize(
    ("encoder", "seed"), [(ACCUMULATION, 31), (AUTOMATA, 32), (EXACT, 33)], ids=["modular", "automata", "exact"]
)
def test_solution_sets_of_250_random_cells_equal_brute_force(encoder, seed):
    total, signs, raw = 0, set(), 0
    for cell, expected in drawn_cells(250, seed):
        encoding = encoder.encode(cell)
        assert solution_set(encoding.clauses, encoding) == expected, cell
        total += len(expected)
        signs.add(cell.offset > 0)
        raw += bool(expected) and cell.determinant % cell.offset != 0
    assert total > 300
    assert len(signs) == 2
    assert raw >= 5, "cells with cycles whose offset does not divide D"


@settings(max_examples=80)
@given(cells(longest=10), st.booleans(), st.booleans(), st.booleans(), st.integers(0, 70))
def test_options_of_accumulation_change_the_formula_but_not_its_solutions(cell, exact, suffixes, closing, extra):
    expected = expected_of(cell)
    if len(expected) < 100:
        encoding = Accumulation(exact, extra, suffixes, closing or not exact).encode(cell)
        assert solution_set(encoding.clauses, encoding) == expected


@settings(max_examples=60)
@given(cells(longest=10), st.sampled_from([3, 7, 16, 100, 1000, 4096]))
def test_the_largest_modulus_changes_the_formula_but_not_its_solutions(cell, largest):
    expected = expected_of(cell)
    if len(expected) < 100:
        encoding = Automata(largest).encode(cell)
        assert solution_set(encoding.clauses, encoding) == expected


@pytest.mark.parametrize("encoder", BOTH, ids=lambda encoder: encoder.name)
@given(cell=cells(longest=10))
def test_the_same_cell_gives_the_same_formula(encoder, cell):
    assert encoder.encode(cell) == encoder.encode(replace(cell))
    assert encoder.encode(cell).digest() == type(encoder)().encode(cell).digest()


@pytest.mark.parametrize(
    "encoder", [*BOTH, Accumulation(exact=True, closing=False)], ids=["modular", "automata", "exact"]
)
@given(cell=cells(longest=10))
def test_groups_name_every_clause_once(encoder, cell):
    encoding = encoder.encode(cell)
    covered = sorted(i for ranges in encoding.groups.values() for start, stop in ranges for i in range(start, stop))
    assert covered == list(range(len(encoding.clauses)))
    assert all(1 <= abs(literal) <= encoding.variables for clause in encoding.clauses for literal in clause)


ORBIT_GROUPS = {"constants", "step", "closing", "odd count", "order", "lower bound", "upper bound", "ranges"}


@pytest.mark.parametrize(
    ("encoder", "groups"),
    [
        (Accumulation(), ORBIT_GROUPS | {"word", "join"}),
        (Accumulation(exact=True, closing=False), ORBIT_GROUPS - {"closing"} | {"word", "join"}),
        (Automata(71), ORBIT_GROUPS | {"automata"}),
        (Automata(70), ORBIT_GROUPS),
    ],
)
def test_groups_are_the_named_conditions(encoder, groups):
    """D = 2^27 − 3^17 = 5·71·14303, so an automaton needs 71 residues."""
    assert set(encoder.encode(Cell(3, 5, 27, 17, above=3)).groups) == groups


@pytest.mark.parametrize("suffixes", [False, True])
@pytest.mark.parametrize(
    ("group", "cell"),
    [
        ("step", Cell(3, 35, 8, 4)),
        ("word", Cell(3, 13, 8, 5, above=1)),
        ("join", Cell(3, 13, 8, 5, above=1)),
        ("order", Cell(3, 35, 8, 4)),
        ("odd count", Cell(3, -85, 12, 8)),
    ],
)
def test_a_condition_left_out_is_missed_when_the_closing_is_left_to_the_word_side(group, cell, suffixes):
    """The ranges and the upper bound, which follow from the other conditions, are left out too."""
    encoding = Accumulation(exact=True, suffixes=suffixes, closing=False).encode(cell)
    assert solution_set(_without(encoding, {group, "ranges", "upper bound"}), encoding, most=400) != expected_of(cell)


def _without(encoding, groups):
    kept = [ranges for name, ranges in encoding.groups.items() if name not in groups]
    return [clause for ranges in kept for start, stop in ranges for clause in encoding.clauses[start:stop]]


@settings(max_examples=30)
@given(cells(longest=9), st.booleans())
def test_ranges_upper_bound_and_closing_follow_from_the_other_groups(cell, suffixes):
    expected, encoding = expected_of(cell), Accumulation(exact=True, suffixes=suffixes).encode(cell)
    if len(expected) < 60 and "word" in encoding.groups:
        assert solution_set(_without(encoding, {"ranges", "upper bound", "closing"}), encoding) == expected


def drawn_words(cell, count, seed):
    """(word, β) of random words that stay on the admissible states."""
    rng, windows = random.Random(seed), windows_of(cell)
    while count:
        word, beta = [1] + [int(rng.random() < cell.odd / cell.length) for _ in range(cell.length - 1)], 0
        if all((i, sum(word[:i])) in windows.rooms for i in range(cell.length + 1)):
            for place, odd in enumerate(word):
                beta = cell.multiplier * beta + (1 << place) if odd else beta
            count -= 1
            yield word, beta


def parities_as_literals(encoding, word):
    number = {name: number for number, name in encoding.names.items()}
    return [number[f"n[{i}].0"] if odd else -number[f"n[{i}].0"] for i, odd in enumerate(word)]


@pytest.mark.parametrize("suffixes", [False, True])
def test_word_and_join_alone_state_the_cycle_equation(suffixes):
    """With n_0 and the parities fixed, and neither step nor closing stated, n_0·D = d·β decides."""
    cell, rng, verdicts = Cell(3, -217, 9, 6), random.Random(5), set()
    encoding = Accumulation(exact=True, suffixes=suffixes, closing=False).encode(cell)
    clauses = _without(encoding, {"step", "order", "ranges", "lower bound", "upper bound"})
    with Solver(name="glucose4", bootstrap_with=clauses) as oracle:
        for word, beta in drawn_words(cell, 100, seed=6):
            quotient = Fraction(cell.offset * beta, cell.determinant)
            least = int(quotient) // 2 * 2 + rng.choice([1, 1, 3])
            if least < 1 << len(encoding.least_bits):
                bits = [b if least >> place & 1 else -b for place, b in enumerate(encoding.least_bits)]
                verdict = oracle.solve(assumptions=parities_as_literals(encoding, word) + bits)
                assert verdict == (least == quotient)
                verdicts.add(verdict)
    assert verdicts == {False, True}


@pytest.mark.parametrize(("suffixes", "extra"), [(False, 0), (True, 0), (False, 5), (True, 30)])
def test_modular_word_and_join_alone_state_a_congruence(suffixes, extra):
    """With n_0 and the parities fixed, n_0·D ≡ d·β mod 2^b decides; b beyond k makes it the equation."""
    cell, rng, verdicts = Cell(3, 259, 12, 6), random.Random(8), set()
    encoding = Accumulation(suffixes=suffixes, extra=extra).encode(cell)
    modulus = 1 << (len(encoding.least_bits) + extra)
    clauses = _without(encoding, set(encoding.groups) - {"constants", "odd count", "word", "join"})
    with Solver(name="glucose4", bootstrap_with=clauses) as oracle:
        for word, beta in drawn_words(cell, 200, seed=9):
            residue = cell.offset * beta * pow(cell.determinant, -1, modulus) % modulus
            least = (residue ^ rng.choice([0, 0, 2])) % (1 << len(encoding.least_bits))
            bits = [b if least >> place & 1 else -b for place, b in enumerate(encoding.least_bits)]
            verdict = oracle.solve(assumptions=parities_as_literals(encoding, word) + bits)
            assert verdict == (least == residue)
            verdicts.add(verdict)
    assert verdicts == {False, True}


def test_an_automaton_alone_states_that_beta_is_a_multiple_of_its_modulus():
    cell, verdicts = Cell(3, 259, 12, 6), set()
    assert prime_powers(cell, 256) == (13,)
    encoding = Automata().encode(cell)
    clauses = _without(encoding, set(encoding.groups) - {"constants", "odd count", "automata"})
    with Solver(name="glucose4", bootstrap_with=clauses) as oracle:
        for word, beta in drawn_words(cell, 100, seed=7):
            verdict = oracle.solve(assumptions=parities_as_literals(encoding, word))
            assert verdict == (beta % 13 == 0)
            verdicts.add(verdict)
    assert verdicts == {False, True}


@settings(max_examples=60)
@given(cells(longest=16), st.integers(3, 300))
def test_prime_powers_are_the_largest_that_divide_the_reduced_determinant(cell, largest):
    rest, common = abs(cell.determinant), abs(cell.offset)
    share = Fraction(rest, common).numerator
    expected = []
    for prime in (p for p in range(2, largest + 1) if all(p % f for f in range(2, p))):
        powers = [prime**e for e in range(1, 9) if prime**e <= largest and share % prime**e == 0]
        expected += powers[-1:]
    assert prime_powers(cell, largest) == tuple(expected)


@settings(max_examples=40)
@given(cells(longest=9), st.sampled_from([5, 7, 11, 25, 49, 77]))
def test_live_residues_are_those_of_the_words_that_end_at_zero(cell, modulus):
    """Against every word of the admissible states."""
    windows = windows_of(cell)
    if windows.empty or cell.multiplier % 5 == 0 or any(cell.multiplier % f == 0 for f in (7, 11)):
        return
    paths = [[(0, 0, 0)]]
    for i in range(cell.length):
        paths = [
            [*path, (i + 1, j + odd, (cell.multiplier * beta + (1 << i)) % modulus if odd else beta)]
            for path in paths
            for _, j, beta in path[-1:]
            for odd in (0, 1)
            if (i + 1, j + odd) in windows.rooms
        ]
    expected = {state: set() for state in windows.rooms}
    for path in paths:
        if path[-1][2] == 0:
            for i, j, beta in path:
                expected[i, j].add(beta)
    assert live_residues(windows, modulus) == expected


@pytest.mark.parametrize(
    "encoder",
    [*BOTH, EXACT, Accumulation(suffixes=True, extra=20), Automata(1000)],
    ids=["modular", "automata", "exact", "wide", "large"],
)
def test_rough_size_is_within_a_factor_of_three(encoder):
    for cell in [*CERTAIN, Cell(3, 22156223, 99, 27), Cell(15, 2**40 + 1, 60, 10), Cell(13, 2**30 - 1, 14, 3)]:
        assert 1 / 3 < encoder.size(cell) / len(encoder.encode(cell).clauses) < 3


def odd_starts(windows, step):
    """Odd counts before a step from which it can be odd."""
    return [j for j in windows.odd_counts(step) if (step + 1, j + 1) in windows.rooms]


def added(encoder, cell):
    """(variables, clauses of word and join or of the automata) that come on top of the orbit."""
    encoding, orbit = encoder.encode(cell), guarded_orbit(windows_of(cell)).builder
    return encoding.variables - orbit.variables, len(encoding.clauses) - len(orbit.clauses)


@pytest.mark.parametrize("cell", CERTAIN, ids=str)
def test_orbit_has_about_the_size_that_the_module_states(cell):
    windows, q, k = windows_of(cell), cell.multiplier, cell.length
    draft = guarded_orbit(windows)
    width = sum(map(len, draft.elements[:-1])) / k
    states = sum(len(windows.odd_counts(i)) for i in range(k)) / k
    assert 0.7 < draft.builder.variables / (k * width * (q + 3)) < 1.2
    assert 0.7 < len(draft.builder.clauses) / (k * (width * (7 * q + 4 + states) + 8 * states)) < 1.2


@pytest.mark.parametrize("suffixes", [False, True])
@pytest.mark.parametrize("cell", CERTAIN, ids=str)
def test_modular_word_has_at_most_the_size_that_the_module_states(cell, suffixes):
    windows = windows_of(cell)
    bits = windows.elements(0).high.bit_length()
    counts = [len(odd_starts(windows, i)) for i in range(min(bits, cell.length))]
    variables, clauses = added(Accumulation(suffixes=suffixes), cell)
    most = sum((bits - i) * (count + 21) for i, count in enumerate(counts)) + 2 * bits
    assert 0.2 * most < clauses <= most
    assert variables <= sum(3 * (bits - i) for i in range(len(counts)))


@pytest.mark.parametrize("suffixes", [False, True])
@pytest.mark.parametrize("cell", CERTAIN, ids=str)
def test_exact_word_has_at_most_the_size_that_the_module_states(cell, suffixes):
    windows, q, k, x = windows_of(cell), cell.multiplier, cell.length, cell.odd
    variables = clauses = 0
    for i in range(k):
        starts = odd_starts(windows, i)
        height = (q ** (x - 1 - starts[0])).bit_length() if starts else 0
        if suffixes:
            width = max(windows.rooms[i, j].gamma.high for j in windows.odd_counts(i)).bit_length()
        else:
            after = windows.odd_counts(i + 1)
            width = max(q ** (x - j) * windows.rooms[i + 1, j].beta.high for j in after).bit_length() - i
        variables += height + 2 * width
        clauses += height * (len(starts) + 14) + 7 * width
    ratio = Fraction(abs(cell.determinant), abs(cell.offset))
    share = (windows.elements(0).high // ratio.denominator).bit_length()
    adders = ratio.numerator.bit_count() + ratio.denominator.bit_count() - 1 - (ratio.denominator > 1)
    got_variables, got_clauses = added(Accumulation(exact=True, suffixes=suffixes), cell)
    assert 0.5 * (clauses + 20 * adders * share) < got_clauses < clauses + 20 * adders * share
    assert 0.5 * (variables + 2 * adders * share) < got_variables < variables + 2 * adders * share


@pytest.mark.parametrize("cell", [*CERTAIN, Cell(7, -803517, 24, 12), Cell(5, 2913, 72, 30)], ids=str)
def test_automata_have_the_size_that_the_module_states(cell):
    windows, variables, most = windows_of(cell), 0, 0
    for modulus in prime_powers(cell, 100):
        live = live_residues(windows, modulus)
        for i in range(cell.length + 1):
            counts = windows.odd_counts(i)
            residues = len(set().union(*(live[i, j] for j in counts)))
            variables += residues if residues > 1 else 0
            most += 1 + len(counts) + 5 * residues
    got_variables, got_clauses = added(Automata(100), cell)
    assert got_variables == variables
    assert 0.7 * most <= got_clauses <= most


@pytest.mark.parametrize("encoder", BOTH, ids=lambda encoder: encoder.name)
def test_rough_size_of_a_huge_cell_is_an_integer(encoder):
    """k = 20,000 with a bound of 20,000 bits; nothing of that size is built."""
    size = encoder.size(Cell(3, 2**20000 - 3**12000, 20000, 12000))
    assert type(size) is int
    assert size > 10**11


@pytest.mark.parametrize("encoder", BOTH, ids=lambda encoder: encoder.name)
def test_negative_elements_are_refused(encoder):
    with pytest.raises(InputError, match="cell"):
        encoder.encode(Cell(3, 1, 3, 2, sign=Sign.NEGATIVE))


@pytest.mark.parametrize("largest", [2, 4097, True, 64.0])
def test_a_largest_modulus_outside_its_range_is_refused(largest):
    with pytest.raises(InputError, match="largest"):
        Automata(largest)


def test_options_of_accumulation_outside_their_ranges_are_refused():
    with pytest.raises(InputError, match="extra"):
        Accumulation(extra=-1)
    with pytest.raises(InputError, match="closing"):
        Accumulation(closing=False)
