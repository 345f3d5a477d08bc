"""How encodings are judged: random cells with their cycles by brute force, and full solution sets of formulas."""

import random

from pysat.solvers import Solver

from solverkit.window import Cell
from tests.reference import cycles_of_cell


def expected_of(cell):
    return cycles_of_cell(cell.multiplier, cell.offset, cell.length, cell.odd, cell.above)


def drawn_cells(count, seed):
    """Random cells with q in 3 … 15, k ≤ 14, both signs; two fifths of the offsets share a factor with D."""
    rng = random.Random(seed)
    while count:
        q, k = rng.choice([3, 5, 7, 9, 11, 13, 15]), rng.randint(1, 14)
        x = rng.randint(1, k)
        determinant = 2**k - q**x
        size = rng.randrange(1, 400, 2)
        if rng.random() < 0.4:
            size = abs(determinant) // rng.choice([f for f in range(1, 50, 2) if determinant % f == 0])
            size *= rng.choice([1, 1, 3, 5, 7])
        cell = Cell(q, size if determinant > 0 else -size, k, x, rng.choice([0, 0, 0, 1, 5, 30]))
        expected = expected_of(cell)
        if len(expected) <= 150:
            count -= 1
            yield cell, expected


def solution_set(clauses, encoding, solver="glucose4", most=2000):
    """Least elements of all models of the clauses, at most so many; one that comes twice fails at once."""
    found = []
    with Solver(name=solver, bootstrap_with=clauses) as oracle:
        while len(found) < most and oracle.solve():
            least = encoding.decode(oracle.get_model())
            assert least not in found
            found.append(least)
            oracle.add_clause(list(encoding.blocking(least)))
    return sorted(found)
