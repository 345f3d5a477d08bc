"""Explanations: minimal cores, judged by another solver and by iterating the map from every first element."""

import random
from dataclasses import replace
from itertools import combinations

import pytest
from pysat.solvers import Solver

from cycle_encodings.grouped import ENCODING
from solverkit.exact.bounds import balanced_bound, product_bound
from solverkit.exact.reduction import reduced
from solverkit.explain.arithmetic import arithmetic_exclusion
from solverkit.explain.cores import GROUPS, Oracle, condition_holds, minimal_cores
from solverkit.explain.explanation import Explanation, explained
from solverkit.explain.reach import greatest, reach_of, smallest, speaks_of_every_number
from solverkit.explain.words import sentences
from solverkit.findings import Verdict
from solverkit.window import Cell, Sign
from tests.reference import conditions_met, cycles_of_cell

# Empty cells that arithmetic does not exclude, as windows state them; some reduce to d = ±1, some to d | D.
EMPTY = [
    Cell(3, 1, 8, 5, above=1),
    Cell(3, 1, 11, 6),
    Cell(3, 1, 13, 8),
    Cell(3, 1, 24, 15),
    Cell(3, 1, 14, 9, sign=Sign.NEGATIVE),
    Cell(3, 29, 21, 13, above=100),
    Cell(3, 17, 16, 10, above=40),
    Cell(3, -1, 19, 12, above=2),
    Cell(5, 7, 12, 6, sign=Sign.NEGATIVE),
    Cell(5, -1, 9, 4),
    Cell(5, 1, 17, 7),
    Cell(7, 1, 17, 6),
    Cell(7, -3, 11, 4),
    Cell(7, 3, 20, 7),
    Cell(9, 1, 16, 5),
    Cell(9, -1, 19, 6),
    Cell(3, -5, 24, 16, above=6),
]


def hard_clauses(encoding, groups):
    return [
        clause
        for name in ("constants", *groups)
        for start, stop in encoding.groups.get(name, ())
        for clause in encoding.clauses[start:stop]
    ]


def satisfiable(encoding, groups, solver):
    """Whether some n_0 below 2^w meets the groups, by a solver that knows nothing of selectors."""
    with Solver(name=solver, bootstrap_with=hard_clauses(encoding, groups)) as oracle:
        return oracle.solve()


def meets(cell, n, groups):
    """Whether the orbit of n meets the groups."""
    return set(groups) <= conditions_met(cell, n)


def all_cores(cell):
    encoding = ENCODING.encode(cell)
    with Oracle(encoding) as oracle:
        return encoding, [(core, reach_of(oracle, core)) for core in minimal_cores(oracle)]


def small(cell):
    result = reduced(cell).cell
    assert arithmetic_exclusion(result) is None
    return result


def test_at_least_ten_empty_cells_with_every_multiplier_and_both_signs():
    assert len(EMPTY) >= 10
    assert {cell.multiplier for cell in EMPTY} == {3, 5, 7, 9}
    assert {small(cell).offset > 0 for cell in EMPTY} == {True, False}
    assert {min(c.length for c in EMPTY), max(c.length for c in EMPTY)} == {8, 24}
    assert sum(cell.length <= 17 for cell in EMPTY) >= 8
    for cell in EMPTY:
        if cell.length <= 20:
            assert cycles_of_cell(cell.multiplier, small(cell).offset, cell.length, cell.odd, small(cell).above) == []


@pytest.mark.parametrize("cell", EMPTY, ids=str)
def test_each_core_is_unsatisfiable_and_each_groups_removal_makes_it_satisfiable(cell):
    """Another solver on clauses without selectors says so; so do the witnesses, in integers."""
    cell = small(cell)
    encoding, found = all_cores(cell)
    assert found
    for core, _ in found:
        assert not satisfiable(encoding, core.groups, "cadical195")
        assert len(core.witnesses) == len(core.groups)
        for group, witness in zip(core.groups, core.witnesses, strict=True):
            others = [name for name in core.groups if name != group]
            assert all(condition_holds(cell, name, witness) for name in others)
            assert not condition_holds(cell, group, witness)
            # A witness beyond the width needs no formula.
            assert witness[0] >> len(encoding.least_bits) or satisfiable(encoding, others, "minisat22")


@pytest.mark.parametrize("cell", EMPTY, ids=str)
def test_cores_with_the_step_exclude_every_number_by_iteration(cell):
    """All n_0 below 2^w, and for cores that speak of every number further ones at random."""
    cell = small(cell)
    encoding, found = all_cores(cell)
    width = len(encoding.least_bits)
    rng = random.Random(1)
    for core, _ in found:
        if "step" in core.groups:
            assert not any(meets(cell, n, core.groups) for n in range(1 << width))
            if speaks_of_every_number(cell, core.groups, width):
                further = [rng.randrange(1 << width + 12) for _ in range(300)]
                assert not any(meets(cell, n, core.groups) for n in further)


