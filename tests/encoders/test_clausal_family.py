"""The clausal encodings of the orbit, judged by their full solution sets."""

from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pysat.formula import CNF
from pysat.solvers import Solver

from cycle_encodings._orbit_draft import windows_of
from cycle_encodings._prefix_classes import class_tree, walked
from cycle_encodings._steps import additions, copies
from cycle_encodings.channels import PRIMES, Channels
from cycle_encodings.composed import Composed, lean_orbit
from cycle_encodings.macro import MacroSteps
from cycle_encodings.orbit import Orbit
from cycle_encodings.prefixes import Prefixes
from cycle_encodings.serial import Serial
from cycle_encodings.windows import ExactWindows
from solverkit.errors import InputError
from solverkit.methods import Budget
from solverkit.registry import load
from solverkit.window import Cell, Sign
from tests.encoders.judging import drawn_cells, expected_of, solution_set
from tests.strategies import cells

FAMILY = [Orbit(), ExactWindows(), Serial(), Channels(), Prefixes(), MacroSteps(), Composed()]
family = pytest.mark.parametrize("encoder", FAMILY, ids=[encoder.name for encoder in FAMILY])
TYPICAL = [
    Cell(3, 5, 27, 17),
    Cell(3, -49, 30, 19),
    Cell(3, 13, 46, 29),
    Cell(3, -3191, 45, 29),
    Cell(5, 8241, 84, 32),
    Cell(7, -7857, 40, 16),
    Cell(9, -281, 95, 30),
    Cell(11, 45217, 69, 18),
]


def solutions(encoding, solver="glucose4", left_out=(), most=2000):
    """Least elements of all models, at most so many, without the clauses of some groups."""
    clauses = [
        clause
        for name, ranges in encoding.groups.items()
        if name not in left_out
        for start, stop in ranges
        for clause in encoding.clauses[start:stop]
    ]
    return solution_set(clauses, encoding, solver, most)


@family
def test_solution_sets_of_300_random_cells_equal_brute_force(encoder):
    total = 0
    for cell, expected in drawn_cells(300, seed=20):
        assert solutions(encoder.encode(cell)) == expected, cell
        total += len(expected)
    assert total > 300


def test_every_model_has_one_of_the_cubes():
    with_cubes = 0
    for cell, _ in drawn_cells(150, seed=22):
        encoding = Composed(spare=1).encode(cell)
        with_cubes += bool(encoding.cubes)
        with Solver(name="cadical195", bootstrap_with=encoding.clauses) as oracle:
            assert not encoding.cubes or not oracle.solve(assumptions=[-cube for cube in encoding.cubes])
    assert with_cubes > 30


@pytest.mark.parametrize("solver", ["glucose4", "minisat22", "cadical195", "kissat404"])
def test_going_through_the_cubes_changes_no_list(solver):
    back_end = load("solvers", solver)
    for cell, expected in drawn_cells(60, seed=23):
        assert sorted(back_end.least_elements(Composed(spare=1).encode(cell))) == expected, cell


@pytest.mark.slow
@family
def test_solution_sets_of_3000_random_cells_equal_brute_force(encoder):
    for cell, expected in drawn_cells(3000, seed=21):
        assert solutions(encoder.encode(cell), "cadical195") == expected, cell


VARIANTS = st.one_of(
    st.builds(Channels, st.lists(st.sampled_from(PRIMES), unique=True, max_size=3).map(tuple)),
    st.builds(Prefixes, st.integers(0, 24), st.integers(1, 9), st.integers(0, 5)),
    st.builds(MacroSteps, st.integers(1, 6)),
    st.builds(Composed, st.sampled_from([1, 2, 16, 500, 65536]), st.integers(1, 9), *[st.booleans()] * 3),
)


@settings(max_examples=200)
@given(cells(longest=10), VARIANTS)
def test_options_change_the_formula_but_not_its_solutions(cell, encoder):
    expected = expected_of(cell)
    if len(expected) < 100:
        assert solutions(encoder.encode(cell)) == expected


@family
@settings(max_examples=40)
@given(cell=cells(longest=10))
def test_the_same_cell_gives_the_same_formula(encoder, cell):
    assert encoder.encode(cell) == encoder.encode(replace(cell))
    assert encoder.encode(cell).digest() == type(encoder)().encode(cell).digest()


@family
@settings(max_examples=40)
@given(cell=cells(longest=10))
def test_groups_name_every_clause_once(encoder, cell):
    encoding = encoder.encode(cell)
    covered = sorted(i for ranges in encoding.groups.values() for start, stop in ranges for i in range(start, stop))
    assert covered == list(range(len(encoding.clauses)))
    assert all(1 <= abs(literal) <= encoding.variables for clause in encoding.clauses for literal in clause)


