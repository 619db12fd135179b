"""A writer that is killed at any moment leaves a whole record and loses at most one commit."""

from __future__ import annotations

import shutil
import sqlite3
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from monitor.record import connect
from monitor.record.reader import Record
from monitor.record.types import Commit
from monitor.record.writer import Writer
from tests.record.making import blocks, fix, raw, writer_of

ROOT = Path(__file__).resolve().parents[2]
_WRITE = """
import sys
from pathlib import Path
from monitor.core.rows import Event
from monitor.record.types import Commit
from tests.record.making import blocks, raw, windows, writer_of
writer = writer_of(Path(sys.argv[1]))
boot = writer.begin_boot("b", "machine")
for i in range(int(sys.argv[2]), 100_000):
    writer.commit(boot, Commit(
        raw(10 * i, 100, seed=i, spacing_s=0.1), blocks(10 * i, 1, seed=i),
        windows(10 * i, 1, seed=i), events=(Event(i, "note", "n", {}),)))
    print(i, flush=True)
"""


def _intact(path: Path) -> bool:
    db = sqlite3.connect(path)
    try:
        return db.execute("PRAGMA integrity_check").fetchall() == [("ok",)]
    finally:
        db.close()


def _whole_commits(path: Path) -> list[int]:
    """Numbers of the commits of which every part is there; equal in every table, or none."""
    with Record.open(path) as record:
        rows = record.blocks(1)
        assert rows.n.size % 3 == 0
        from_blocks = (rows.start_ns[::3] // 10**10).tolist()
        ends = np.unique(record.windows(1).end_ns)
        from_windows = ((ends - 60 * 10**9) // 10**10).tolist()
        from_events = [event.boot_ns for event in record.events(limit=10**6)]
        from_raw = [int(b.times_ns[0]) // 10**10 for b in record.raw_batches(1)]
        for i, batch in zip(from_raw, record.raw_batches(1)):
            assert (
                batch.counts.tobytes() == raw(10 * i, 100, seed=i, spacing_s=0.1).counts.tobytes()
            )
    assert from_blocks == from_windows == from_events == from_raw
    return from_blocks


def test_kill_at_any_moment(tmp_path: Path) -> None:
    path = tmp_path / "site.db"
    rng = np.random.default_rng(11)
    said = -1
    for _ in range(6):
        child = subprocess.Popen(
            [sys.executable, "-c", _WRITE, str(path), str(said + 1)],
            stdout=subprocess.PIPE, text=True, cwd=ROOT,
        )  # fmt: skip
        assert child.stdout is not None
        with child:
            enough = said + int(rng.integers(5, 120))
            for line in child.stdout:
                said = int(line)
                if said >= enough:
                    break
            child.kill()
            said = max([said, *map(int, child.stdout.read().split())])
        stored = _whole_commits(path)
        assert stored == list(range(len(stored)))
        assert said <= stored[-1] <= said + 1  # what was said to be written is there
        said = stored[-1]
    assert said > 30
    assert _intact(path)


def test_a_log_cut_at_any_length_gives_whole_commits(tmp_path: Path) -> None:
    """What a power cut leaves of the log: every length, and a flipped byte near the end."""
    path = tmp_path / "site.db"
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    writer._db.execute("PRAGMA wal_checkpoint(TRUNCATE)").fetchone()  # noqa: SLF001
    ends = []
    wal = path.with_name("site.db-wal")
    for i in range(4):
        writer.commit(boot, Commit(raw(10 * i, 30, seed=i), blocks(10 * i, 1, seed=i)))
        ends.append(wal.stat().st_size)
    whole, log = path.read_bytes(), wal.read_bytes()
    writer.close()
    copy = tmp_path / "copy.db"
    for length in [*range(0, len(log), 509), *ends]:
        for flip in (False, True):
            torn = bytearray(log[:length])
            if flip and torn:
                torn[-1] ^= 0x40
            copy.write_bytes(whole)
            copy.with_name("copy.db-wal").write_bytes(torn)
            copy.with_name("copy.db-shm").unlink(missing_ok=True)
            with Record.open(copy) as record:
                found = record.blocks(boot).start_ns[::3] // 10**10
                raws = len(list(record.raw_batches(boot)))
            expected = sum(end <= length - flip for end in ends)
            assert found.tolist() == list(range(expected)), (length, flip)
            assert raws == expected
    assert len(ends) == 4


def test_a_disk_that_fills_leaves_whole_commits(tmp_path: Path) -> None:
    """A real file system of 400 KiB; root alone may mount one."""
    small = tmp_path / "small"
    small.mkdir()
    mount = shutil.which("mount")
    if mount is None or subprocess.run(
        [mount, "-t", "tmpfs", "-o", "size=400k", "tmpfs", str(small)],
        capture_output=True, check=False,
    ).returncode:  # fmt: skip
        pytest.skip("may not mount a small file system here")
    try:
        writer = writer_of(small / "site.db")
        boot = writer.begin_boot("b", "machine")
        writer.commit(boot, fix())
        written, trouble = 0, ""
        while written < 10_000 and not trouble:
            more = Commit(raw(100 * written, 100), blocks(100 * written, 10))
            try:
                writer.commit(boot, more)
            except sqlite3.OperationalError as error:
                trouble = str(error)
            else:
                written += 1
        assert "full" in trouble or "I/O" in trouble
        assert written > 10
        with Record.open(small / "site.db") as record:
            assert len(list(record.raw_batches(boot))) == written
        writer.close()
        with Record.open(small / "site.db") as record:
            assert record.blocks(boot).n.size == 30 * written
        for name in ("site.db", "site.db-wal"):  # the log could not be brought in: no room
            shutil.copy(small / name, tmp_path / name)
        assert _intact(tmp_path / "site.db")
        assert connect.identify(tmp_path / "site.db").simulated
        Writer(tmp_path / "site.db", simulated=True).close()
    finally:
        subprocess.run(["umount", str(small)], check=True)
