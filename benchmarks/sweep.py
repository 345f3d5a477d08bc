"""Ratios of the sweep to a plain C loop and a plain numba loop, all in one run, on one core and in processor time.

Needs gcc. The plain loops know nothing but the definition: the
orbit of each odd n is followed until it is below n, returns to n, or exceeds the most steps or odd steps allowed.
Every part asserts that all of them find the same cycles.
"""

from __future__ import annotations

import ctypes
import subprocess
import sys
import tempfile
from pathlib import Path
from time import thread_time

import numpy as np
from numba import njit

from solverkit.engines._sweep_ranges import cell_bound, profile
from solverkit.engines._sweep_search import Search
from solverkit.window import Cell

PLAIN_C = """
#include <stdint.h>
#define LOOP(NAME, WORD) \\
long NAME(int64_t q, int64_t d, int64_t first, int64_t last, int64_t length, int64_t odd, int64_t *out) { \\
    long count = 0; \\
    for (int64_t n = first | 1; n <= last; n += 2) { \\
        WORD v = n; int64_t k = 0, x = 0; \\
        do { \\
            if (v & 1) { v = (q * v + d) >> 1; x++; } else v >>= 1; \\
            k++; \\
        } while (v > n && k < length && x <= odd); \\
        if (v == n && x <= odd) { out[3 * count] = n; out[3 * count + 1] = k; out[3 * count + 2] = x; count++; } \\
    } \\
    return count; \\
}
LOOP(narrow, int64_t)
LOOP(wide, __int128)
long simplest(uint64_t first, uint64_t last) {
    long back = 0;
    for (uint64_t n = first | 1; n <= last; n += 2) {
        uint64_t v = n;
        do v = v & 1 ? (3 * v + 1) >> 1 : v >> 1; while (v > n);
        back += v == n;
    }
    return back;
}
long simplest_wide(uint64_t first, uint64_t last) {
    long back = 0;
    for (uint64_t n = first | 1; n <= last; n += 2) {
        unsigned __int128 v = n;
        do v = v & 1 ? (3 * v + 1) >> 1 : v >> 1; while (v > n);
        back += v == n;
    }
    return back;
}
"""


def compiled() -> ctypes.CDLL:
    folder = Path(tempfile.mkdtemp())
    (folder / "plain.c").write_text(PLAIN_C)
    command = ["gcc", "-O3", "-march=native", "-shared", "-fPIC", "-o", "plain.so", "plain.c"]
    subprocess.run(command, cwd=folder, check=True)
    library = ctypes.CDLL(str(folder / "plain.so"))
    for name in ("narrow", "wide"):
        getattr(library, name).argtypes = [ctypes.c_int64] * 6 + [ctypes.c_void_p]
    for name in ("simplest", "simplest_wide"):
        getattr(library, name).argtypes = [ctypes.c_uint64] * 2
    return library


@njit(nogil=True)
def plain_numba(q, d, first, last, length, odd):
    back = 0
    for n in range(first | 1, last + 1, 2):
        v, k, x = n, 0, 0
        while True:
            if v & 1:
                v = (q * v + d) >> 1
                x += 1
            else:
                v >>= 1
            k += 1
            if v <= n or k >= length or x > odd:
                break
        back += v == n and x <= odd
    return back


def swept(cells: tuple[Cell, ...], first: int, last: int) -> set[tuple[int, int, int]]:
    """Return (n, k, x) of the cycles that the sweep finds in first … last."""
    shape = profile(cells)
    search = Search(cells[0].multiplier, cells[0].offset, shape.low, shape.limits, shape.reaching)
    for _ in search.stretch(first, last):
        pass
    return search.found


def timed(action, *arguments, least: float = 0.3):
    """Return the result of ``action`` and its processor time, the mean over at least ``least`` seconds."""
    begun, runs = thread_time(), 0
    while thread_time() - begun < least:
        result = action(*arguments)
        runs += 1
    return result, (thread_time() - begun) / runs


def line(title: str, rate: float, c_rate: float, numba_rate: float, goal: int) -> None:
    print(
        f"{title:46} {rate:9.2e}/s  C {c_rate:9.2e}/s  numba {numba_rate:9.2e}/s  "
        f"{rate / c_rate:7.1f} x C  {rate / numba_rate:7.1f} x numba   (goal {goal})"
    )


def falling(library: ctypes.CDLL) -> None:
    """3x+1 at 2^30, 2^40, 2^50 and 2^62; rates are integers per second."""
    # A cell of 3x+1 that reaches beyond 2^70, so that every candidate here is asked for.
    cells = (Cell(3, 1, 10_439_860_591, 6_586_818_670),)
    for exponent, part in ((30, 26), (40, 26), (50, 25), (62, 24)):
        start = 1 << exponent
        plain = library.simplest if exponent < 60 else library.simplest_wide
        back, seconds = timed(plain, start, start + (1 << part) - 1)
        assert back == 0
        c_rate = (1 << part) / seconds
        plain_numba(3, 1, start, start, 10_000, 10_000)
        size = 1 << 24
        if exponent < 60:
            back, seconds = timed(plain_numba, 3, 1, start, start + size - 1, 10_000, 10_000)
            assert back == 0
        numba_rate = size / seconds if exponent < 60 else float("nan")
        for width in (34, 36) if exponent > 36 else (28,):
            last = start + (1 << width) - 1
            assert swept(cells, start, last) == set()
            found, seconds = timed(swept, cells, start, last)
            assert found == set()
            line(f"3x+1 at 2^{exponent}, 2^{width} integers", (1 << width) / seconds, c_rate, numba_rate, 150)


def growing(library: ctypes.CDLL) -> None:
    """Single cells of 5x+d and 7x+d, at 0.3, 0.5, 0.7 and 0.9 of the bound."""
    for q, d, k, x in GROWING:
        cell = Cell(q, d, k, x)
        bound = cell_bound(cell)
        assert cell.determinant % d == 0
        ours = theirs = 0.0
        for tenth in (1, 3, 5, 7, 9):
            start, small, large = bound * tenth // 10, 1 << 20, 1 << 30
            rows = np.zeros((1 << 16, 3), np.int64)
            count, plain = timed(library.wide, q, d, start, start + small - 1, k, x, rows.ctypes.data)
            swept((cell,), start, start + large - 1)
            found, seconds = timed(swept, (cell,), start, start + large - 1)
            near = {row for row in found if start <= row[0] < start + small and row[1:] == (k, x)}
            assert near == {(n, *rest) for n, *rest in rows[:count].tolist() if tuple(rest) == (k, x)}
            print(f"  at {tenth / 10:.1f} U: {large / seconds:.2e}/s, {plain / small * large / seconds:.1f} x C")
            ours, theirs = ours + seconds / large, theirs + plain / small
        line(f"{q}x{d:+d} k={k} x={x} U={bound:.2e}", 5 / ours, 5 / theirs, float("nan"), 25)


#: Cells whose offset divides D and whose bound is near 2^38, found by factoring D.
GROWING = [
    (5, -7283034071, 58, 25),
    (5, -6249240527, 74, 32),
    (7, 435615361, 73, 26),
    (7, -6865458777, 84, 30),
]


def main() -> None:
    library = compiled()
    if "growing" not in sys.argv:
        falling(library)
    growing(library)


if __name__ == "__main__":
    main()