BASIC = {"constants", "step", "closing", "odd count", "order", "lower bound", "upper bound", "ranges"}


@family
def test_groups_of_a_cell_with_cycles_are_the_named_conditions(encoder):
    extra = {"residues"} if encoder.name in {"channels", "prefixes", "composed"} else set()
    assert set(encoder.encode(Cell(3, 5, 27, 17, above=3)).groups) == BASIC | extra


@pytest.mark.parametrize("encoder", [Orbit(), MacroSteps(2)], ids=["orbit", "macro"])
@pytest.mark.parametrize(
    ("group", "cell"),
    [
        ("step", Cell(3, 1, 8, 5)),
        ("closing", Cell(3, 5, 8, 5)),
        ("order", Cell(3, 35, 8, 4)),
        ("odd count", Cell(3, 17, 7, 3)),
    ],
)
def test_a_condition_left_out_is_missed(group, cell, encoder):
    """Each group does something of its own, once the ranges, which follow from all of them, are left out too."""
    assert solutions(encoder.encode(cell), left_out={group, "ranges"}, most=400) != expected_of(cell)


@pytest.mark.parametrize("encoder", [Channels((3, 5)), Prefixes(), Serial()], ids=lambda encoder: encoder.name)
def test_ranges_and_residues_follow_from_the_other_conditions(encoder):
    for cell in [Cell(3, 35, 8, 4), Cell(3, 17, 7, 3), Cell(5, -129, 9, 4), Cell(3, 5, 11, 6)]:
        assert solutions(encoder.encode(cell), left_out={"ranges", "residues"}) == expected_of(cell)


@family
def test_larger_cells_have_the_cycles_that_the_sweep_finds(encoder):
    """Least elements known from the engines, for cells that no brute force reaches."""
    for cell in [Cell(3, 5, 27, 17), Cell(3, -193, 30, 19), Cell(3, 419, 28, 17), Cell(5, 8241, 30, 12)]:
        sweep = load("engines", "sweep")
        (batch,) = sweep.batches([cell])
        found = [sweep.run(piece, Budget()) for piece in sweep.pieces(batch, 60)]
        expected = sorted({hit.least for each in found for hit in each.hits if hit.length == cell.length})
        assert solutions(encoder.encode(cell), "cadical195") == expected


def test_graph_nogoods_forbid_something():
    """With x = k − 1 odd steps no element can be ≡ 0 mod 4, as two even steps would follow."""
    cell = Cell(5, -(5**6 - 2**7), 7, 6)
    with_graph, without = Prefixes(graph=2).encode(cell), Prefixes(graph=0).encode(cell)
    assert len(with_graph.clauses) > len(without.clauses)
    assert solutions(with_graph) == solutions(without) == expected_of(cell)


def test_composed_leaves_out_the_first_steps():
    encoding = Composed().encode(Cell(3, -3191, 45, 29))
    assert {"n[0].0", "n[44].0"} < set(encoding.names.values())
    assert "n[1].0" not in encoding.names.values()


def test_formula_survives_dimacs(tmp_path):
    """Written and read back by python-sat."""
    encoding = Composed().encode(Cell(3, 5, 27, 17))
    encoding.cnf().to_file(str(tmp_path / "cell.cnf"))
    again = CNF(from_file=str(tmp_path / "cell.cnf"))
    assert (again.nv, [tuple(c) for c in again.clauses]) == (encoding.variables, list(encoding.clauses))


def measures(cell, rounds=30):
    """(windows, k, W, S): mean width of an element, mean number of admissible odd counts."""
    windows, k = windows_of(cell, rounds), cell.length
    width = sum(windows.elements(i).high.bit_length() for i in range(k)) / k
    return windows, k, width, sum(len(windows.odd_counts(i)) for i in range(k)) / k


def within(encoding, variables, clauses, base=(0, 0)):
    """Whether the sizes above ``base`` are those stated, up to a third."""
    got = encoding.variables - base[0], len(encoding.clauses) - base[1]
    return all(0.67 < one / two < 1.33 for one, two in zip(got, (variables, clauses), strict=True))


