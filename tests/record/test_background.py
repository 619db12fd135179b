"""Disk trouble delays the record; it never stops the daemon and loses nothing that was taken."""

from __future__ import annotations

import sqlite3
import threading
import time
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from monitor.core.rows import Event
from monitor.record import background
from monitor.record.background import WriterThread
from monitor.record.reader import Record
from monitor.record.types import Commit
from monitor.record.writer import Writer
from tests.record.making import blocks, raw, writer_of

WAIT_S = 20.0


@pytest.fixture(autouse=True)
def _impatient(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(background, "FIRST_WAIT_S", 0.02)
    monkeypatch.setattr(background, "LONGEST_WAIT_S", 0.05)


@pytest.fixture
def writer(tmp_path: Path) -> Writer:
    """A writer in boot 1."""
    made = writer_of(tmp_path / "site.db")
    made.begin_boot("b", "machine")
    return made


def _commit(i: int) -> Commit:
    return Commit(
        raw(10 * i, 100, seed=i, spacing_s=0.1), blocks(10 * i, 1, seed=i),
        events=(Event(i, "note", f"n{i}", {}),),
    )  # fmt: skip


def _names(path: Path) -> list[str]:
    with Record.open(path) as record:
        return [event.name for event in record.events()]


def _until(condition: object, tries: int = 400) -> bool:
    """Wait on an event that nobody sets, so as to look again."""
    never = threading.Event()
    for _ in range(tries):
        if condition():  # type: ignore[operator]
            return True
        never.wait(WAIT_S / tries)
    return False


def test_commits_are_written_in_order(writer: Writer) -> None:
    thread = WriterThread(writer, 3)
    assert all(thread.put(1, _commit(i), block=True) for i in range(50))
    assert thread.flush(WAIT_S)
    assert _names(writer.path) == [f"n{i}" for i in range(50)]
    assert (thread.written, thread.error, thread.refused) == (50, "", 0)
    assert thread.close()
    assert not thread.put(1, _commit(50), block=True)


def test_close_writes_what_is_left(writer: Writer) -> None:
    thread = WriterThread(writer, 100)
    for i in range(40):
        thread.put(1, _commit(i), block=False)
    assert thread.close()
    assert len(_names(writer.path)) == 40


def test_a_full_disk_is_waited_out(writer: Writer) -> None:
    """max_page_count gives the very error of a full disk: SQLITE_FULL."""
    db = writer._db  # noqa: SLF001
    pages = db.execute("PRAGMA page_count").fetchone()[0]
    db.execute(f"PRAGMA max_page_count={pages + 3}")
    thread = WriterThread(writer, 4)
    taken = [thread.put(1, _commit(0), block=True)]
    for i in range(1, 60):
        taken.append(thread.put(1, _commit(i), block=False))
        if not taken[-1]:
            break
        thread.flush(0.05)
    assert not taken[-1]  # the queue is full and says so at once
    assert "disk is full" in thread.error
    assert "\n" not in thread.error
    assert thread.waiting == 4
    stored = len(_names(writer.path))
    assert stored == len(taken) - 1 - 4
    with writer._lock:  # noqa: SLF001
        db.execute("PRAGMA max_page_count=1000000")
    assert thread.flush(WAIT_S)
    assert thread.error == ""
    assert thread.close()
    assert _names(writer.path) == [f"n{i}" for i in range(len(taken) - 1)]


def test_a_locked_record_is_waited_out(writer: Writer) -> None:
    writer._db.execute("PRAGMA busy_timeout=10")  # noqa: SLF001
    other = sqlite3.connect(writer.path, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    thread = WriterThread(writer, 8)
    for i in range(5):
        assert thread.put(1, _commit(i), block=False)
    assert _until(lambda: "locked" in thread.error)
    assert thread.waiting == 5
    other.execute("ROLLBACK")
    other.close()
    assert thread.flush(WAIT_S)
    assert thread.error == ""
    assert thread.close()
    assert len(_names(writer.path)) == 5


def test_what_can_never_be_written_is_counted_and_left_out(writer: Writer) -> None:
    thread = WriterThread(writer, 8)
    good = _commit(0)
    assert good.blocks is not None
    broken = replace(good.blocks, energy_w_ns=np.full(3, np.nan))
    thread.put(1, Commit(blocks=broken), block=True)
    thread.put(1, good, block=True)
    assert thread.flush(WAIT_S)
    assert (thread.refused, thread.written, thread.error) == (1, 1, "")
    assert "energy_w_ns" in thread.refusal
    assert thread.close()


def test_close_does_not_wait_for_ever(writer: Writer) -> None:
    writer._db.execute("PRAGMA busy_timeout=10")  # noqa: SLF001
    other = sqlite3.connect(writer.path, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    thread = WriterThread(writer, 8)
    thread.put(1, _commit(0), block=False)
    assert not thread.close(timeout_s=0.2)
    other.execute("ROLLBACK")
    other.close()
    assert _names(writer.path) == []
    Writer(writer.path, simulated=True).close()  # it has let the record go


def _refuse_bodies(writer: Writer, monkeypatch: pytest.MonkeyPatch) -> None:
    """Make the writer fail on any event named bad, as on one that nobody foresaw."""
    commit = Writer.commit

    def fails(self: Writer, boot: int, given: Commit, derivation: int = 0) -> None:
        if any(event.name == "bad" for event in given.events):
            raise KeyError("nobody foresaw this")
        commit(self, boot, given, derivation)

    monkeypatch.setattr(Writer, "commit", fails)


def test_an_unforeseen_error_costs_the_events_and_nothing_else(
    writer: Writer, monkeypatch: pytest.MonkeyPatch
) -> None:
    _refuse_bodies(writer, monkeypatch)
    thread = WriterThread(writer, 8)
    thread.put(1, replace(_commit(0), events=(Event(0, "note", "bad", {}),)), block=True)
    thread.put(1, _commit(1), block=True)
    assert thread.flush(WAIT_S)
    assert thread.alive
    assert (thread.refused, thread.written, thread.error) == (1, 2, "")
    assert thread.refusal == "KeyError: 'nobody foresaw this'"
    with Record.open(writer.path) as record:
        told, note = record.events()
        assert [batch.n for batch in record.raw_batches(1)] == [100, 100]
        assert record.blocks(1).n.size == 6
    assert (told.kind, told.name, note.name) == ("fault", "commit not whole", "n1")
    assert told.body == {"why": thread.refusal}
    assert thread.close()
    assert not thread.alive


def test_readings_and_events_are_kept_where_the_figures_cannot_be(writer: Writer) -> None:
    good = _commit(0)
    assert good.blocks is not None
    broken = replace(good.blocks, energy_w_ns=np.full(3, np.nan))
    thread = WriterThread(writer, 8)
    thread.put(1, replace(good, blocks=broken), block=True)
    assert thread.flush(WAIT_S)
    assert _names(writer.path) == ["n0", "commit not whole"]
    with Record.open(writer.path) as record:
        assert [batch.n for batch in record.raw_batches(1)] == [100]
    assert thread.refused == 1
    assert thread.close()


def test_put_waits_no_longer_than_it_is_told(writer: Writer) -> None:
    writer._db.execute("PRAGMA busy_timeout=10")  # noqa: SLF001
    other = sqlite3.connect(writer.path, isolation_level=None)
    other.execute("BEGIN IMMEDIATE")
    thread = WriterThread(writer, 1)
    assert thread.put(1, _commit(0), block=True)
    began = time.perf_counter()
    assert not thread.put(1, _commit(1), block=True, timeout_s=0.2)
    assert 0.2 <= time.perf_counter() - began < 2
    stuck = threading.Thread(target=thread.put, args=(1, _commit(2), True))
    stuck.start()  # without a limit: let go by close()
    assert not thread.close(timeout_s=0.5)
    stuck.join(WAIT_S)
    assert not stuck.is_alive()
    other.execute("ROLLBACK")
    other.close()
