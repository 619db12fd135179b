"""Commits on a thread of their own, so that no reading ever waits for the disk."""

from __future__ import annotations

import sqlite3
import threading
from collections import deque

from monitor.core.errors import RecordError
from monitor.record.types import Commit
from monitor.record.writer import Writer

FIRST_WAIT_S = 0.5
LONGEST_WAIT_S = 30.0


class WriterThread:
    """Takes commits into a bounded queue and writes them in order.

    error: why the oldest commit is not on the disk, "" while all is well; the commit is kept
    and tried again. refused: commits that the record can never take (a bug or a wrong file);
    they are counted and left out, their reason stays in refusal.
    """

    def __init__(self, writer: Writer, depth: int) -> None:
        self._writer = writer
        self._depth = depth
        self._queue: deque[tuple[int, Commit]] = deque()
        self._change = threading.Condition()
        self._closing = False
        self.error = ""
        self.refused = 0
        self.refusal = ""
        self.written = 0
        self._thread = threading.Thread(target=self._run, name="record", daemon=True)
        self._thread.start()

    @property
    def waiting(self) -> int:
        """Commits that are not on the disk yet."""
        return len(self._queue)

    def put(self, boot: int, commit: Commit, block: bool) -> bool:
        """Hand over a commit. Where the queue is full: wait if block, else return False."""
        with self._change:
            if block:
                self._change.wait_for(lambda: len(self._queue) < self._depth or self._closing)
            if self._closing or len(self._queue) >= self._depth:
                return False
            self._queue.append((boot, commit))
            self._change.notify_all()
        return True

    def flush(self, timeout_s: float | None = None) -> bool:
        """Wait until all that was put is written or refused; False where the time ran out."""
        with self._change:
            return self._change.wait_for(lambda: not self._queue, timeout_s)

    def close(self, timeout_s: float = 10.0) -> bool:
        """Write what is left, at most for timeout_s, and close the record. False: some is lost."""
        with self._change:
            self._closing = True
            self._change.notify_all()
        written = self.flush(timeout_s)
        if not written:
            with self._change:
                self._queue.clear()
                self._change.notify_all()
        self._thread.join()
        self._writer.close()
        return written

    def _run(self) -> None:
        wait_s = FIRST_WAIT_S
        while (head := self._next()) is not None:
            if self._tried(*head):
                wait_s = FIRST_WAIT_S
                continue
            with self._change:
                self._change.wait_for(lambda: self._closing, wait_s)
                if self._closing:  # then try often: close() is waiting, but not for ever
                    self._change.wait_for(lambda: not self._queue, FIRST_WAIT_S / 5)
            wait_s = min(2 * wait_s, LONGEST_WAIT_S)

    def _next(self) -> tuple[int, Commit] | None:
        with self._change:
            self._change.wait_for(lambda: self._queue or self._closing)
            return self._queue[0] if self._queue else None

    def _tried(self, boot: int, commit: Commit) -> bool:
        """Write the oldest commit; False where it must be tried again."""
        try:
            self._writer.commit(boot, commit)
        except RecordError as error:
            self.refused += 1
            self.refusal = str(error)
        except (sqlite3.Error, OSError) as error:
            self.error = f"{self._writer.path}: not written: {error}; free space or check the disk"
            return False
        else:
            self.written += 1
        self.error = ""
        with self._change:
            if self._queue:
                self._queue.popleft()
            self._change.notify_all()
        return True
