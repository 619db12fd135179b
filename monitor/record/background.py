"""Commits on a thread of their own, so that no reading ever waits for the disk."""

from __future__ import annotations

import sqlite3
import threading
from collections import deque
from collections.abc import Callable, Iterator
from dataclasses import replace
from functools import partial
from pathlib import Path

from monitor.clock import steady_s
from monitor.core.errors import RecordError
from monitor.core.rows import Event
from monitor.record import connect
from monitor.record.types import Commit
from monitor.record.writer import Writer

FIRST_WAIT_S = 0.5
LONGEST_WAIT_S = 30.0
CLOSING_S = 8.0

Prepare = Callable[[Writer], int]
Attempt = Callable[[], tuple[Writer, int]]
# What no second attempt can mend; every other error of SQLite is taken for the disk's.
_NEVER = (sqlite3.ProgrammingError, sqlite3.InterfaceError, sqlite3.DataError,
          sqlite3.NotSupportedError)  # fmt: skip


class WriterThread:
    """Takes commits into a bounded queue and writes them in order.

    error: why the oldest commit is not on the disk (or the record not open), "" while all is
    well; the commit is kept and tried again. refused: commits that the record can never take, or
    not wholly (a bug or a wrong file); they are counted, the reason stays in refusal, and what
    can be kept of them is kept. boot: what prepare returned; None before, or without opening().
    """

    def __init__(
        self, writer: Writer | None, depth: int, *, boot: int | None = None,
        attempt: Attempt | None = None, error: str = "",
    ) -> None:  # fmt: skip
        """attempt, error: how to open the record where writer is None, and why it is not yet."""
        self._writer, self._attempt, self._depth = writer, attempt, depth
        self._queue: deque[tuple[int | None, Commit]] = deque()
        self._change = threading.Condition()
        self._closing = False
        self.boot = boot
        self.error = error
        self.refused = 0
        self.refusal = ""
        self.written = 0
        self._thread = threading.Thread(target=self._run, name="record", daemon=True)
        self._thread.start()

    @classmethod
    def opening(cls, path: Path, simulated: bool, prepare: Prepare, depth: int) -> WriterThread:
        """Make or open the record and prepare it, now; on the thread where the disk is in the way.

        prepare: begins the boot, puts channels, scopes and documents, returns the boot's number;
        it may be called several times, each time with a writer just opened. RecordError where the
        first attempt meets what waiting cannot mend (another mark, other channels, another
        daemon). Until the record is open, commits queue, error says why, boot is None.
        """
        attempt = partial(_opened, path, simulated, prepare)
        try:
            writer, boot = attempt()
        except (connect.DiskTroubleError, sqlite3.Error, OSError) as error:
            return cls(None, depth, attempt=attempt, error=_not_open(path, error))
        return cls(writer, depth, boot=boot)

    @property
    def alive(self) -> bool:
        """Whether the thread runs: from the start until close()."""
        return self._thread.is_alive()

    @property
    def waiting(self) -> int:
        """Commits that are not on the disk yet."""
        return len(self._queue)

    def put(
        self, boot: int | None, commit: Commit, block: bool, timeout_s: float | None = None
    ) -> bool:
        """Hand over a commit; boot None: the boot that prepare began or will begin.

        Where the queue is full: wait if block, at most timeout_s, else return False. False also
        once close() has been called.
        """
        with self._change:
            if block:
                self._change.wait_for(
                    lambda: len(self._queue) < self._depth or self._closing, timeout_s
                )
            if self._closing or len(self._queue) >= self._depth:
                return False
            self._queue.append((boot, commit))
            self._change.notify_all()
        return True

    def flush(self, timeout_s: float | None = None) -> bool:
        """Wait until all that was put is written or refused; False where the time ran out."""
        with self._change:
            return self._change.wait_for(lambda: not self._queue, timeout_s)

    def close(self, timeout_s: float = CLOSING_S) -> bool:
        """Write what is left and close the record, at most for timeout_s. False: some is lost.

        Where the disk holds the thread for longer, thread and record are left to the process's end.
        """
        until = steady_s() + timeout_s
        with self._change:
            self._closing = True
            self._change.notify_all()
        written = self.flush(timeout_s * 3 / 4)
        if not written:
            with self._change:
                self._queue.clear()
                self._change.notify_all()
        self._thread.join(max(0.0, until - steady_s()))
        if self._thread.is_alive():
            return False
        if self._writer is not None:
            self._writer.close()
        return written

    def _run(self) -> None:
        wait_s = FIRST_WAIT_S
        while self._work():
            if self._step():
                wait_s = FIRST_WAIT_S
                continue
            with self._change:
                self._change.wait_for(lambda: self._closing, wait_s)
                if self._closing:  # then try often: close() is waiting, but not for ever
                    self._change.wait_for(lambda: not self._queue, FIRST_WAIT_S / 5)
            wait_s = min(2 * wait_s, LONGEST_WAIT_S)

    def _work(self) -> bool:
        """Wait for something to do; False once there is nothing left and close() was called."""
        with self._change:
            self._change.wait_for(lambda: self._queue or self._closing or self._writer is None)
            return bool(self._queue) or not self._closing

    def _step(self) -> bool:
        """Open the record, or write the oldest commit; False where it must be tried again."""
        if self._writer is None:
            return self._tried_to_open()
        with self._change:
            head = self._queue[0] if self._queue else None
        return head is None or self._tried(self._writer, *head)

    def _tried_to_open(self) -> bool:
        if self._attempt is None:
            return False
        try:
            writer, boot = self._attempt()
        except Exception as error:  # noqa: BLE001 - whatever it is, measuring goes on without
            self.error = _not_open(None, error)
            return False
        with self._change:
            self.boot, self._writer, self.error = boot, writer, ""
            self._change.notify_all()
        return True

    def _tried(self, writer: Writer, boot: int | None, commit: Commit) -> bool:
        """Write the oldest commit; False where it must be tried again."""
        number = self.boot if boot is None else boot
        reason = ""
        for left in _less_and_less(commit):
            try:
                if number is None:
                    raise RecordError(f"{writer.path}: a commit names no boot")
                writer.commit(number, _told(left, reason) if reason else left)
            except (RecordError, *_NEVER) as error:
                reason = reason or str(error)
            except (sqlite3.Error, OSError) as error:
                self.error = f"{writer.path}: not written: {error}; free space or check the disk"
                return False
            except Exception as error:  # noqa: BLE001 - the thread outlives every bad commit
                reason = reason or f"{type(error).__name__}: {error}"
            else:
                self.written += 1
                break
        if reason:
            self.refused += 1
            self.refusal = reason
        self.error = ""
        with self._change:
            if self._queue:
                self._queue.popleft()
            self._change.notify_all()
        return True


