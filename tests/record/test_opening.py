"""A daemon that starts while the disk is full measures all the same, and records later."""

from __future__ import annotations

import errno
import subprocess
import sys
import threading
from pathlib import Path

import pytest

from monitor.core.errors import RecordError
from monitor.core.rows import Event
from monitor.record import background
from monitor.record.background import WriterThread
from monitor.record.reader import Record
from monitor.record.types import Commit
from monitor.record.writer import Writer
from tests.record.making import CHANNELS, SCOPES, writer_of

WAIT_S = 20.0


@pytest.fixture(autouse=True)
def _impatient(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(background, "FIRST_WAIT_S", 0.02)
    monkeypatch.setattr(background, "LONGEST_WAIT_S", 0.05)


def _commit(i: int) -> Commit:
    return Commit(events=(Event(i, "note", f"n{i}", {}),))


def _names(path: Path) -> list[str]:
    with Record.open(path) as record:
        return [event.name for event in record.events()]


def _prepare(writer: Writer) -> int:
    writer.put_channels(CHANNELS)
    writer.put_scopes(SCOPES)
    return writer.begin_boot("b", "machine")


def test_opening_makes_and_prepares_the_record_at_once(tmp_path: Path) -> None:
    thread = WriterThread.opening(tmp_path / "site.db", True, _prepare, 4)
    assert (thread.boot, thread.error) == (1, "")
    assert thread.put(None, _commit(0), block=True)
    assert thread.close()
    assert _names(tmp_path / "site.db") == ["n0"]


def test_a_record_that_cannot_be_opened_yet_is_waited_for(tmp_path: Path) -> None:
    path = tmp_path / "site.db"
    writer_of(path).close()
    tries: list[int] = []
    thrice, free = threading.Event(), threading.Event()

    def prepare(writer: Writer) -> int:
        tries.append(1)
        if len(tries) > 3:
            thrice.set()
        if not free.is_set():
            writer._db.execute("PRAGMA max_page_count=1")  # noqa: SLF001
            writer.put_document("filler", bytes(1_000_000))
        return _prepare(writer)

    thread = WriterThread.opening(path, True, prepare, 4)
    assert thread.boot is None
    assert "disk is full" in thread.error
    for i in range(4):
        assert thread.put(None, _commit(i), block=False)
    assert not thread.put(None, _commit(4), block=False)
    assert thrice.wait(WAIT_S)
    free.set()
    assert thread.flush(WAIT_S)
    assert (thread.boot, thread.error, thread.refused) == (1, "", 0)
    assert thread.close()
    assert _names(path) == ["n0", "n1", "n2", "n3"]


def test_what_waiting_cannot_mend_is_raised_at_once(tmp_path: Path) -> None:
    path = tmp_path / "site.db"
    held = writer_of(path)
    with pytest.raises(RecordError, match="another daemon writes it"):
        WriterThread.opening(path, True, _prepare, 4)
    held.close()
    with pytest.raises(RecordError, match="refuses real readings"):
        WriterThread.opening(path, False, _prepare, 4)

    def other(writer: Writer) -> int:
        writer.put_channels([(0, "else", "", "mast")])
        return 1

    with pytest.raises(RecordError, match="holds other channels"):
        WriterThread.opening(path, True, other, 4)
    Writer(path, simulated=True).close()  # nothing stayed open


def test_closing_before_the_record_could_be_opened_ends(tmp_path: Path) -> None:
    def prepare(writer: Writer) -> int:
        raise OSError(errno.ENOSPC, "No space left on device")

    thread = WriterThread.opening(tmp_path / "site.db", True, prepare, 4)
    assert "No space left" in thread.error
    thread.put(None, _commit(0), block=False)
    assert not thread.close(timeout_s=0.5)
    assert not thread.alive


@pytest.mark.parametrize("there", [False, True])
def test_a_disk_on_which_nothing_can_be_written(tmp_path: Path, there: bool) -> None:
    """No file may grow, as on a full disk: the thread starts, says so, and ends."""
    path = tmp_path / "site.db"
    if there:
        writer_of(path).close()
    code = (
        "import resource, signal, sys; from pathlib import Path\n"
        "from monitor.record.background import WriterThread\n"
        "signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (0, 0))\n"
        "begin = lambda writer: writer.begin_boot('b', 'machine')\n"
        "thread = WriterThread.opening(Path(sys.argv[1]), True, begin, 4)\n"
        "print(thread.boot, thread.alive, bool(thread.error), thread.close(20.0))\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(path)], capture_output=True, text=True, check=False
    )
    assert done.stderr == ""
    assert done.stdout.split() == ["None", "True", "True", "True"]


def test_a_closed_record_is_read_on_a_full_disk(tmp_path: Path) -> None:
    """SQLite may leave empty side files there, and no room for what belongs in them."""
    path = tmp_path / "site.db"
    writer = writer_of(path)
    writer.commit(_prepare(writer), _commit(7))
    writer.close()
    code = (
        "import resource, signal, sys; from monitor.record.reader import Record\n"
        "signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (99, 99))\n"
        "for _ in range(2):\n"
        "    with Record.open(sys.argv[1]) as record:\n"
        "        print(record.boot_number('b', 'machine'), record.events()[0].name)\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(path)], capture_output=True, text=True, check=False
    )
    assert done.stderr == ""
    assert done.stdout.split() == ["1", "n7"] * 2
