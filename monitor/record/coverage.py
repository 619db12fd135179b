"""How much was measured and when nothing was: each hour of a boot in one row, minute by minute."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator, Sequence
from contextlib import closing
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from monitor.core.blocks import BLOCK_NS
from monitor.core.rows import BlockRows
from monitor.record.fetch import columns
from monitor.record.spans import HOUR_NS

if TYPE_CHECKING:
    from monitor.record.types import Boot

MINUTE_NS = 60_000_000_000
MOST_GAPS = 2000
"""More gaps than this no picture can show; the shortest are left out of a list."""

I = NDArray[np.int64]  # noqa: E741
F = NDArray[np.float64]

SQL = (
    "INSERT INTO measured_hours VALUES (?, ?, ?, ?, ?) ON CONFLICT DO UPDATE SET "
    "measured_ns = measured_ns + excluded.measured_ns, minutes = minutes | excluded.minutes"
)
KNOWN_SQL = (
    "SELECT DISTINCT start_ns FROM blocks "
    "WHERE derivation = ? AND boot = ? AND start_ns BETWEEN ? AND ?"
)
_HOURS = (
    "SELECT hour, measured_ns, minutes FROM measured_hours "
    "WHERE derivation = 0 AND boot = ? AND hour BETWEEN ? AND ?"
)
_ENDS = (
    "SELECT (SELECT min(start_ns) FROM blocks WHERE derivation = 0 AND boot = ?1), "
    "(SELECT max(start_ns) FROM blocks WHERE derivation = 0 AND boot = ?1), "
    "(SELECT max(end_ns) FROM fields WHERE derivation = 0 AND boot = ?1), "
    "(SELECT max(boot_ns) FROM clock_fixes WHERE boot = ?1)"
)
_LAST_EVENT = "SELECT boot, boot_ns FROM events ORDER BY event DESC LIMIT 1"


def _none() -> I:
    return np.empty(0, np.int64)


@dataclass(frozen=True, slots=True)
class Coverage:
    """Stretches (n,) of minutes that each hold valid readings, none longer than an hour.

    start_ns, end_ns: UTC, in order. measured_ns: valid time in the stretch, that of the poorest
    channel; where a part of a stretch is asked for, it is taken as spread evenly.
    until_ns: UTC of the last sign of life in the record; 0 where there is none.
    """

    start_ns: I = field(default_factory=_none)
    end_ns: I = field(default_factory=_none)
    measured_ns: F = field(default_factory=lambda: np.empty(0))
    until_ns: int = 0

    def measured_s(self, start_ns: int, end_ns: int) -> float:
        """Seconds of [start, end) in UTC with valid readings of every channel."""
        if end_ns <= start_ns:
            return 0.0
        overlap = np.minimum(self.end_ns, end_ns) - np.maximum(self.start_ns, start_ns)
        part = np.maximum(overlap, 0) / np.maximum(self.end_ns - self.start_ns, 1)
        return min(float((self.measured_ns * part).sum()), end_ns - start_ns) / 1e9

    def share(self, start_ns: int, end_ns: int) -> float:
        """Measured part of [start, end), 0 to 1; 0 where the span is empty."""
        return self.measured_s(start_ns, end_ns) * 1e9 / max(end_ns - start_ns, 1)

    def gaps(self, start_ns: int, end_ns: int, at_most: int = MOST_GAPS) -> list[tuple[int, int]]:
        """Parts of [start, end) in which no minute was measured; the at_most longest, in order.

        A last part of no more than a minute is none: what it held may not be written yet.
        """
        inside = (self.end_ns > start_ns) & (self.start_ns < end_ns)
        first, last = self.start_ns[inside], self.end_ns[inside]
        free_from = np.maximum.accumulate(np.r_[start_ns, last])
        until = np.r_[first, end_ns]
        length = until - free_from
        is_gap = length > 0
        is_gap[-1] = length[-1] > MINUTE_NS or not first.size
        found = np.flatnonzero(is_gap)
        if found.size > at_most:
            found = np.sort(found[np.argsort(-length[found], kind="stable")[:at_most]])
        return list(zip(free_from[found].tolist(), until[found].tolist()))


def of_blocks(
    derivation: int, boot: int, rows: BlockRows, known: set[int]
) -> Iterator[tuple[int, ...]]:
    """Parameters of SQL for the blocks (at least one) whose start is not known yet."""
    order = np.argsort(rows.start_ns, kind="stable")
    starts, first = np.unique(rows.start_ns[order], return_index=True)
    covered = np.minimum.reduceat(rows.covered_ns[order], first)
    fresh = (covered > 0) & ~np.isin(starts, np.fromiter(known, np.int64, len(known)))
    starts, covered = starts[fresh], covered[fresh]
    hours = starts // HOUR_NS
    bits = np.left_shift(np.int64(1), starts % HOUR_NS // MINUTE_NS)
    for hour in np.unique(hours).tolist():
        inside = hours == hour
        minutes = int(np.bitwise_or.reduce(bits[inside]))
        yield derivation, boot, hour, int(covered[inside].sum()), minutes


def coverage(db: sqlite3.Connection, boots: Sequence[Boot], span: tuple[int, int]) -> Coverage:
    """What was measured in the span (UTC ns); boots without a clock fix are left out."""
    last = dict(db.execute(_LAST_EVENT).fetchall())
    parts: list[tuple[I, I, F]] = []
    until_ns = 0
    for boot in boots:
        offset = boot.utc_offset_ns
        if offset is None:
            continue
        first, latest, window, fix = db.execute(_ENDS, (boot.boot,)).fetchone()
        ends = [window, fix, last.get(boot.boot), None if latest is None else latest + BLOCK_NS]
        known = [end + offset for end in ends if end is not None]
        until_ns = max([until_ns, *known])
        if first is not None:
            asked = (boot.boot, (span[0] - offset) // HOUR_NS, (span[1] - offset) // HOUR_NS)
            with closing(db.execute(_HOURS, asked)) as cursor:
                start, end, measured = _stretches(*columns(cursor, "iii"))
            start, end = np.maximum(start, first), np.minimum(end, latest + BLOCK_NS)
            parts.append((start + offset, end + offset, measured))
    if not parts:
        return Coverage(until_ns=until_ns)
    start, end, measured = (np.concatenate(part) for part in zip(*parts))
    return Coverage(*once(start, end, measured), until_ns)


def once(start: I, end: I, measured: F) -> tuple[I, I, F]:
    """Stretches in order, none over another: time measured in two boots counts once."""
    order = np.argsort(start, kind="stable")
    start, end, measured = start[order], end[order], measured[order]
    before = np.r_[np.int64(-(2**62)), np.maximum.accumulate(end)[:-1]]
    free = np.maximum(start, before)
    kept = free < end
    share = (end - free)[kept] / np.maximum((end - start)[kept], 1)
    return free[kept], end[kept], measured[kept] * share


def _stretches(hour: I, measured_ns: I, minutes: I) -> tuple[I, I, F]:
    """Runs of minutes that are set, in boot time, with their part of the hour's valid time."""
    bits = np.zeros((hour.size, 62), np.int8)
    bits[:, 1:61] = (minutes[:, None] >> np.arange(60)) & 1
    edges = np.diff(bits, axis=1)
    row, begin = np.nonzero(edges == 1)
    _, end = np.nonzero(edges == -1)
    share = (end - begin) / np.maximum(bits.sum(axis=1, dtype=np.int64), 1)[row]
    base = hour[row] * HOUR_NS
    return base + begin * MINUTE_NS, base + end * MINUTE_NS, measured_ns[row] * share
