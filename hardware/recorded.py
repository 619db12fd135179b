"""How recorded series play: as fast as they go, or at the pace of the machine's clock."""

from __future__ import annotations

from collections.abc import Callable
from threading import Event

from monitor.core.readings import NS_PER_S


class Pace:
    """Time of a series that began at 0 when this was made. real: at the machine's pace."""

    def __init__(self, real: bool, boot_ns: Callable[[], int]) -> None:
        self.real = real
        self._boot_ns = boot_ns
        self._start_ns = boot_ns()
        self._closed = Event()

    def until(self, due_ns: int, timeout_s: float) -> int:
        """Waits for the series time due_ns, at most timeout_s; the series time then, or due_ns.

        Never later than due_ns: what lies at due_ns has not been given yet.
        """
        if not self.real:
            return due_ns
        wait_s = (due_ns - self._elapsed_ns()) / NS_PER_S
        if wait_s > 0:
            self._closed.wait(min(wait_s, timeout_s))
        return min(self._elapsed_ns(), due_ns)

    def elapsed_ns(self) -> int | None:
        """Series time now; None where nothing holds it back."""
        return self._elapsed_ns() if self.real else None

    def close(self) -> None:
        """End a wait."""
        self._closed.set()

    def _elapsed_ns(self) -> int:
        return self._boot_ns() - self._start_ns
