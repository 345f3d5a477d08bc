"""The CP-SAT models, judged by their full solution sets."""

import random
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from cycle_encodings._constraint_model import LARGEST
from cycle_encodings.constraints import ENCODING, Constraints
from cycle_encodings.constraints_plain import ENCODING as PLAIN
from solverkit.errors import CapacityError, InputError
from solverkit.exact.bounds import balanced_bound
from solverkit.exact.windows import element_windows
from solverkit.residues.sieve import prefix_tree
from solverkit.solvers.constraint import ConstraintSolver
from solverkit.window import Cell, Sign
from tests.reference import cycles_of_cell
from tests.strategies import cells

SOLVER = ConstraintSolver()
ALL = Constraints(states=True, equation=True)
BARE = Constraints(halves=False, counts=False, order=False, leaves=0)


def reference(cell):
    return cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)


def fits(cell):
    """Whether every model of the cell, with every option, stays within 61 bits."""
    size = balanced_bound(cell) + abs(cell.offset)
    return size * cell.multiplier ** (cell.odd + 1) < LARGEST // 4 and size < 1 << 36


def solution_set(model):
    """Least elements of all solutions; one that comes twice would never end, so it fails at once."""
    found = []
    for least in SOLVER.least_elements(model):
        assert least not in found
        found.append(least)
    return sorted(found)


def drawn_cells(count, seed, longest=12, most=40):
    """Random cells with q in 3 … 13, both signs, 40 % of them with an offset that divides D, few cycles each."""
    rng = random.Random(seed)
    while count:
        q, k = rng.choice([3, 5, 7, 9, 11, 13]), rng.randint(1, longest)
        x = rng.randint(1, k)
        determinant = 2**k - q**x
        size = rng.randrange(1, 400, 2)
        if rng.random() < 0.4:
            size = abs(determinant) // rng.choice([f for f in range(1, 50, 2) if determinant % f == 0])
        cell = Cell(q, size if determinant > 0 else -size, k, x, rng.choice([0, 0, 0, 1, 5, 30]))
        expected = reference(cell)
        if len(expected) <= most:
            count -= 1
            yield cell, expected


@pytest.mark.parametrize(
    ("encoder", "seed"), [(ENCODING, 41), (PLAIN, 42), (ALL, 43), (BARE, 44)], ids=["default", "plain", "all", "bare"]
)
def test_solution_sets_of_400_random_cells_equal_brute_force(encoder, seed):
    total = 0
    for cell, expected in drawn_cells(400, seed):
        assert solution_set(encoder.encode(cell)) == expected, cell
        total += len(expected)
    assert total > 300


options = st.builds(
    Constraints,
    halves=st.booleans(),
    counts=st.booleans(),
    order=st.booleans(),
    leaves=st.sampled_from([0, 1, 2, 7, 256]),
    spare=st.integers(0, 8),
    states=st.booleans(),
    equation=st.booleans(),
    limb=st.integers(4, 24),
)


@settings(max_examples=60)
@given(cells(longest=9).filter(fits), options)
def test_options_change_the_model_but_not_its_solutions(cell, encoder):
    expected = reference(cell)
    if len(expected) < 15:
        assert solution_set(encoder.encode(cell)) == expected


@pytest.mark.slow
@pytest.mark.parametrize("encoder", [ENCODING, replace(ALL, limb=4)], ids=["default", "all"])
def test_solution_sets_of_longer_cells_equal_brute_force(encoder):
    for cell, expected in drawn_cells(150, seed=45, longest=17, most=20):
        assert solution_set(encoder.encode(cell)) == expected, cell


@settings(max_examples=30)
@given(cells(longest=10).filter(fits), options)
def test_the_same_cell_gives_the_same_model_and_groups_name_every_constraint_once(cell, encoder):
    for each in (encoder, PLAIN):
        one, two = each.encode(cell), each.encode(replace(cell))
        assert (one.digest(), one.groups, one.least, one.names) == (two.digest(), two.groups, two.least, two.names)
        covered = sorted(i for ranges in one.groups.values() for start, stop in ranges for i in range(start, stop))
        assert covered == list(range(one.sizes()["constraints"]))
        assert len(one.names) == one.sizes()["variables"]
        assert not one.model.validate()


def test_groups_of_the_default_model_are_the_named_conditions():
    assert set(ENCODING.encode(Cell(3, 5, 27, 17)).groups) == {"step", "order", "odd count", "residues"}
    assert set(ALL.encode(Cell(3, 13, 46, 29)).groups) == {
        "step", "order", "odd count", "residues", "ranges", "equation",
    }  # fmt: skip
    assert set(PLAIN.encode(Cell(3, 5, 27, 17)).groups) == {
        "step", "order", "odd count", "lower bound", "upper bound",
    }  # fmt: skip


@given(cells(longest=16).filter(fits))
def test_sizes_are_what_the_docstrings_say(cell):
    k = cell.length
    assert PLAIN.encode(cell).sizes() == {"variables": 2 * k, "constraints": 3 * k + 2 if k > 1 else 5}
    windows = element_windows(cell)
    if windows.empty:
        assert ENCODING.encode(cell).sizes() == {"variables": 1, "constraints": 1}
        return
    depth = windows.bound.bit_length() - ENCODING.spare
    tree = prefix_tree(windows, depth, ENCODING.leaves) if depth > 0 else None
    left, excluded = (len(tree.live), len(tree.dead)) if tree else (0, 0)
    assert ENCODING.encode(cell).sizes() == {
        "variables": 3 * k + (1 + left if left else 0),
        "constraints": 5 * k - 1 + excluded + 5 * left,
    }


@pytest.mark.parametrize(
    ("cell", "expected"),
    [
        (Cell(3, -3191, 45, 29), []),
        (Cell(5, -23547, 42, 20), []),
        (Cell(3, 1175, 59, 37), [17641]),
        (Cell(3, 419, 28, 17), [1045]),
    ],
)
def test_known_hard_cells(cell, expected):
    """The lists are those of the sweep over candidates."""
    assert solution_set(ENCODING.encode(cell)) == expected


def test_no_sum_leaves_int64_although_the_cycle_equation_has_93_bits():
    cell = Cell(3, 1175, 93, 58)
    assert abs(cell.determinant) > LARGEST
    model = Constraints(equation=True).encode(cell)
    assert not model.model.validate()


@pytest.mark.parametrize("encoder", [ENCODING, PLAIN], ids=["default", "plain"])
def test_wrong_cells_are_refused_and_vast_ones_named(encoder):
    with pytest.raises(InputError, match="cell"):
        encoder.encode(Cell(3, 1, 3, 2, sign=Sign.NEGATIVE))
    with pytest.raises(CapacityError, match="limb"):
        Constraints(equation=True, limb=24).encode(Cell(3, 2**40 - 3**25, 40, 25))
    vast = 2**64 - 3**40
    with pytest.raises(CapacityError, match="bits"):
        encoder.encode(Cell(3, vast, 64, 40))


@pytest.mark.parametrize(("field", "value"), [("leaves", -1), ("leaves", 65537), ("spare", 65), ("limb", 3)])
def test_wild_options_are_refused(field, value):
    with pytest.raises(InputError, match=field):
        Constraints(**{field: value})


def test_rough_size_is_within_a_factor_of_three():
    for cell in [Cell(3, 5, 27, 17), Cell(3, -49, 30, 19), Cell(3, 13, 46, 29), Cell(3, -3191, 45, 29)]:
        assert 1 / 3 < ENCODING.size(cell) / ENCODING.encode(cell).sizes()["constraints"] < 3
