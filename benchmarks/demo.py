"""The demo: the survey group of an invented journal certifies a table before it goes to print.

The table claims to list all cycles of nine maps 3x + d up to length 40, both signs. The group asks where cycles are
likely, settles the window, and compares with the proof sheet, which has one slip.
"""

import shlex
import subprocess
import sys
import time
from pathlib import Path

FOLDER = Path("demo-dossier")
WINDOW = """\
title = "Almanac of small cycles, table 7"
[map]
multiplier = 3
offsets = ["23..39"]
[cycle]
lengths = "1..40"
sign = "both"
primitive = true
"""
# The proof sheet as the printer sent it: (offset, least element, length). One line is wrong on purpose.
SHEET = [(23, 5, 5), (23, 7, 5), (25, 7, 16), (25, 17, 8), (29, 1, 5), (29, 11, 17), (31, 13, 23), (35, 13, 8),
         (35, 19, 8), (37, 19, 6), (37, 23, 6), (37, 29, 6)]  # fmt: skip


def run(*arguments):
    """Show a command, run it, and end the demo when it fails."""
    print(f"\n$ solverkit {shlex.join(arguments)}\n", flush=True)
    status = subprocess.run([sys.executable, "-m", "solverkit", *arguments], check=False).returncode
    if status:
        sys.exit(status)


def compare():
    """Compare the proof sheet with the dossier, positive cycles only."""
    from solverkit.settle.run import settle
    from solverkit.window_file import read_window, window_from_table

    settlement = settle(window_from_table(read_window(FOLDER / "table7.toml")), FOLDER)
    settled = {(c.offset, c.least, c.length) for c in settlement.cycles if c.least > 0}
    print("\nThe proof sheet against the dossier (positive elements):")
    for claim in sorted(set(SHEET) - settled):
        print("  on the sheet, but no such cycle: d = {}, least element {}, length {}".format(*claim))
    for missing in sorted(settled - set(SHEET)):
        print("  missing on the sheet:            d = {}, least element {}, length {}".format(*missing))


def main():
    """Run the scenario."""
    begun = time.perf_counter()
    FOLDER.mkdir(exist_ok=True)
    (FOLDER / "table7.toml").write_text(WINDOW, encoding="utf-8")
    print("The survey group must certify table 7 before it goes to print: all primitive cycles of 3x + d for")
    print("odd d from 23 to 39, lengths up to 40, both signs. First: where are cycles likely, what will it cost?")
    run("triage", str(FOLDER / "table7.toml"), "--most", "12")
    print("Now every live cell is decided, by two methods of different families.")
    run("settle", str(FOLDER / "table7.toml"), "--dossier", str(FOLDER))
    compare()
    print(f"\nDone in {time.perf_counter() - begun:.0f} s. What to try next:")
    print("  .venv/bin/solverkit settle --map 3,1 --sign both --lengths 1..60")
    print("  .venv/bin/solverkit triage --map 3,1 --above 2^68 --lengths 1..10^12 --most 3")
    print("  .venv/bin/solverkit catalog")


if __name__ == "__main__":
    main()
