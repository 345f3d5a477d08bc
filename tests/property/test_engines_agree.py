"""Sweep, matching, tally, census and plain enumeration give the same lists on 2,000 random cells."""

import random
from math import gcd

import pytest

from solverkit.methods import Budget, merged
from solverkit.settle.choice import method_named
from solverkit.window import Cell
from solverkit.words import lyndon_count
from tests.reference import cycles_of_cell

ENGINES = ("sweep", "matching", "tally", "census")
MULTIPLIERS = (3, 3, 3, 5, 7, 9, 11, 13, 15, 181)


def drawn(count, longest, seed):
    """Cells of either sign, some offsets composite and sharing a factor with D, some bounds above 0."""
    rng = random.Random(seed)
    while count:
        q, k = rng.choice(MULTIPLIERS), rng.randint(1, longest)
        x = rng.randint(1, k)
        determinant = 2**k - q**x
        size = rng.choice([1, rng.randrange(1, 60, 2), rng.randrange(1, 10**4, 2)])
        if rng.random() < 0.6:
            size *= gcd(determinant, rng.choice([3**5 * 5 * 7 * 11 * 13, 5 * 7 * 17 * 23 * 29 * 31, determinant]))
        if lyndon_count(k, x) * gcd(size, determinant) > 3000 * abs(determinant):
            continue
        count -= 1
        yield Cell(q, size if determinant > 0 else -size, k, x, rng.choice([0, 0, 0, 2, 100]))


def lists(cell):
    """Return engine -> complete list, for the engines that take the cell at a small cost."""
    told = {}
    for name in ENGINES:
        method = method_named(name)
        if method.refusal(cell) is None and method.estimate((cell,)) < 0.3:
            (batch,) = method.batches([cell])
            (entry,) = merged(batch, [method.run(piece, Budget()) for piece in method.pieces(batch, 60.0)])
            assert entry.complete or name == "tally", entry.reason
            if entry.complete and entry.total is None:
                told[name] = list(entry.least)
    return told


@pytest.mark.parametrize("part", range(8))
def test_all_engines_agree(part):
    several = cycles = 0
    for cell in drawn(250, 26, seed=part):
        told = lists(cell)
        if cell.length <= 12:
            told["enumeration"] = cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)
        answers = list(told.values())
        assert all(answer == answers[0] for answer in answers), (cell, told)
        several += len(answers) >= 3
        cycles += len(answers[0]) if answers else 0
    assert several > 200
    assert cycles > 300
