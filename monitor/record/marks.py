"""Where raw counts lie: rows between two marks belong to one boot and are in the order of time.

A mark is set where an hour, a run or a boot begins. An index by time would dirty a page more
with every commit, for ever; a mark does so once an hour.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator

from monitor.core.readings import Batch
from monitor.record.packing import unpack

_SEGMENTS = (
    "SELECT seq, until, start_ns FROM ("
    "SELECT *, lead(seq, 1, 9223372036854775807) OVER (ORDER BY seq) AS until FROM raw_marks) "
    "WHERE boot = ? ORDER BY seq"
)
_ROWS = (
    "SELECT body, end_ns FROM raw WHERE seq >= ? AND seq < ? AND end_ns >= ? AND start_ns < ? "
    "ORDER BY seq"
)
_LAST = (
    "SELECT body, end_ns FROM raw WHERE seq >= ? AND seq < ? AND n >= ? ORDER BY seq DESC LIMIT 1"
)


def batches(db: sqlite3.Connection, boot: int, start_ns: int, end_ns: int) -> Iterator[Batch]:
    """Every batch of the boot that reaches into start_ns <= time < end_ns, uncut."""
    segments = db.execute(_SEGMENTS, (boot,)).fetchall()
    first = max((i for i, row in enumerate(segments) if row[2] <= start_ns), default=0)
    for seq, until, begins_ns in segments[first:]:
        if begins_ns >= end_ns:
            return
        for body, now_ns in db.execute(_ROWS, (seq, until, start_ns, end_ns)):
            yield unpack(body, now_ns)


def stored_until(db: sqlite3.Connection, boot: int) -> tuple[int, int]:
    """Boot times of the last reading and of the last raw row's end; -1 before the first."""
    reading, end = -1, -1
    for seq, until, _ in reversed(db.execute(_SEGMENTS, (boot,)).fetchall()):
        last = db.execute(_LAST, (seq, until, 0)).fetchone()
        end = max(end, last[1] if last else -1)
        if held := db.execute(_LAST, (seq, until, 1)).fetchone():
            reading = int(unpack(*held).times_ns[-1])
            break
    return reading, end
