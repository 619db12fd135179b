"""python -m tests.coverage [--draws N] [WORD ...]: what the stated intervals are worth.

Runs every cell of both tables, or those whose line holds all the words. Exit code 1 where a cell
misses its limits. Two processes.
"""

from __future__ import annotations

import argparse
import multiprocessing
import sys
import time

from tests.coverage.tables import DRAWS, HEADS, NAMES, cells, one, text


def main() -> int:
    """Run, print, and say whether all cells hold."""
    parser = argparse.ArgumentParser(prog="python -m tests.coverage")
    parser.add_argument("--draws", type=int, default=DRAWS)
    parser.add_argument("words", nargs="*")
    asked = parser.parse_args()
    sigmas = 0.0 if asked.draws >= DRAWS else 3.0
    failed, begun = 0, time.monotonic()
    with multiprocessing.get_context("spawn").Pool(2) as pool:
        for table, name in NAMES.items():
            sys.stdout.write(f"\n{name}\n{asked.draws} draws a cell\n\n{HEADS}\n")
            jobs = [
                (cell, asked.draws, 1000 * table + i)
                for i, cell in enumerate(cells(table))
                if all(word in str(cell) for word in asked.words)
            ]
            for row in pool.imap(one, jobs):
                wrong = row.failures(sigmas)
                failed += bool(wrong)
                sys.stdout.write(text(row, wrong) + "\n")
                sys.stdout.flush()
    sys.stdout.write(f"\n{failed} cells fail; {time.monotonic() - begun:.0f} s\n")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
