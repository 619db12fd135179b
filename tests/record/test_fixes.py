"""One rule for UTC, in the view and in the reader: the later word holds, the better fix wins."""

from __future__ import annotations

import time
from pathlib import Path

import numpy as np
import pytest

from monitor.record.fixes import best
from monitor.record.reader import Record
from monitor.record.types import ClockFix, Commit
from tests.record.making import UTC0, S, writer_of

MS = 1_000_000
H = 3600 * S


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """Where the test's record goes."""
    return tmp_path / "site.db"


@pytest.mark.parametrize(
    ("fixes", "offset_ns"),
    [
        ([], None),
        ([(0, 100, 5)], 100),
        ([(0, 100, 5), (10, 117, 5)], 107),  # equal: the latest
        ([(0, 100, 5), (10, 117, 11)], 100),  # more than twice as uncertain: not good enough
        ([(0, 100, 5), (10, 117, 10)], 107),
        ([(0, 1, 10**18), (10, 117, 10), (20, 99, 10**18)], 107),  # a wrong clock before and after
        # Set by two hours, an hour in: the sure fix from before it no longer holds.
        ([(0, 0, 5 * MS), (H, 3 * H, 20 * MS), (9 * H, 11 * H, 20 * MS)], 2 * H),
        ([(0, 0, 5 * MS), (H, 3 * H, 20 * MS), (9 * H, 11 * H, 50 * MS)], 2 * H),
        ([(0, 0, 5 * MS), (H, 3 * H, 23 * H)], 0),  # within what the later one admits
        ([(0, 0, 5 * MS), (H, 25 * H + 3, 23 * H)], 24 * H + 3),
        ([(0, 0, 5 * MS), (H, 99 * H, 24 * H)], 0),  # not sure: contradicts nobody
        ([(0, 0, MS), (H, 3 * H, MS), (2 * H, 2 * H, MS)], 0),  # set there and back
    ],
)
def test_utc_follows_the_latest_good_fix(
    path: Path, fixes: list[tuple[int, int, int]], offset_ns: int | None
) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    for boot_ns, utc_ns, uncertainty_ns in fixes:
        found = (ClockFix(boot_ns, utc_ns, "test", uncertainty_ns),)
        writer.commit(boot, Commit(clock_fixes=found, events=()))
    writer.close()
    with Record.open(path) as record:
        assert record.boots()[0].utc_offset_ns == offset_ns
        assert record._all("SELECT offset_ns FROM boot_utc") == (  # noqa: SLF001
            [] if offset_ns is None else [(offset_ns,)]
        )
        kept = best(record.clock_fixes(boot))
    assert (None if kept is None else kept.utc_ns - kept.boot_ns) == offset_ns


def test_the_view_and_the_reader_find_the_same_utc(path: Path) -> None:
    """Two hundred boots with fixes drawn so that they agree, differ and tie."""
    rng = np.random.default_rng(11)
    writer = writer_of(path)
    for number in range(200):
        boot = writer.begin_boot(str(number), "machine")
        n = int(rng.integers(1, 9))
        times = rng.integers(0, 6, n).tolist()
        utc = (UTC0 + rng.integers(0, 40, n)).tolist()
        error = rng.choice([0, 1, 3, 9, 20, 10**14, 2**62, 2**63 - 1], n).tolist()
        rows = zip(times, utc, "abcdefgh", error)
        writer.commit(boot, Commit(clock_fixes=tuple(ClockFix(*row) for row in rows)))
    with Record.open(path) as record:
        found = [(b.boot, b.utc_offset_ns, b.uncertainty_ns) for b in record.boots()]
        view = record._all("SELECT * FROM boot_utc ORDER BY boot")  # noqa: SLF001
    assert found == view


def test_ten_years_of_hourly_fixes_are_read_at_once(path: Path) -> None:
    writer = writer_of(path)
    hours = [ClockFix(h * H, UTC0 + h * H, "clock", 20 * MS) for h in range(87_600)]
    writer.commit(writer.begin_boot("b", "rehearsal"), Commit(clock_fixes=tuple(hours)))
    with Record.open(path) as record:
        began = time.perf_counter()
        assert record.boots()[0].utc_offset_ns == UTC0
        assert time.perf_counter() - began < 2.0  # a rule in the square of it takes minutes
