"""Estimated against measured cost, for cells of over a second: the cost models that triage and the chooser rely on.

Prints estimate, measured process time and their ratio; every ratio must lie within a factor 4 (assert).
"""

import sys
import time

from solverkit.methods import Budget
from solverkit.settle.calibration import calibrated, measure
from solverkit.settle.choice import default_methods, method_named
from solverkit.window import Cell

D80 = 2**80 - 3**50
# (method, cell, number of cycles expected or None)
CASES = [
    ("sweep", Cell(3, 1, 301994, 190537), 0),
    ("sweep", Cell(3, -1, 780239, 492276), 0),
    ("sweep", Cell(3, 10007, 485, 306), None),
    ("sweep", Cell(5, 1, 1493, 643), 0),
    ("sweep", Cell(7, 1, 1603, 571), 0),
    ("sweep", Cell(5, 1000003, 137, 59), None),
    ("sweep", Cell(7, 10000019, 73, 26), None),
    ("sweep", Cell(3, 5077565, 27, 17), None),
    ("sweep", Cell(3, 1000003, 485, 306), None),
    ("matching", Cell(3, 1, 70, 44), 0),
    ("matching", Cell(3, -1, 73, 47), 0),
    ("matching", Cell(5, 1, 72, 31), 0),
    ("tally", Cell(3, D80 // (11 * 392851), 80, 50), None),
    ("census", Cell(3, 1, 38, 23), 0),
    ("cnf:composed@glucose4", Cell(3, -3191, 45, 29), 0),
    ("cnf:composed@glucose4", Cell(3, 1175, 59, 37), None),
    ("cnf:composed@glucose4", Cell(3, -23, 84, 53), 0),
]


def main():
    """Run the comparison."""
    factors = measure(default_methods())
    print("factors of this machine: " + ", ".join(f"{name} {factor:.2f}" for name, factor in factors.items()))
    print(f"{'method':<22}{'cell':<28}{'estimate':>10}{'measured':>10}{'ratio':>8}")
    wrong = 0
    for name, cell, cycles in CASES:
        method = method_named(name)
        if method.refusal(cell):
            print(f"{name:<22}refused: {method.refusal(cell)}")
            continue
        (batch,) = method.batches([cell])
        estimate = calibrated(method, batch)
        begun = time.perf_counter()
        results = [method.run(piece, Budget(120.0)) for piece in method.pieces(batch, 4.0)]
        measured = sum(result.seconds for result in results) or time.perf_counter() - begun
        assert cycles is None or sum(len(result.hits) for result in results) == cycles
        ratio = estimate / measured
        within = 0.25 <= ratio <= 4 or max(estimate, measured) < 1
        wrong += not within
        text = f"({cell.multiplier}, {str(cell.offset)[:9]}, {cell.length}, {cell.odd})"
        print(
            f"{name:<22}{text:<28}{estimate:>10.2f}{measured:>10.2f}{ratio:>8.2f}{'' if within else '  off'}",
            flush=True,
        )
    if wrong:
        sys.exit(f"{wrong} estimates of over a second are off by more than a factor 4")


if __name__ == "__main__":
    main()
