"""The ways to state one step, each judged on every pair of numbers of a few bits, and on large numbers."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pysat.solvers import Solver

from cycle_encodings._gates import Builder
from cycle_encodings._steps import adder_step, copies, serial_step, sum_step
from solverkit.maps import Map
from solverkit.window import Cell

RULES = [adder_step, serial_step, sum_step]
rules = pytest.mark.parametrize("rule", RULES, ids=[rule.__name__ for rule in RULES])


def stated(rule, multiplier, offset, width, image_width):
    """(solver, bits, bits of the image)."""
    builder = Builder()
    bits = [builder.variable() for _ in range(width)]
    image = [builder.variable() for _ in range(image_width)]
    rule(builder, Cell(multiplier, offset, 1, 1), bits, image)
    return Solver(name="minisat22", bootstrap_with=builder.clauses), bits, image


def literals(bits, value):
    return [bit if value >> place & 1 else -bit for place, bit in enumerate(bits)]


@rules
@pytest.mark.parametrize(
    ("multiplier", "offset"), [(3, 1), (3, -7), (5, 11), (7, -1), (9, 5), (11, -23), (13, 3), (181, 1)]
)
def test_all_pairs_of_small_numbers_are_decided_by_the_map(rule, multiplier, offset):
    solver, bits, image = stated(rule, multiplier, offset, 5, 6)
    with solver:
        for n in range(32):
            after = Map(multiplier, offset).step(n)
            for m in range(64):
                assert solver.solve(assumptions=literals(bits, n) + literals(image, m)) == (m == after)


@rules
@settings(max_examples=60)
@given(
    st.integers(1, 120).map(lambda i: 2 * i + 1),
    st.integers(-(2**40), 2**40).map(lambda i: 2 * i + 1),
    st.integers(0, 2**50),
)
def test_the_image_of_a_large_number_follows_by_unit_propagation(rule, multiplier, offset, n):
    after = Map(multiplier, offset).step(n)
    solver, bits, image = stated(rule, multiplier, offset, 51, 62)
    with solver:
        given_n = literals(bits, n)
        assert solver.propagate(assumptions=given_n)[0] == (0 <= after < 2**62)
        assert not any(solver.propagate(assumptions=[*given_n, -bit])[0] for bit in literals(image, after))


@given(st.integers(1, 10**9).map(lambda i: 2 * i + 1))
def test_copies_add_up_and_are_few(multiplier):
    found = copies(multiplier)
    assert sum(sign << shift for shift, sign in found) == multiplier
    assert len(found) <= multiplier.bit_count()
    assert len(found) <= (multiplier.bit_length() + 2) // 2 + 1
