"""No data is an alarm: spans without a valid reading, found the same way live and afterwards."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.readings import NS_PER_S
from monitor.core.rows import Event

I = NDArray[np.int64]  # noqa: E741
KEY = "silence"


@dataclass(frozen=True, slots=True)
class Hearing:
    """last_ns: last reading valid on any channel, or the start; silent: the alarm is raised."""

    last_ns: int
    silent: bool = False


def listen(
    hearing: Hearing, valid_ns: I, front_ns: int, after_ns: int
) -> tuple[Hearing, list[Event]]:
    """Silence alarms up to front_ns, given the times (n,) of further valid readings.

    Raised after_ns after the last valid reading, returned with the next one.
    """
    times = np.concatenate([[hearing.last_ns], valid_ns, [front_ns]])
    events: list[Event] = []
    silent = hearing.silent
    if silent and valid_ns.size and times[1] - times[0] < after_ns:  # raised in an earlier boot
        events.append(_event(int(times[1]), False, int(times[0])))
        silent = False
    for gap in np.flatnonzero(np.diff(times) >= after_ns).tolist():
        if not (silent and gap == 0):
            events.append(_event(int(times[gap]) + after_ns, True, int(times[gap])))
        silent = True
        if gap < valid_ns.size:
            events.append(_event(int(times[gap + 1]), False, int(times[gap])))
            silent = False
    last = int(valid_ns[-1]) if valid_ns.size else hearing.last_ns
    return Hearing(last, silent), events


def _event(at_ns: int, raised: bool, last_ns: int) -> Event:
    body: dict[str, object] = {
        "raised": raised,
        "last_valid_boot_s": last_ns / NS_PER_S,
    }
    return Event(at_ns, "alarm", KEY, body)
