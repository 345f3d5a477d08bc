"""Word matching: times with asserted answers, and the ratio to enumerating the words one by one.

    python benchmarks/matching.py            the ratio and k = 60 … 72, two or three minutes of one core
    python benchmarks/matching.py --long     k = 76 and 80 besides
    python benchmarks/matching.py --quick    the ratio on a smaller cell and k = 60

Times are CPU seconds, set-up included; "wall" is the time of two processes side by side, as the scheduler runs them.
The offsets share a factor with D, so that there is something to find; an offset of 80 bits chosen at random mostly
reduces to d = 1. Lists are compared with an orbit loop over all n up to the balanced bound, which shares nothing with
the engine.
"""

from __future__ import annotations

import argparse
import os
import resource
import time
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass

import numpy as np
from numba import njit

from solverkit.engines._matching_fractions import fractions, slack
from solverkit.engines._matching_substitution import substituted
from solverkit.engines.matching import ENGINE
from solverkit.exact.bounds import balanced_bound
from solverkit.exact.reduction import reduced
from solverkit.methods import Budget, PieceResult, merged
from solverkit.window import Cell

PROCESSES = min(2, os.cpu_count() or 1)
MEMORY = 2 << 30  # a process; 4 GiB together


@dataclass(frozen=True, slots=True)
class Job:
    """A cell and the factor of the offset that is taken out before matching."""

    cell: Cell
    note: str


# Of the offsets of 80 bits the first factor divides D, the second has no common factor with D.
JOBS = {
    60: Job(Cell(3, 47351, 60, 37), "26 cycles expected"),
    64: Job(Cell(3, 2495 * (2**68 + 3), 64, 40), "1.6 cycles expected, 80-bit d"),
    68: Job(Cell(3, 1041197, 68, 42), "361 cycles expected"),
    72: Job(Cell(3, 3673 * (2**68 + 35), 72, 45), "1.4 cycles expected, 80-bit d"),
    76: Job(Cell(3, -311 * (2**71 + 29), 76, 48), "0.5 cycles expected, 80-bit d"),
    80: Job(Cell(3, 5489 * (2**67 + 3), 80, 50), "1.2 cycles expected, 80-bit d"),
}


@njit
def orbit_loop(multiplier, offset, length, odd, bound):
    """Return the least elements of the cycles of the cell, from every odd start up to ``bound``."""
    found = []
    for start in range(1, bound + 1, 2):
        value, odds = start, 0
        for step in range(length):
            if value & 1:
                value = (multiplier * value + offset) >> 1
                odds += 1
            else:
                value >>= 1
            if value < start or (value == start and step < length - 1):
                odds = -1
                break
        if odds == odd and value == start:
            found.append(start)
    return found


@njit
def word_loop(length, odd, table, slack, found):
    """Try every word with the prefix property of the cycle lemma; return the number of words and of words kept."""
    sums = np.zeros(length + 1, np.uint64)
    ones = np.zeros(length + 1, np.int64)
    words = np.zeros(length + 1, np.uint64)
    turn = np.zeros(length + 1, np.int64)
    tried = kept = 0
    step = 0
    while step >= 0:
        if step == length:
            tried += 1
            if sums[step] + slack <= slack + slack:
                found[kept] = words[step]
                kept += 1
            step -= 1
            continue
        choice = turn[step]
        turn[step] += 1
        if choice == 0 and ones[step] < odd:
            sums[step + 1] = sums[step] + table[ones[step], step]
            ones[step + 1] = ones[step] + 1
            words[step + 1] = words[step] | np.uint64(1) << np.uint64(step)
        elif choice == 1 and step + 1 - ones[step] <= length - odd and ones[step] * length >= (step + 1) * odd:
            sums[step + 1] = sums[step]
            ones[step + 1] = ones[step]
            words[step + 1] = words[step]
        else:
            if choice > 1:
                step -= 1
            continue
        step += 1
        turn[step] = 0
    return tried, kept


def enumerated(cell: Cell) -> tuple[list[int], int, float]:
    """Return the least elements by enumeration of the words, the number of words, and the seconds."""
    table, near, found = fractions(cell), np.uint64(slack(cell.odd)), np.empty(100_000, np.uint64)
    word_loop(5, 3, fractions(Cell(3, 1, 5, 3)), np.uint64(1), found)
    start = time.process_time()
    tried, kept = word_loop(cell.length, cell.odd, table, near, found)
    hits = {hit.least for word in found[:kept] if (hit := substituted(cell, int(word))) is not None}
    return sorted(hits), tried, time.process_time() - start


def matched(cell: Cell, seconds: float) -> tuple[list[int], list[PieceResult], float]:
    """Return the least elements, the results of the pieces and the wall time, in separate processes."""
    pieces = ENGINE.pieces((cell,), seconds)
    start = time.perf_counter()
    with ProcessPoolExecutor(PROCESSES) as pool:
        results = list(pool.map(ENGINE.run, pieces, [Budget(memory=MEMORY)] * len(pieces)))
    wall = time.perf_counter() - start
    (listing,) = merged((cell,), results)
    assert listing.complete, listing.reason
    return list(listing.least), results, wall


def warm_up() -> None:
    """Compile the kernels, or load them."""
    cell = Cell(3, 47351, 60, 37)
    ENGINE.run(ENGINE.pieces((cell,), 1e9)[0], Budget())


def ratio(cell: Cell) -> None:
    """Print how many times faster matching is than enumeration."""
    expected, words, plain = enumerated(cell)
    repeats = 20
    start = time.process_time()
    for _ in range(repeats):
        (result,) = [ENGINE.run(piece, Budget()) for piece in ENGINE.pieces((cell,), 1e9)]
    fast = (time.process_time() - start) / repeats
    assert [hit.least for hit in result.hits] == expected
    print(
        f"({cell.multiplier}, {cell.offset}, {cell.length}, {cell.odd}): {words:.2e} words one by one {plain:.2f} s "
        f"({words / plain:.1e}/s), matched {fast:.4f} s, ratio {plain / fast:.0f}; {len(expected)} cycles"
    )


def long_run(job: Job) -> None:
    """Print the time of one cell and compare its list with the orbit loop."""
    reduction = reduced(job.cell)
    cell = reduction.cell
    estimate = ENGINE.estimate([cell])
    least, results, wall = matched(cell, estimate / PROCESSES)
    cpu = sum(result.seconds for result in results)
    bound = balanced_bound(cell)
    assert bound * 3 < 1 << 40
    assert least == orbit_loop(cell.multiplier, cell.offset, cell.length, cell.odd, bound), (cell, least)
    sums = sum(int(result.statistics["left"]) + int(result.statistics["right"]) for result in results)
    memory = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 2**20
    print(
        f"({cell.multiplier}, {cell.offset}·{abs(reduction.factor)}, {cell.length}, {cell.odd}): {cpu:.1f} CPU s "
        f"({cpu / sums * 1e9:.2f} ns a sum), estimate {estimate:.1f} s, wall {wall:.1f} s with {len(results)} pieces, "
        f"at most {memory:.2f} GiB a process; {len(least)} cycles ({job.note})"
    )


def main() -> None:
    """Run the benchmark."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    size = parser.add_mutually_exclusive_group()
    size.add_argument("--quick", action="store_true")
    size.add_argument("--long", action="store_true")
    chosen = parser.parse_args()
    warm_up()
    ratio(Cell(3, 143, 36, 22) if chosen.quick else Cell(3, 251, 40, 25))
    for length, job in JOBS.items():
        if length <= (60 if chosen.quick else 80 if chosen.long else 72):
            long_run(job)


if __name__ == "__main__":
    main()