@pytest.mark.parametrize("cell", EMPTY, ids=str)
def test_all_minimal_cores_are_found(cell):
    """Against all 64 sets of groups, one by one; those that only larger numbers meet are met."""
    cell = small(cell)
    encoding, found = all_cores(cell)
    with Oracle(encoding) as oracle:
        refuted = {
            frozenset(groups)
            for size in range(len(GROUPS) + 1)
            for groups in combinations(GROUPS, size)
            if oracle.elements(groups) is None
        }
    minimal = {groups for groups in refuted if not any(other < groups for other in refuted)}
    assert {frozenset(core.groups) for core, _ in found} == minimal
    sizes = [len(core.groups) for core, _ in found]
    assert sizes == sorted(sizes)


@pytest.mark.parametrize("cell", EMPTY[:9], ids=str)
def test_reach_is_exact_by_iteration(cell):
    cell = small(cell)
    encoding, found = all_cores(cell)
    top = 1 << len(encoding.least_bits)
    for core, reach in found:
        if "step" not in core.groups:
            continue
        rest = [group for group in core.groups if group != "lower bound"]
        admitted = [n for n in range(top) if meets(cell, n, rest)]
        assert reach.above == max(admitted, default=0)
        assert reach.above <= cell.above
        if "upper bound" in core.groups:
            rest = [group for group in core.groups if group != "upper bound"]
            beyond = [n for n in range(top) if meets(cell, n, rest)]
            assert reach.up_to == min(beyond, default=top) - 1
            assert reach.up_to >= balanced_bound(cell)


def test_extremes_of_a_set_of_conditions_are_those_of_iteration():
    rng = random.Random(4)
    for _ in range(25):
        q, k = rng.choice([3, 5, 7]), rng.randint(2, 9)
        x = rng.randint(1, k)
        cell = Cell(q, rng.randrange(-31, 32, 2), k, x, rng.choice([0, 3]))
        groups = ["step", *rng.sample(GROUPS[1:], rng.randint(0, 3))]
        encoding = ENCODING.encode(cell)
        admitted = [n for n in range(1 << len(encoding.least_bits)) if meets(cell, n, groups)]
        with Oracle(encoding) as oracle:
            assert greatest(oracle, groups) == max(admitted, default=None), (cell, groups)
            assert smallest(oracle, groups) == min(admitted, default=None), (cell, groups)


def test_no_cycle_of_the_length_is_beyond_the_width():
    """U* is the largest product bound over the odd counts, which makes 2^w enough for cores with the closing."""
    rng = random.Random(12)
    for _ in range(200):
        q, k = rng.choice([3, 5, 7, 9, 15]), rng.randint(1, 40)
        cell = Cell(q, rng.randrange(-999, 1000, 2), k, rng.randint(1, k))
        bounds = [product_bound(replace(cell, odd=y)) for y in range(1, k + 1)]
        assert max(bounds) < 1 << ENCODING.widths(cell)[0]


def test_without_the_closing_every_number_is_claimed_only_where_orbits_fall():
    """x odd steps among k with q^x < 2^(k−1): all large numbers have T^(k−1)(n) < n."""
    groups = ("step", "odd count", "order")
    assert speaks_of_every_number(Cell(3, 1, 11, 2), groups, 13)
    assert not speaks_of_every_number(Cell(3, 1, 11, 2), groups, 0)
    assert not speaks_of_every_number(Cell(3, 1, 11, 7), groups, 60)
    assert not speaks_of_every_number(Cell(3, 1, 11, 2), ("step", "order"), 60)
    for cell in (Cell(3, 5, 9, 3), Cell(5, 1, 10, 3), Cell(3, 7, 8, 4)):
        width = next(w for w in range(60) if speaks_of_every_number(cell, groups, w))
        assert not any(meets(cell, n, groups) for n in range(1 << width, (1 << width) + 4000))


def test_explanation_of_an_empty_cell_in_words():
    result = explained(Cell(3, 1, 24, 15), 60)
    assert (result.status, result.complete, result.exclusion) == (Verdict.NONE, True, None)
    assert ("step", "closing", "odd count") in [entry.core.groups for entry in result.cores]
    words = sentences(result)
    assert words[0].startswith("no cycle: the closing condition and the odd count 15 alone exclude it; ")
    assert "2^" not in words[0]
    assert not any("bound B" in line for line in words)


