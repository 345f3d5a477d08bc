"""The default CP-SAT model against the plain one, in one run, alternating, one worker, answers asserted.

    python benchmarks/constraint_models.py [--limit SECONDS] [--hard]

Irreducible cells (d | D). A cell counts when the plain model needs a second or more; where it meets the limit, the
ratio is a lower bound, marked ">". Each run has a process of its own; encoding and solving count. ``--hard`` settles
three cells of the default model alone, which must take under 60 s each.
"""

import argparse
import math
import multiprocessing
import time

from solverkit.registry import load
from solverkit.window import Cell

# Cell -> number of its cycles, which the sweep over candidates confirms.
CELLS = {
    Cell(3, 419, 28, 17): 1,
    Cell(3, -193, 30, 19): 6,
    Cell(7, -7857, 40, 16): 0,
    Cell(11, -5465, 56, 17): 0,
    Cell(5, -6329, 28, 13): 12,
    Cell(9, -27875, 26, 9): 12,
    Cell(3, 266233, 52, 9): 0,
    Cell(5, 2796161, 46, 6): 0,
    Cell(5, 8241, 84, 32): 0,
    Cell(3, -16733, 48, 32): 0,
}
HARD = {Cell(3, -3191, 45, 29): 0, Cell(5, -23547, 42, 20): 0, Cell(3, 1175, 59, 37): 1}


def _solve(pipe, encoding, cell):
    load("solvers", "cpsat"), load("encodings", encoding).encode(Cell(3, 1, 2, 1))  # libraries loaded beforehand
    begun = time.process_time()
    found = len(list(load("solvers", "cpsat").least_elements(load("encodings", encoding).encode(cell))))
    pipe.send((found, time.process_time() - begun))


def timed(encoding, cell, limit):
    """Return (number of cycles, seconds of the process), or (None, limit)."""
    ours, theirs = multiprocessing.Pipe()
    process = multiprocessing.Process(target=_solve, args=(theirs, encoding, cell))
    process.start()
    answer = ours.recv() if ours.poll(limit + 2) else (None, limit)
    process.kill()
    process.join()
    return answer


def named(cell):
    """Return the cell as (q, d, k, x)."""
    return f"({cell.multiplier}, {cell.offset}, {cell.length}, {cell.odd})"


def compare(limit):
    """Run both models on each cell."""
    ratios = []
    print(f"{'cell':<26}{'cycles':>7}{'plain':>10}{'default':>10}{'ratio':>9}")
    for cell, cycles in CELLS.items():
        (plain, before), (default, after) = (timed(e, cell, limit) for e in ("constraints-plain", "constraints"))
        assert plain in (None, cycles), f"{named(cell)}: {plain} cycles by the plain model, not {cycles}"
        assert default in (None, cycles), f"{named(cell)}: {default} cycles by the default model, not {cycles}"
        text = f"{named(cell):<26}{cycles:>7}{before:>10.2f}{after:>10.2f}"
        if default is None:
            print(f"{text}   the default model met the limit", flush=True)
        elif before >= 1:
            print(f"{text}{'>' if plain is None else ' '}{before / after:>8.1f}", flush=True)
        else:
            print(f"{text}   under a second", flush=True)
        if before >= 1:
            ratios.append(before / after)
    mean = math.exp(sum(map(math.log, ratios)) / len(ratios))
    print(f"geometric mean of {len(ratios)} ratios: {mean:.1f}, the least {min(ratios):.1f}")


def settle_hard():
    """Run the default model on the hard cells."""
    for cell, cycles in HARD.items():
        found, seconds = timed("constraints", cell, 60)
        print(f"{named(cell):<26}{cycles:>7}{seconds:>10.2f}", flush=True)
        assert found == cycles, f"{named(cell)}: {found} cycles, not {cycles}"


def main():
    """Run what the command line asks for."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--limit", type=float, default=60, help="seconds for each run")
    parser.add_argument("--hard", action="store_true", help="settle the three hard cells instead")
    arguments = parser.parse_args()
    settle_hard() if arguments.hard else compare(arguments.limit)


if __name__ == "__main__":
    main()
