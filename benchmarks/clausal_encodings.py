"""The default CNF encoding against the plain orbit encoding and a hand-written QF_BV script, in one run, alternating.

    python benchmarks/clausal_encodings.py [--limit SECONDS] [--most N] [--without-script]

Cells of cells.jsonl: irreducible (d | D). A cell counts against a rival when the rival needs a second or more; where
only the rival meets the limit, the ratio is a lower bound, marked ">"; where both do, there is none. Plain orbit and
default use the same solver, the default one. The script is what one writes in ten minutes: one bit-vector width for all
elements, one term a step, parities added up; bitwuzla reads it. Every run lists all cycles, has a process of its own,
counts encoding and solving in process time, and its answer is asserted. Cells with d > 4·U' (few odd steps) are
averaged apart.
"""

import argparse
import json
import math
import multiprocessing
import time
from pathlib import Path

from solverkit.exact.bounds import balanced_bound
from solverkit.registry import load
from solverkit.solvers._formula_method import DEFAULTS
from solverkit.window import Cell

ENCODING, SOLVER = DEFAULTS["cnf"]


def script(cell, found):
    """Return the QF_BV script, with the least elements in ``found`` excluded."""
    q, d, k = cell.multiplier, cell.offset, cell.length
    most = top = balanced_bound(cell)
    for _ in range(cell.odd):
        most = max(most, (q * most + d) // 2)
    width = (q * most + abs(d)).bit_length() + 1
    count = k.bit_length() + 1

    def number(value):
        return f"(_ bv{value % (1 << width)} {width})"

    lines = ["(set-logic QF_BV)", *(f"(declare-const n{i} (_ BitVec {width}))" for i in range(k))]
    for i in range(k):
        following = f"n{(i + 1) % k}"
        odd = f"(= ((_ extract 0 0) n{i}) #b1)"
        image = f"(bvlshr (bvadd (bvmul {number(q)} n{i}) {number(d)}) {number(1)})"
        lines.append(f"(assert (= {following} (ite {odd} {image} (bvlshr n{i} {number(1)}))))")
        lines.append(f"(assert (bvule n{i} {number(most)}))")
        if i:
            lines.append(f"(assert (bvult n0 n{i}))")
    parities = [f"((_ zero_extend {count - 1}) ((_ extract 0 0) n{i}))" for i in range(k)]
    total = parities[0]
    for parity in parities[1:]:
        total = f"(bvadd {total} {parity})"
    lines.append(f"(assert (= {total} (_ bv{cell.odd} {count})))")
    lines.append(f"(assert (bvugt n0 {number(cell.above)}))")
    lines.append(f"(assert (bvule n0 {number(top)}))")
    lines += [f"(assert (distinct n0 {number(least)}))" for least in found]
    return "\n".join([*lines, "(check-sat)"])


def by_script(cell):
    """Return the least elements that bitwuzla finds, one script after another."""
    import bitwuzla

    found = []
    while True:
        manager, options = bitwuzla.TermManager(), bitwuzla.Options()
        options.set(bitwuzla.Option.PRODUCE_MODELS, True)
        parser = bitwuzla.Parser(manager, options)
        parser.parse(script(cell, found).replace("(check-sat)", ""), True, False)
        solver = parser.bitwuzla()
        if solver.check_sat() == bitwuzla.Result.UNSAT:
            return found
        (least,) = [term for term in parser.get_declared_funs() if term.symbol() == "n0"]
        found.append(int(solver.get_value(least).value(10)))


def by_formula(encoding):
    """Return a function that lists the least elements with an encoding and the default solver."""

    def listed(cell):
        return list(load("solvers", SOLVER).least_elements(load("encodings", encoding).encode(cell)))

    return listed


RIVALS = {"default": by_formula(ENCODING), "plain": by_formula("orbit"), "script": by_script}


def _serve(pipe, rival, cell):
    RIVALS[rival](Cell(3, 1, 2, 1))  # libraries loaded beforehand
    begun = time.process_time()
    found = len(RIVALS[rival](cell))
    pipe.send((found, time.process_time() - begun))


def timed(rival, cell, limit):
    """Return (number of cycles, seconds of the process), or (None, limit)."""
    ours, theirs = multiprocessing.Pipe()
    process = multiprocessing.Process(target=_serve, args=(theirs, rival, cell))
    process.start()
    theirs.close()
    found, seconds = ours.recv() if ours.poll(limit + 2) else (None, limit)  # EOFError: the run failed
    process.kill()
    process.join()
    return (found, seconds) if seconds <= limit else (None, limit)


def mean(ratios):
    """Return the geometric mean."""
    return math.exp(sum(map(math.log, ratios)) / len(ratios))


def main():
    """Run what the command line asks for."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--limit", type=float, default=20, help="seconds for each run")
    parser.add_argument("--most", type=int, default=1000, help="at most so many cells, spread over the file")
    parser.add_argument("--without-script", action="store_true", help="leave the hand-written script out")
    arguments = parser.parse_args()
    lines = (Path(__file__).parent / "cells.jsonl").read_text().splitlines()
    records = [json.loads(line) for line in lines][:: max(1, -(-len(lines) // arguments.most))]
    rivals = ["plain"] if arguments.without_script else ["plain", "script"]
    ratios = {(rival, few): [] for rival in rivals for few in (False, True)}
    unsettled = 0
    print(f"{ENCODING}@{SOLVER} against the plain orbit and a script; seconds\n")
    print(f"{'cell':<28}{'U':>9}{'cycles':>7}{'default':>9}" + "".join(f"{rival:>9}{'ratio':>8}" for rival in rivals))
    for record in records:
        cell = Cell(record["q"], record["d"], record["k"], record["x"])
        taken = {rival: timed(rival, cell, arguments.limit) for rival in ["default", *rivals]}
        for rival, (found, _) in taken.items():
            assert found in (None, record["cycles"]), f"{cell}: {found} cycles by {rival}, not {record['cycles']}"
        name = f"({cell.multiplier}, {cell.offset}, {cell.length}, {cell.odd})"
        done, seconds = taken["default"]
        unsettled += done is None
        text = f"{name:<28}{record['bound']:>9}{record['cycles']:>7}{'' if done is not None else '>':>2}{seconds:>7.2f}"
        for rival in rivals:
            found, other = taken[rival]
            text += f"{'' if found is not None else '>':>2}{other:>7.2f}"
            counts = other >= 1 and not (found is None and done is None)
            if counts:
                ratios[rival, abs(cell.offset) > 4 * balanced_bound(cell)].append(other / seconds)
            text += f"{other / seconds:>8.1f}" if counts else f"{'':>8}"
        print(text, flush=True)
    print()
    for (rival, few), each in ratios.items():
        if each:
            kind = "d > 4·U'" if few else "other cells"
            print(f"{rival}, {kind}: geometric mean of {len(each)} ratios {mean(each):.1f}, the least {min(each):.1f}")
    print(f"{unsettled} of {len(records)} cells not settled by the default in {arguments.limit:g} s")


if __name__ == "__main__":
    main()