def test_a_bound_is_boasted_of_only_when_it_says_something():
    """B = 34 is not needed where n > 0 is; it is where a cycle lies at or below it."""
    told = sentences(explained(Cell(3, 1, 27, 17, above=34), 60))
    assert told[0] == (
        "no cycle: the closing condition and the odd count 17 alone exclude it; the order (least element first), "
        "the lower bound B = 34 and the upper bound U' = 108 were not needed"
    )
    assert told[-1] == "the same conditions exclude every n up to 163"
    needed = explained(Cell(3, 1, 8, 5, above=2), 60, all_cores=True)
    assert any("the closing condition and the lower bound B = 2 alone" in line for line in sentences(needed))
    (entry,) = [each for each in needed.cores if each.core.groups == ("step", "closing", "lower bound")]
    assert not entry.every_number
    assert entry.reach.above == 2


def test_arithmetic_is_told_first_and_needs_no_solver():
    for cell, reason, told in (
        (Cell(3, 1, 24, 20), "sign", "D = 2^24 − 3^20 = −3470007185 and d = 1 have different signs"),
        (Cell(3, 1, 8, 5, above=24), "bound", "at most U' = ⌊|d|·β*/|D|⌋ = 24"),
        (Cell(3, -1, 8, 8), "words", "repeats the word of length 1"),
        (Cell(3, 29, 16, 10, above=29 * 24), "reduction", "n = 29·m; every least m is at most U' = 24"),
    ):
        result = explained(cell, 0.001)
        assert (result.status, result.exclusion.reason, result.complete) == (Verdict.NONE, reason, True)
        (line,) = sentences(result)
        assert line.startswith("no cycle, by arithmetic alone: ")
        assert told in line
        assert cell.length > 20 or not cycles_of_cell(3, cell.offset, cell.length, cell.odd, cell.above)


def test_all_cores_are_told_even_where_arithmetic_excludes_the_cell():
    result = explained(Cell(3, 1, 11, 9), 60, all_cores=True)
    assert ("lower bound", "upper bound") in [entry.core.groups for entry in result.cores]
    assert any(line.endswith("were not needed") and "whatever the map" in line for line in sentences(result))


def test_cycles_are_shown_with_what_one_condition_less_admits():
    cell = Cell(3, 5, 27, 17)
    result = explained(cell, 60)
    assert result.status is Verdict.FOUND
    assert [cycle.least for cycle in result.cycles] == [187, 347]
    assert [entry.group for entry in result.relaxations] == list(GROUPS[1:])
    for entry in result.relaxations:
        rest = [group for group in GROUPS if group != entry.group]
        others = [n for n in range(1 << result.width) if n not in {187, 347} and meets(cell, n, rest)]
        assert (entry.least in others) if others else entry.least is None
    words = sentences(result)
    assert words[0].startswith("2 cycles: n = 187, word 111111011101101001011110000, gcd 1, 6 circuits; n = 347")
    assert words[1] == "the cell is empty for every bound from B = 347 on"


def test_a_refutation_without_a_core_claims_no_more():
    (first, last) = sentences(
        Explanation(Cell(3, 1, 24, 15), Verdict.NONE, complete=False, reason="5 s were not enough")
    )
    assert first == "no cycle: all the conditions together exclude it; no minimal core was found in time"
    assert last == "incomplete: 5 s were not enough"


def test_cells_with_d_equal_to_the_determinant_are_listed_in_full():
    """Every word is a cycle then: the 30 Lyndon words of length 11 with 7 odd steps (OEIS A051168)."""
    result = explained(Cell(3, -139, 11, 7), 60)
    assert (len(result.cycles), result.complete) == (30, True)
    assert [cycle.least for cycle in result.cycles] == cycles_of_cell(3, -139, 11, 7)


@pytest.mark.slow
def test_an_irreducible_cell_with_a_bound_of_8188_is_explained():
    result = explained(Cell(3, -139, 30, 19), 300)
    assert balanced_bound(result.cell) == 8188
    assert [entry.core.groups for entry in result.cores] == [
        ("step", "closing", "odd count"),
        ("step", "closing", "order"),
    ]
    assert all(entry.every_number for entry in result.cores)


def test_time_runs_out_without_a_claim():
    """(7, 53040735, 94, 22), irreducible and empty, U = 2.8·10^6; one of the cells of benchmarks/cells.jsonl."""
    result = explained(Cell(7, 53040735, 94, 22), 1.0)
    assert (result.status, result.complete, result.cores, result.cycles) == (Verdict.OPEN, False, (), ())
    assert sentences(result)[0] == "open: neither a cycle nor a refutation was found"
    assert sentences(result)[-1] == "incomplete: 1 s were not enough"
