"""Make benchmarks/cells.jsonl: irreducible cells (|d| divides |D|) in graded sizes, with the number of their cycles.

    python benchmarks/make_cells.py            write cells.jsonl beside this file, under a minute
    python benchmarks/make_cells.py --check    compare the file with what would be written

For each multiplier 3, 5, 7, 9, 11, each sign of d and each grade there is a cell without a cycle and one with one
or with many; further cells have few odd steps (|d| over 20 times the bound U'), and some are long known as hard. The
number of cycles is what two arithmetic engines agree on, where a second one takes the cell. Seeded; the same seed gives
the same file.
"""

from __future__ import annotations

import argparse
import random
import tempfile
from collections import Counter
from pathlib import Path

from flint import fmpz

from solverkit.exact.bounds import balanced_beta, balanced_bound
from solverkit.exact.reduction import reduced
from solverkit.methods import Budget, merged
from solverkit.registry import load
from solverkit.trials.cells import BenchmarkCell, write_cells
from solverkit.window import Cell
from solverkit.words import lyndon_count

FILE = Path(__file__).with_name("cells.jsonl")
SEED = 20
GRADES = {"small": (2_000, 20_000), "medium": (40_000, 500_000), "large": (1_000_000, 20_000_000)}
# Largest |d|/U' of cells with at most one cycle: large ones near q^x = 2^k have many.
RATIO = {"small": 5, "medium": 10, "large": 20}
# Fewer words than this are soon tried out.
WORDS = 100_000
MULTIPLIERS = (3, 5, 7, 9, 11)
NAMED = [
    Cell(3, -3191, 45, 29),
    Cell(5, -23547, 42, 20),
    Cell(3, 1175, 59, 37),
    Cell(3, -74923, 59, 39),
    Cell(3, -191137, 56, 37),
]
ENGINES = ("sweep", "matching", "tally")


def grade_of(bound):
    """Return the grade of a cell with this balanced bound; between grades, the next one up."""
    return next(grade for grade, (_, top) in GRADES.items() if bound < top)


def divisors(n, least, most):
    """Return the divisors of n between two numbers that have only prime factors below 2^16, ascending."""
    found = [1]
    for prime, power in fmpz(n).factor_smooth(16):
        if prime < 1 << 16:
            found = [d for each in found for e in range(power + 1) if (d := each * int(prime) ** e) < most]
    return sorted(d for d in found if d > least)


def drawn(rng, q, sign, grade, ratios, chances):
    """Yield irreducible cells of the grade, at random.

    Args:
        rng: random numbers.
        q: multiplier.
        sign: of d.
        grade: of U'.
        ratios: least and largest |d|/U'.
        chances: least and largest number of cycles that chance gives: words over |D|/|d|.
    """
    low, high = GRADES[grade]
    while True:
        k = rng.randint(18, 100)
        x = rng.randint(3, k - 1)
        determinant = 2**k - q**x
        if (determinant > 0) != (sign > 0):
            continue
        beta, size = balanced_beta(q, k, x), abs(determinant)
        if not ratios[0] * beta <= size <= ratios[1] * beta:
            continue
        # U' = |d|·β*/|D|, so |d| lies between these:
        least, most = low * size // beta, high * size // beta
        words = lyndon_count(k, x)
        if words < WORDS:
            continue
        least, most = max(least, int(chances[0] * size / words)), min(most, int(chances[1] * size / words))
        fitting = divisors(size, least, most) if least < most else []
        if fitting:
            yield Cell(q, sign * rng.choice(fitting), k, x)


def counted(cell):
    """Return the number of cycles, by the first engine that takes the cell and by a second one that is quick enough."""
    totals = {}
    for name in ENGINES:
        engine = load("engines", name)
        if engine.refusal(cell) is None and engine.estimate((cell,)) < (5 if not totals else 1) and len(totals) < 2:
            (batch,) = engine.batches((cell,))
            results = [engine.run(piece, Budget()) for piece in engine.pieces(batch, 60)]
            (listing,) = merged(batch, results)
            assert listing.complete
            totals[name] = len(listing.least) if listing.total is None else listing.total
    assert len(set(totals.values())) == 1, (cell, totals)
    return next(iter(totals.values()))


def described(cell):
    """Return the cell with its number of cycles, grade and bound."""
    assert reduced(cell).cell == cell
    bound = balanced_bound(cell)
    return BenchmarkCell(cell, counted(cell), grade_of(bound), bound)


def first(candidates, wanted):
    """Return the first candidate with such a number of cycles."""
    return next(found for cell in candidates if wanted((found := described(cell)).cycles))


def chosen():
    """Return all cells, by grade, then by multiplier and so on."""
    found = [described(cell) for cell in NAMED]
    turn = 0
    for grade, ratio in RATIO.items():
        for q in MULTIPLIERS:
            for sign in (1, -1):
                rng = random.Random(f"{SEED} {grade} {q} {sign}")
                found.append(first(drawn(rng, q, sign, grade, (0, ratio), (1e-6, 1)), lambda count: count == 0))
                turn += 1
                if turn % 2:
                    found.append(first(drawn(rng, q, sign, grade, (0, ratio), (0.05, 3)), lambda count: count == 1))
                else:
                    found.append(first(drawn(rng, q, sign, grade, (0, 4), (3, 60)), lambda count: 2 <= count <= 80))
        for q in (3, 5, 7):
            rng = random.Random(f"{SEED} {grade} {q} few")
            found.append(first(drawn(rng, q, 1, grade, (20, 400), (1e-6, 1)), lambda count: count == 0))
    names = list(GRADES)
    return sorted(dict.fromkeys(found), key=lambda each: (names.index(each.grade), each.cell))


def main():
    """Write or check the file."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--check", action="store_true", help="compare instead of writing")
    arguments = parser.parse_args()
    cells = chosen()
    if arguments.check:
        with tempfile.TemporaryDirectory() as folder:
            write_cells(Path(folder) / "cells.jsonl", cells)
            assert (Path(folder) / "cells.jsonl").read_bytes() == FILE.read_bytes(), "cells.jsonl differs"
    else:
        write_cells(FILE, cells)
    print(len(cells), "cells;", dict(Counter(cell.grade for cell in cells)), "by number of cycles:",
          dict(sorted(Counter(min(cell.cycles, 2) for cell in cells).items())))  # fmt: skip


if __name__ == "__main__":
    main()