def _opened(path: Path, simulated: bool, prepare: Prepare) -> tuple[Writer, int]:
    """A writer and the boot's number; on an error nothing stays open."""
    connect.ensure(path, simulated)
    writer = Writer(path, simulated=simulated)
    done = False
    try:
        boot = prepare(writer)
        done = True
    finally:
        if not done:
            writer.close()
    return writer, boot


def _not_open(path: Path | None, error: Exception) -> str:
    if isinstance(error, RecordError):
        return str(error)
    where = "the record" if path is None else str(path)
    return f"{where}: not open yet: {error}; free space or check the disk"


def _less_and_less(commit: Commit) -> Iterator[Commit]:
    """The commit, then what can be kept of it: without its events; the raw readings alone."""
    yield commit
    if commit.events:
        yield replace(commit, events=())
    rows = (commit.blocks, commit.windows, commit.fields, commit.exposures)
    if any(part is not None for part in rows) and (commit.raw is not None or commit.events):
        yield Commit(raw=commit.raw, events=commit.events, clock_fixes=commit.clock_fixes)
    if commit.raw is not None:
        yield Commit(raw=commit.raw)


def _told(commit: Commit, reason: str) -> Commit:
    """The commit with a fault among its events that says what is missing from it."""
    at_ns = commit.raw.now_ns if commit.raw is not None else 0
    fault = Event(at_ns, "fault", "commit not whole", {"why": reason})
    return replace(commit, events=(*commit.events, fault))
