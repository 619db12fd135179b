"""Where readings lie in time: a board's ticks on the boot clock, or ticks as the clock. Pure."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from monitor.core.readings import NS_PER_S

Times = NDArray[np.int64]

NS_PER_MS = 1_000_000
LATENESS_NS = NS_PER_S // 4
"""A reading may reach us this much after its stamp without colliding with what was vouched for."""
DRIFT = 0.005
"""Largest relative error of a board's oscillator (resonator; common practice, no source)."""
_LEARN_NS = 10 * NS_PER_S
_STEP_NS = NS_PER_S
_IDLE_NS = 5 * NS_PER_S


def increasing_after(times_ns: Times, last_ns: int) -> Times:
    """times_ns, each raised as little as makes them strictly increasing and above last_ns."""
    steps = np.arange(times_ns.size, dtype=np.int64)
    raised = np.maximum(times_ns - steps, last_ns + 1)
    return np.asarray(np.maximum.accumulate(raised) + steps, np.int64)


class ArrivalClock:
    """Ticks stamped by arrival: the smallest delay seen between tick and arrival is the mapping.

    The mapping creeps up by DRIFT so that a slow oscillator is followed, and steps where the
    board's clock stood still; a stamp is never ahead of the arrival.
    """

    def __init__(self) -> None:
        self._vouched_ns = 0
        self.restart()

    def restart(self) -> None:
        """The ticks that come have another origin."""
        self._offset_ns: int | None = None
        self._tick_ns = 0
        self._least_ns: int | None = None
        self._learn_since_ns = 0

    def place(self, ticks_ns: Times, now_ns: int, spacing_ns: int, restarted: bool) -> Times:
        """Boot times (ns) of samples at ticks_ns (n > 0) that had all arrived by now_ns."""
        if restarted:
            self.restart()
        last_tick_ns = int(ticks_ns[-1])
        self._learn(now_ns - last_tick_ns, last_tick_ns, now_ns)
        times_ns = increasing_after(ticks_ns + (self._offset_ns or 0), self._vouched_ns)
        self._vouched_ns = int(times_ns[-1])
        return times_ns

    def _learn(self, delay_ns: int, tick_ns: int, now_ns: int) -> None:
        if self._offset_ns is None or self._least_ns is None:
            self._offset_ns = self._least_ns = delay_ns
            self._learn_since_ns = now_ns
        else:
            crept_ns = self._offset_ns + int(DRIFT * (tick_ns - self._tick_ns))
            self._offset_ns = min(crept_ns, delay_ns)
            self._least_ns = min(self._least_ns, delay_ns)
        self._tick_ns = tick_ns
        if now_ns - self._learn_since_ns >= _LEARN_NS:
            if self._least_ns - self._offset_ns > _STEP_NS:
                self._offset_ns = self._least_ns
            self._learn_since_ns = now_ns
            self._least_ns = delay_ns

    def vouch(self, now_ns: int, reach_ns: int) -> int:
        """Boot time (ns) up to which nothing else can come, when nothing came until now_ns.

        reach_ns: how much older than its frame the first sample of a frame is.
        """
        self._vouched_ns = max(self._vouched_ns, now_ns - LATENESS_NS - reach_ns)
        return self._vouched_ns


class TickClock:
    """Ticks are the clock. Time goes on by itself only after five idle seconds of real time."""

    def __init__(self, now_ns: int) -> None:
        self._base_ns = 0
        self._vouched_ns = -1
        self._last_ns = 0
        self._heard_ns = now_ns

    def restart(self) -> None:
        """The port was opened again: ticks go on, or go back, which place() is told."""

    def place(self, ticks_ns: Times, now_ns: int, spacing_ns: int, restarted: bool) -> Times:
        """Times (ns since tick 0 of the first start) of samples at ticks_ns (n > 0).

        After a restart the first sample lies spacing_ns after the last: the shortest outage.
        """
        first_ns = int(ticks_ns[0])
        if restarted:
            self._base_ns = self._vouched_ns + max(spacing_ns, 1) - first_ns
        elif self._base_ns + first_ns <= self._vouched_ns:
            self._base_ns = self._vouched_ns + 1 - first_ns
        times_ns = increasing_after(ticks_ns + self._base_ns, self._vouched_ns)
        self._last_ns = self._vouched_ns = int(times_ns[-1])
        self._heard_ns = now_ns
        return times_ns

    def vouch(self, now_ns: int, reach_ns: int) -> int:
        """Time (ns) up to which nothing else can come, when nothing came until real now_ns."""
        idle_ns = now_ns - self._heard_ns - _IDLE_NS
        if idle_ns > 0:
            self._vouched_ns = max(self._vouched_ns, self._last_ns + idle_ns)
        return max(self._vouched_ns, 0)