@pytest.mark.parametrize("cell", TYPICAL, ids=str)
def test_sizes_are_about_those_that_the_modules_state(cell):
    q, a, ones = cell.multiplier, additions(cell), cell.multiplier.bit_count() - 1
    _, k, width, states = measures(cell, 1)
    assert within(Orbit().encode(cell), k * width * (3 * a + 2), k * (width * (20 * a + 8) + 8 * states))
    _, k, width, states = measures(cell)
    adders = k * width * (3 * a + 2), k * (width * (20 * a + 8 + states) + 8 * states)
    assert within(ExactWindows().encode(cell), *adders)
    serial = Serial().encode(cell)
    assert within(serial, k * width * (q + 3), k * (width * (7 * q + 4 + states) + 8 * states))
    base, bits = (serial.variables, len(serial.clauses)), len(serial.least_bits)
    for p in (3, 7):
        variables = (k + bits - 1) * p * (2 if p > 6 else 1)
        assert within(Channels((p,)).encode(cell), variables, k * (4 * p + p * (p + 1) / 2) + 4 * bits * p, base)
    assert within(MacroSteps().encode(cell), k * width * (5 * ones + 4), k * width * (50 * ones + 20))


@pytest.mark.parametrize("cell", TYPICAL, ids=str)
def test_sizes_with_classes_are_about_those_that_the_modules_state(cell):
    windows, k, _, _ = measures(cell)
    serial, nogoods = Serial().encode(cell), Prefixes().encode(cell)
    bits = len(serial.least_bits)
    tree, forbidden = class_tree(windows, 16, 2), 8 - len(walked(windows, 3))
    most = len(tree.dead) + 2 * (bits - tree.live[0][0]) * len(tree.live) + k * forbidden
    assert nogoods.variables == serial.variables
    assert 0.1 * most < len(nogoods.clauses) - len(serial.clauses) <= most
    tree = class_tree(windows, k, 3, 4096)
    steps, live = tree.live[0][0], [residue for _, residue, _ in tree.live]
    nodes = sum(len({residue % (1 << i) for residue in live}) for i in range(1, steps + 1))
    most_odd = max(cell.map.parity_word(residue, steps).count("1") for residue in live)
    high = bits - steps
    width = (cell.multiplier**most_odd << high).bit_length() + 2
    base = lean_orbit(windows, steps).builder
    _, k, mean, states = measures(cell)
    r, whole = len(copies(cell.multiplier)), lean_orbit(windows, 0).finished()
    clauses = k * (mean * (2**r * (2 * r + 1.5) + 3) + 4 * states)
    assert within(whole, k * (mean * (r + 1.5) + states), clauses)
    stated = nodes + 3 * high * width, 5 * nodes + len(live) * (width + 2 * high) + 20 * high * width
    assert within(Composed(channel=False).encode(cell), *stated, (base.variables, len(base.clauses)))


@family
def test_rough_size_is_within_a_factor_of_three(encoder):
    for cell in [*TYPICAL, Cell(3, 22156223, 99, 27), Cell(15, 2**40 + 1, 60, 10)]:
        assert 1 / 3 < encoder.size(cell) / len(encoder.encode(cell).clauses) < 3, cell


@pytest.mark.parametrize("encoder", [Composed(), Prefixes()], ids=lambda encoder: encoder.name)
def test_rough_size_of_a_cell_far_wider_than_long_is_within_a_factor_of_three(encoder):
    cell = Cell(3, 10**60 + 1, 20, 10)
    assert 1 / 3 < encoder.size(cell) / len(encoder.encode(cell).clauses) < 3


def test_a_multiplier_with_many_ones_takes_adders():
    """q = 1398101 has eleven ones; sums of eleven copies would take 2^11 combinations a column."""
    cell = Cell(1398101, 2**44 - 1398101**2, 44, 2)
    assert len(Composed().encode(cell).clauses) < len(Orbit().encode(cell).clauses) < 10**6
    assert Composed().size(cell) < 10**7


@family
def test_rough_size_of_a_huge_cell_is_an_integer(encoder):
    """k = 20,000 with a bound of 20,000 bits; nothing of that size is built."""
    size = encoder.size(Cell(3, 2**20000 - 3**12000, 20000, 12000))
    assert type(size) is int
    assert size > 10**9


@family
def test_negative_elements_are_refused(encoder):
    with pytest.raises(InputError, match="cell"):
        encoder.encode(Cell(3, 1, 3, 2, sign=Sign.NEGATIVE))


@pytest.mark.parametrize(
    ("wrong", "field"),
    [
        (lambda: Channels((4,)), "primes"),
        (lambda: Channels((3, 3)), "primes"),
        (lambda: Prefixes(depth=25), "depth"),
        (lambda: Prefixes(spare=0), "spare"),
        (lambda: Prefixes(graph=9), "graph"),
        (lambda: MacroSteps(0), "steps"),
        (lambda: MacroSteps(True), "steps"),
        (lambda: Composed(leaves=0), "leaves"),
        (lambda: Composed(spare=65), "spare"),
    ],
)
def test_options_outside_their_ranges_are_refused(wrong, field):
    with pytest.raises(InputError, match=field):
        wrong()
