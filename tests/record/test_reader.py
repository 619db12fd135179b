"""A restarting daemon gets the same bits back; others read beside it and after it."""

from __future__ import annotations

import os
import shutil
import sqlite3
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np
import pytest

from monitor.core.errors import RecordError
from monitor.core.readings import empty_batch
from monitor.core.rows import Event
from monitor.inforce import Before, before_of
from monitor.record import uses
from monitor.record.reader import Record
from monitor.record.types import Commit
from tests.record.making import (
    CHANNELS,
    MINUTE,
    SCOPES,
    UTC0,
    S,
    blocks,
    check_same,
    exposure_rows,
    field_rows,
    fix,
    raw,
    writer_of,
)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """Where the test's record goes."""
    return tmp_path / "site.db"


def test_a_refill_is_equal_to_the_bit(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    batches = [raw(10 * i, 100, seed=i, spacing_s=0.1) for i in range(200)]
    closed = [blocks(10 * i, 1, seed=i) for i in range(200)]
    for batch, block in zip(batches, closed):
        writer.commit(boot, Commit(batch, block))
    with Record.open(path) as record:  # the writer is still at it
        found, readings = record.resume(boot, 500 * S)
    writer.close()
    for name in ("energy_w_ns", "start_ns", "covered_ns", "min_w", "max_w"):
        whole = np.concatenate([getattr(rows, name) for rows in closed[50:]])
        assert getattr(found, name).tobytes() == whole.tobytes(), name
    assert len(readings) == 150
    for batch, again in zip(batches[50:], readings):
        check_same(again, batch)


def test_raw_counts_are_cut_to_the_span(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    whole = raw(0, 50)
    writer.commit(boot, Commit(whole))
    writer.commit(boot, Commit(empty_batch(3, 60 * S)))
    writer.commit(boot, Commit(empty_batch(3, 60 * S)))
    writer.close()
    first, last = int(whole.times_ns[10]), int(whole.times_ns[20])
    with Record.open(path) as record:
        (cut,) = record.raw_batches(boot, first, last)
        everything = list(record.raw_batches(boot))
        assert record.last_reading_ns(boot) == whole.times_ns[-1]
        assert record.last_reading_ns(boot + 1) is None
    assert cut.times_ns.tolist() == whole.times_ns[10:20].tolist()
    assert cut.counts.tolist() == whole.counts[10:20].tolist()
    assert cut.temperature_dc.tolist() == whole.temperature_dc[10:20].tolist()
    assert cut.now_ns == last
    assert [b.n for b in everything] == [50, 0]  # silence is kept, once
    assert everything[1].now_ns == 60 * S


def test_latest_is_of_the_boot_written_last(path: Path) -> None:
    writer = writer_of(path)
    with Record.open(path) as record:
        assert record.latest() is None
    past = writer.begin_boot("past", "rehearsal")
    writer.commit(past, fix(0, UTC0 + 10**18))
    writer.commit(past, Commit(fields=field_rows(np.array([9 * MINUTE]), np.array([9.0]))))
    now = writer.begin_boot("now", "machine")
    with Record.open(path) as record:
        latest = record.latest()
        assert latest is not None
        assert latest.boot == past  # the new boot has no window yet
    ends = MINUTE * np.array([1, 2])
    writer.commit(
        now,
        Commit(
            raw(0, 130), fields=field_rows(ends, np.array([1.0, 4.0])),
            exposures=exposure_rows(ends, np.array([0.5, np.nan])),
        ),
    )  # fmt: skip
    with Record.open(path) as record:
        latest = record.latest()
        last_ns = record.last_reading_ns(now)
    writer.close()
    assert latest is not None
    assert (latest.boot, latest.kind, latest.end_ns) == (now, "machine", 2 * MINUTE)
    assert (latest.utc_ns, latest.last_reading_utc_ns) == (None, None)  # no clock fix: no UTC
    assert latest.last_reading_ns == last_ns
    (field,) = latest.fields
    assert field.e_mean == 2.0
    assert field.e_high == pytest.approx(8.0**0.5)
    (exposure,) = latest.exposures
    assert exposure.scope == SCOPES[1]
    assert np.isnan(exposure.ratio_mean)


def test_events_by_span(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    lost = writer.begin_boot("no clock", "machine")
    events = tuple(Event(i * S, "note", f"n{i}", {"text": "ü", "i": i}) for i in range(10))
    writer.commit(boot, Commit(events=events, clock_fixes=fix().clock_fixes))
    writer.commit(lost, Commit(events=(Event(5, "note", "lost", {}),)))
    writer.close()
    with Record.open(path) as record:
        spanned = record.events(UTC0 + 2 * S, UTC0 + 5 * S)
        newest = record.events(limit=2)
        assert [c.name for c in record.channels()] == [name for _, name, _, _ in CHANNELS]
    assert [(e.utc_ns, e.name, e.body) for e in spanned] == [
        (UTC0 + i * S, f"n{i}", {"text": "ü", "i": i}) for i in (2, 3, 4)
    ]
    assert [(e.utc_ns, e.name) for e in newest] == [(UTC0 + 9 * S, "n9"), (None, "lost")]


def test_a_record_that_is_not_there(path: Path) -> None:
    with pytest.raises(RecordError, match="no such record; start fieldsill measure"):
        Record.open(path)


def test_a_reader_cannot_write(path: Path) -> None:
    writer_of(path).close()
    with Record.open(path) as record:
        for query in ("DELETE FROM channels", "PRAGMA user_version = 7"):
            with pytest.raises(RecordError, match="readonly"):
                record._all(query)  # noqa: SLF001


def test_a_torn_record_is_one_clear_error(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    writer.commit(boot, Commit(raw(0, 2000), blocks(0, 500)))
    writer.close()
    whole = path.read_bytes()
    path.write_bytes(whole[:60_000] + b"\xa5" * (len(whole) - 60_000))
    with pytest.raises(RecordError) as caught, Record.open(path) as record:
        record.blocks(boot)
    assert "\n" not in str(caught.value)


_ELSEWHERE = """
import sys
from monitor.record.reader import Record
with Record.open(sys.argv[1]) as record:
    print(record.blocks(1).n.size)
"""


def _as_nobody(code: str, *arguments: str) -> subprocess.CompletedProcess[str]:
    who = ["setpriv", "--reuid=65534", "--regid=65534", "--clear-groups"]
    return subprocess.run(
        [*who, sys.executable, "-c", code, *arguments], capture_output=True, text=True, check=False,
        cwd="/",
    )  # fmt: skip


@pytest.mark.skipif(
    os.geteuid() != 0 or shutil.which("setpriv") is None,
    reason="needs root and setpriv to read as another user",
)
@pytest.mark.parametrize("closed", [True, False])
def test_another_user_reads_during_and_after(closed: bool) -> None:
    """Without write permission, WAL's side files cannot be made once the writer has closed."""
    if _as_nobody("import monitor.record.reader").returncode:
        pytest.skip("another user may not run this interpreter")
    with tempfile.TemporaryDirectory(dir="/tmp") as name:
        folder = Path(name)
        folder.chmod(0o755)
        writer = writer_of(folder / "site.db")
        boot = writer.begin_boot("b", "machine")
        writer.commit(boot, Commit(blocks=blocks(0, 7)))
        if closed:
            writer.close()
        done = _as_nobody(_ELSEWHERE, str(folder / "site.db"))
        if not closed:
            writer.close()
        assert (done.stdout.strip(), done.stderr) == ("21", "")


def test_boots_and_runs_that_alternate_are_kept_apart(path: Path) -> None:
    """Three runs, two boots in turn, hours crossed: each boot reads back its own and all of it."""
    said: dict[int, list[int]] = {1: [], 2: []}
    for run in range(3):
        writer = writer_of(path)
        for boot in (1, 2):
            assert writer.begin_boot(f"b{boot}", "machine") == boot
            for part in range(5):
                batch = raw(3000 * (5 * run + part), 40, seed=boot)
                writer.commit(boot, Commit(batch))
                said[boot] += batch.times_ns.tolist()
        writer.close()
    with Record.open(path) as record:
        for boot, times in said.items():
            found = [t for b in record.raw_batches(boot) for t in b.times_ns.tolist()]
            assert found == times
            assert record.last_reading_ns(boot) == times[-1]
            cut = [t for b in record.raw_batches(boot, times[77], times[333]) for t in b.times_ns]
            assert cut == times[77:333]
        assert list(record.raw_batches(3)) == []


@pytest.mark.parametrize(
    ("kind", "name", "body", "words"),
    [
        ("calibration", "drift", "{}", "names no documents"),
        ("calibration", "drift", '{"documents": [1], "drift_db": 1}', "names no documents"),
        ("calibration", "drift", '{"documents": ["a"], "drift_db": null}', "has no drift_db"),
        ("calibration", "drift", '{"documents": ["a"], "drift_db": true}', "has no drift_db"),
        ("calibration", "drift", '{"documents": ["a"], "drift_db": NaN}', "a drift_db of nan"),
        ("calibration", "drift", '{"documents": ["a"], "drift_db": -1e308}', "drift_db of -1e"),
        ("calibration", "drift", "[]", "is no JSON object"),
        ("start", "daemon", "[]", "is no JSON object"),
        ("start", "daemon", "text", "is no JSON"),
    ],
)
def test_an_event_that_is_none_is_one_clear_error(
    path: Path, kind: str, name: str, body: str, words: str
) -> None:
    """A drift that is passed over would leave an uncertainty that is too small."""
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    writer.close()
    db = sqlite3.connect(path)
    values = (boot, kind, name, body)
    db.execute(
        "INSERT INTO events (boot, boot_ns, kind, name, body) VALUES (?, 5, ?, ?, ?)", values
    )
    db.commit()
    db.close()
    with Record.open(path) as record:
        with pytest.raises(RecordError, match=words) as caught:
            record.calibrations()
        assert "\n" not in str(caught.value)
        assert str(path) in str(caught.value)
        if kind == "start":
            with pytest.raises(RecordError, match=words):
                record.starts(boot)
    assert before_of(path) == Before()


def test_what_calibrations_rest_on_is_found_among_many_events_by_an_index(path: Path) -> None:
    """Every look at the past asks for it: it must not read a year of a device's events."""
    writer_of(path).close()
    with Record.open(path) as record:
        for query in (uses._STARTS, uses._DRIFTS):  # noqa: SLF001
            plan = record._all(f"EXPLAIN QUERY PLAN {query}")  # noqa: SLF001
            assert "calibration_events" in str(plan)


def test_events_of_a_rare_kind(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    kinds = ("note", "reference check", "start", "reference check")
    events = tuple(Event(i * S, kind, f"n{i}", {"i": i}) for i, kind in enumerate(kinds))
    writer.commit(boot, Commit(events=events))
    writer.close()
    with Record.open(path) as record:
        found = record.events(rare="reference check")
        newest = record.events(limit=1, rare="reference check")
    assert [event.name for event in found] == ["n1", "n3"]
    assert [event.name for event in newest] == ["n3"]
