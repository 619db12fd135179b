"""The machine's clocks: one that never jumps, the wall clock, and whether that can be trusted."""

from __future__ import annotations

import ctypes
import os
import time
from pathlib import Path

BOOT_ID = Path("/proc/sys/kernel/random/boot_id")
SYNC_MARK = Path("/run/systemd/timesync/synchronized")
UNSYNCHRONISED_US = 16_000_000
"""The kernel's cap on its error estimate; below it the clock counts as synchronised (adjtimex)."""
_MAXERROR_AT = 3  # modes, offset, freq, maxerror: struct timex of a 64-bit Linux


def steady_s() -> float:
    """Seconds of a clock that only runs forward, for time-outs."""
    return time.monotonic()


class SystemClock:
    """CLOCK_BOOTTIME and UTC of this machine."""

    def boot_ns(self) -> int:
        """ns since the machine started, sleep included; never jumps."""
        return time.clock_gettime_ns(time.CLOCK_BOOTTIME)

    def utc_ns(self) -> int:
        """ns since 1970 by the wall clock, right or wrong."""
        return time.time_ns()

    def boot_id(self) -> str:
        """The kernel's identity of this boot."""
        return BOOT_ID.read_text(encoding="ascii").strip()

    def uncertainty_ns(self) -> int | None:
        """Largest error of the wall clock as the kernel estimates it; None: not synchronised."""
        buffer = (ctypes.c_long * 32)()
        try:
            result = ctypes.CDLL(None, use_errno=True).adjtimex(buffer)
        except AttributeError:
            result = -1
        if result < 0:  # a service unit may forbid the call: the sync mark remains
            return 1_000_000_000 if os.path.exists(SYNC_MARK) else None
        error_us = int(buffer[_MAXERROR_AT])
        return error_us * 1000 if error_us < UNSYNCHRONISED_US else None
