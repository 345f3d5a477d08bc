"""Times of tally and census beside plain compiled loops, in one run, answers asserted.

    python benchmarks/tally_census.py            everything, about two minutes on one core
    python benchmarks/tally_census.py --quick    smaller jobs, about ten seconds

Times are CPU seconds of one core. The baselines are the definitions made code: for the count a table over
(odd count, residue) filled letter by letter over the whole length modulo one 62-bit prime (an exact count needs
⌈bits/62⌉ such passes); for the census a loop over all words with x ones, each reduced to its least rotation.
"""

from __future__ import annotations

import argparse
import time

import numpy as np
from numba import njit

from solverkit.engines._tally_count import solution_words
from solverkit.engines.census import ENGINE as CENSUS
from solverkit.engines.census import offset_counts, primitive_cycles
from solverkit.engines.tally import ENGINE as TALLY
from solverkit.engines.tally import modulus_of
from solverkit.methods import Budget
from solverkit.window import Cell
from solverkit.words import lyndon_count

PRIME = (1 << 62) - 57


@njit
def plain_table(twos, powers, odd, modulus, prime):
    table = np.zeros((odd + 1, modulus), np.uint64)
    table[0, 0] = 1
    for step in range(twos.shape[0]):
        for a in range(min(step, odd - 1), -1, -1):
            shift = twos[step] * powers[odd - 1 - a] % modulus
            source, into = table[a], table[a + 1]
            for r in range(modulus):
                place = r + shift
                if place >= modulus:
                    place -= modulus
                total = into[place] + source[r]
                into[place] = total - prime if total >= prime else total
    return table[odd, 0]


@njit
def plain_divisor(a, b):
    while b:
        a, b = b, a % b
    return a


@njit
def plain_census(length, odd, multiplier, size, most):
    """Return the number of words that are their own least rotation and a cycle for some |d| up to ``most``."""
    found, word, end = 0, (1 << odd) - 1, 1 << length
    while word < end:
        rotated, least = word, True
        for _ in range(length - 1):
            rotated = (rotated >> 1) | ((rotated & 1) << (length - 1))
            if rotated <= word:
                least = False
                break
        if least:
            beta = 0
            for position in range(length):
                if word >> position & 1:
                    beta = beta * multiplier + (1 << position)
            if size // plain_divisor(size, beta) <= most:
                found += 1
        lowest = word & -word
        ripple = word + lowest
        word = ripple | (((word ^ ripple) >> 2) // lowest)
    return found


def timed(job):
    started = time.process_time()
    answer = job()
    return answer, time.process_time() - started


def line(name, seconds, note=""):
    print(f"{name:<58}{seconds:>9.2f} s  {note}", flush=True)


def cell_with_modulus(multiplier, length, odd, low, high):
    """Return the cell (q, D/M, k, x) with the largest divisor M of D between ``low`` and ``high``."""
    determinant = 2**length - multiplier**odd
    modulus = next(m for m in range(high, low, -1) if m % 2 and determinant % m == 0)
    return Cell(multiplier, determinant // modulus, length, odd)


def benchmark_count(length, odd, low, high):
    cell = cell_with_modulus(3, length, odd, low, high)
    modulus = modulus_of(cell)
    twos = np.array([pow(2, i, modulus) for i in range(length)], np.int64)
    powers = np.array([pow(3, i, modulus) for i in range(odd)], np.int64)
    plain, plain_seconds = timed(lambda: plain_table(twos, powers, odd, modulus, np.uint64(PRIME)))
    words, seconds = timed(lambda: solution_words(3, length, odd, modulus))
    assert words % PRIME == int(plain)
    passes = -(-words.bit_length() // 62)
    ratio = passes * plain_seconds / seconds
    line(f"count (3, D/M, {length}, {odd}), M = {modulus}", seconds, f"{words.bit_length()} bits")
    line("  plain table, one of the passes", plain_seconds, f"{passes} passes: ratio {ratio:.1f}")


def benchmark_estimates(shapes):
    worst = 1.0
    for engine, cell in shapes:
        (batch,) = engine.batches([cell])
        (piece,) = engine.pieces(batch, 1e9)
        result, seconds = timed(lambda engine=engine, piece=piece: engine.run(piece, Budget()))
        assert result.complete
        ratio = engine.estimate([cell]) / seconds
        worst = max(worst, ratio, 1 / ratio)
        name = f"{engine.name} (3, {cell.length}, {cell.odd}), |D|/gcd of {modulus_of(cell).bit_length()} bits"
        line(name, seconds, f"estimate / truth {ratio:.2f}")
    print(f"  estimates are off by a factor of at most {worst:.2f}")


def benchmark_census(length, odd, most):
    size = abs(2**length - 3**odd)
    plain, plain_seconds = timed(lambda: plain_census(length, odd, 3, size, most))
    counts, seconds = timed(lambda: offset_counts(3, length, odd, most))
    assert sum(counts.values()) == plain
    line(f"census (3, {length}, {odd}), |d| ≤ {most}", seconds, f"{lyndon_count(length, odd)} words, {plain} cycles")
    line("  plain loop over all words", plain_seconds, f"ratio {plain_seconds / seconds:.1f}")


def benchmark_all_offsets(longest, most):
    def job():
        number, offsets = 0, set()
        for cycle in primitive_cycles(3, range(1, longest + 1), offsets_at_most=most):
            number += 1
            offsets.add(cycle.offset)
        return number, len(offsets)

    (number, offsets), seconds = timed(job)
    line(f"all cycles, k ≤ {longest}, |d| ≤ {most}", seconds, f"{number} cycles of {offsets} offsets")

    def everything():
        return sum(sum(offset_counts(3, longest, odd).values()) for odd in range(1, longest + 1))

    total, seconds = timed(everything)
    assert total == sum(lyndon_count(longest, odd) for odd in range(1, longest + 1))
    line(f"all offsets of all words of length {longest}", seconds, f"{total} primitive cycles counted by offset")


def main():
    parser = argparse.ArgumentParser(description="Times of tally and census beside plain loops.")
    parser.add_argument("--quick", action="store_true", help="smaller jobs")
    quick = parser.parse_args().quick
    # Compile, so that no time below contains it.
    plain_table(np.ones(4, np.int64), np.ones(4, np.int64), 2, 5, np.uint64(PRIME))
    plain_census(6, 3, 3, 37, 37)
    solution_words(3, 12, 7, 5)
    assert sum(offset_counts(3, 12, 6).values()) == lyndon_count(12, 6)

    benchmark_count(100, 62, 50_000, 200_000)
    if not quick:
        benchmark_count(200, 124, 1_000_000, 1_100_000)
    benchmark_census(26, 16, 1000)
    if not quick:
        benchmark_census(32, 20, 10**6)
    benchmark_all_offsets(20 if quick else 30, 10**6)
    if not quick:
        cells = [
            (TALLY, cell_with_modulus(3, 200, 124, 1_000_000, 1_100_000)),
            (TALLY, cell_with_modulus(3, 600, 375, 50_000, 100_000)),
            (TALLY, cell_with_modulus(3, 44, 24, 1_000_000, 4_000_000)),
            (CENSUS, Cell(3, 1, 40, 25)),
            (CENSUS, Cell(3, 1, 39, 17)),
            (CENSUS, cell_with_modulus(3, 36, 22, 100, 1000)),
        ]
        benchmark_estimates(cells)


if __name__ == "__main__":
    main()
