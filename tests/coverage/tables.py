"""The two tables: which cells there are, how they are counted, what they are judged by, print."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import NamedTuple

import numpy as np

from monitor.core.distributions import CONFIDENCE
from monitor.core.flags import LOWER_BOUND, UPPER_BOUND
from tests.coverage.cells import Cell, Outcome, run

DRAWS = 10_000
LEVELS_DBM = (
    (-72.0, -62.0), (-62.0, -52.0), (-52.0, -42.0), (-42.0, -32.0), (-32.0, -22.0),
    (-22.0, -12.0), (-12.0, -2.0), (-2.0, 5.0), (12.0, 22.0),
)  # fmt: skip
"""Mean power on all axes together. The noise of three axes known to 10 % of -57 dBm each has its
detection limit at -57 dBm, in the second; the range of an axis ends at 5 dBm, so the last is above
it on one axis at least. Peaks of bursts leave the range far below that."""
MID, STRADDLING = (-32.0, -22.0), (-62.0, -52.0)
CLASSES = ("carrier", "noise", "bursts", "mixed")

TWO_SIDED = {1: (0.94, 0.96), 2: (0.93, 1.0)}
BOUND = {1: (0.95, 1.0), 2: (0.93, 1.0)}
ALONE = 0.25
"""A kind of statement is judged alone where it makes up this share of a cell, else with the others.

Which kind a draw becomes depends on what its instrument reads: the few that just became a bound are
those that read too high (or too low), so their share tells of the sorting and not of the interval.
"""


def cells(table: int) -> Iterator[Cell]:
    """All cells of a table: class by decade, then slower readings, no noise declared, logs."""
    for signal in CLASSES:
        for low, high in LEVELS_DBM:
            yield Cell(table, signal, low, high)
    for signal in CLASSES:
        for rate_hz in (1.0, 0.1):
            yield Cell(table, signal, *MID, rate_hz=rate_hz)
    if table == 1:
        for signal in CLASSES:
            for low, high in LEVELS_DBM[:3]:
                yield Cell(table, signal, low, high, noise=False)
        for signal in CLASSES:
            for low, high in (STRADDLING, MID):
                yield Cell(table, signal, low, high, logs=True)


class Count(NamedTuple):
    """A cell's statements of one kind: how many, and how many of them are true."""

    n: int
    inside: int

    @property
    def share(self) -> float:
        """Share that holds the truth."""
        return self.inside / self.n if self.n else float("nan")

    def range95(self) -> tuple[float, float]:
        """Where the true share lies with 95 %: Wilson's interval (1927, from memory)."""
        z, n, p = 1.959964, self.n, self.share
        middle, half = p + z * z / (2 * n), z * np.sqrt(p * (1 - p) / n + z * z / (4 * n * n))
        return max(middle - half, 0.0) / (1 + z * z / n), (middle + half) / (1 + z * z / n)


class Row(NamedTuple):
    """A cell as counted. u_db: median of the two-sided ones; most: median of a bound over truth,
    dB; least: median of what is said at least over truth, dB; opened: neither end is stated."""

    cell: Cell
    two_sided: Count
    below: Count
    at_least: Count
    opened: int
    u_db: float
    most_db: float
    least_db: float

    @property
    def draws(self) -> int:
        """Draws of the cell."""
        return self.two_sided.n + self.below.n + self.at_least.n + self.opened

    def failures(self, sigmas: float = 0.0) -> list[str]:
        """What misses its limits, each widened by so many binomial deviations.

        Kinds with fewer draws than the whole campaign asks of a cell get three of them, for
        their share is not known better.
        """
        kinds = (
            ("two-sided", self.two_sided, self._two_sided_limits()),
            ("below", self.below, BOUND[self.cell.table]),
            ("at least", self.at_least, BOUND[self.cell.table]),
        )
        every = Count(sum(c.n for _, c, _ in kinds), sum(c.inside for _, c, _ in kinds))
        judged = [kind for kind in kinds if kind[1].n >= ALONE * self.draws]
        if every.n:
            judged.append(("all", every, (TWO_SIDED[self.cell.table][0], 1.0)))
        said = []
        for name, count, (low, high) in judged:
            wide = max(sigmas, 0.0 if count.n > 0.9 * DRAWS else 3.0)
            wide *= np.sqrt(CONFIDENCE * (1 - CONFIDENCE) / count.n)
            if not low - wide <= count.share <= high + wide:
                said.append(f"{name} {count.share:.2%}, not {low:.0%} to {high:.0%}")
        return said

    def _two_sided_limits(self) -> tuple[float, float]:
        """Without a declared noise what a weak reading stands for is a bound on the doubt and no
        distribution: there is nothing that could be drawn, and too many inside is no mistake."""
        low, high = TWO_SIDED[self.cell.table]
        return low, high if self.cell.noise else 1.0


def counted(cell: Cell, outcome: Outcome) -> Row:
    """Count a cell's statements by kind."""
    inside = (outcome.low <= outcome.truth) & (outcome.truth <= outcome.high)
    lower, upper = (outcome.flags & int(bits) != 0 for bits in (LOWER_BOUND, UPPER_BOUND))
    two, below, least = ~lower & ~upper, upper & ~lower, lower & ~upper

    def count(which: np.ndarray) -> Count:
        return Count(int(which.sum()), int((inside & which).sum()))

    def median(values: np.ndarray) -> float:
        return float(np.median(values)) if values.size else float("nan")

    def over_truth_db(end: np.ndarray, which: np.ndarray) -> float:
        with np.errstate(divide="ignore"):
            return median(10.0 * np.log10(end[which] / outcome.truth[which]))

    return Row(
        cell,
        count(two),
        count(below),
        count(least),
        int((lower & upper).sum()),
        median(outcome.u_db[two]),
        over_truth_db(outcome.high, below),
        over_truth_db(outcome.low, least),
    )


def one(job: tuple[Cell, int, int]) -> Row:
    """Run and count: (cell, draws, seed)."""
    cell, draws, seed = job
    return counted(cell, run(cell, draws, seed))


HEADS = (
    "class    level, dBm  reads  note     | two-sided: of  inside   95 % range of it  median U"
    " | below: of  inside  bound | at least: of  inside   from | open"
)
NAMES = {
    1: "1. Errors from the budget's own distributions (two-sided 94 to 96 %, bounds 95 % or more)",
    2: "2. Errors of a world that the budget does not share (93 % or more)",
}


def text(row: Row, failures: Iterable[str]) -> str:
    """A line of the table; U, and how far bounds lie from the truth (medians), in dB."""
    c = row.cell
    note = "logs" if c.logs else "" if c.noise else "no noise"
    said = f"{c.signal:8} {c.low_dbm:4.0f} to {c.high_dbm:3.0f} {c.rate_hz:4.4g}/s  {note:8} |"
    two = row.two_sided
    if two.n:
        low, high = two.range95()
        said += f"{two.n / row.draws:13.1%}  {two.share:7.2%}  {low:7.2%} to {high:7.2%}"
        said += f"  {row.u_db:5.2f} dB"
    else:
        said += " " * 51
    for count, db, width in ((row.below, row.most_db, 5), (row.at_least, row.least_db, 7)):
        part = (
            f"{count.n / row.draws:{width + 4}.1%} {count.share:7.2%} {db:+6.1f}" if count.n else ""
        )
        said += f" | {part:{width + 19}}"
    said += f" | {row.opened / row.draws:.1%}" if row.opened else " |"
    return said + "".join(f"  FAILS: {what}" for what in failures)
