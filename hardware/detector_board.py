"""Front end for a detector board on a serial line that speaks PROTOCOL.md."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from numpy.typing import NDArray

from hardware.frames import decode_counts
from hardware.options import clock_start_ns
from hardware.reception import Reception, Taken
from hardware.timing import NS_PER_MS, ArrivalClock, TickClock
from hardware.transport import Port, check_device, url_problem
from monitor.core.averaging_law import Averaging
from monitor.core.flags import Flag
from monitor.core.keys import Table
from monitor.core.readings import MISSING, NS_PER_S, Batch, DeviceStatus, FrontEnd, empty_batch

SILENT_S = 3.0
_GIVE_UP = 10
"""The port is opened anew after this many times the silence that counts as a hang."""
_GATHER_S = 0.02
_UNKNOWN_REACH_NS = 2 * NS_PER_S
AVERAGING = Averaging("none")
"""PROTOCOL.md: a count is what the converter gave, not averaged."""


@dataclass(frozen=True, slots=True)
class Settings:
    """Options of [sensor] for a detector board. clock_start_ns: UTC of tick 0, board clock only."""

    device: str
    baud: int
    board_clock: bool
    clock_start_ns: int | None
    supply_v: tuple[float, float] | None
    resolution: ClassVar[float | None] = None
    averaging: ClassVar[Averaging] = AVERAGING

    def check_device(self) -> None:
        """DeviceError where the port is not there or may not be opened."""
        check_device(self.device, "sensor.device")

    def open(
        self,
        channels: int,
        boot_ns: Callable[[], int],
        utc_ns: Callable[[], int],
        simulated: bool,
    ) -> FrontEnd:
        """The front end; its port is opened by its first read."""
        return DetectorBoard(self, channels, boot_ns, simulated)


def settings_from(table: Table) -> Settings:
    """Settings from the options; ConfigError about each wrong key."""
    device = table.text("device")
    if not device or url_problem(device):
        raise table.error("device", url_problem(device) or "is empty; name a port")
    board_clock = table.text("clock", "arrival", ("arrival", "board")) == "board"
    start_ns = clock_start_ns(table, required=board_clock)
    if start_ns is not None and not board_clock:
        raise table.error("clock_start", 'only for clock = "board"; remove it')
    return Settings(
        device=device,
        baud=table.whole("baud", 115_200, 300, 4_000_000),
        board_clock=board_clock,
        clock_start_ns=start_ns,
        supply_v=_supply(table),
    )


def _supply(table: Table) -> tuple[float, float] | None:
    value = table.any("supply_v", None)
    if value is None:
        return None
    good = isinstance(value, (list, tuple)) and len(value) == 2
    if not good or not all(type(v) in (int, float) for v in value) or not value[0] < value[1]:
        raise table.error("supply_v", f"{value!r} is not [lowest, highest] in V")
    return float(value[0]), float(value[1])


class DetectorBoard:
    """See monitor.core.readings.FrontEnd. boot_ns: the machine's boot clock (ns)."""

    def __init__(
        self, settings: Settings, channels: int, boot_ns: Callable[[], int], simulated: bool
    ) -> None:
        self._settings = settings
        self._channels = channels
        self._boot_ns = boot_ns
        self._simulated = simulated
        self._port = Port(settings.device, settings.baud, boot_ns)
        self._reception = Reception(channels, simulated)
        self._clock = TickClock(boot_ns()) if settings.board_clock else ArrivalClock()
        self.owns_clock = settings.board_clock
        self.clock_fix = None
        if settings.clock_start_ns is not None:
            self.clock_fix = (0, settings.clock_start_ns)
        self._generation = 0
        self._heard_ns = self._since_ns = self._asked_ns = boot_ns()
        self._interval_ns = 0
        self._reach_ns = _UNKNOWN_REACH_NS
        self._hangs = 0
        self._hung = False
        self._temperature_c: float | None = None
        self._supply_v: float | None = None

    def read(self, timeout_s: float) -> Batch:
        """Readings that came since the last call; waits at most timeout_s."""
        data = self._port.read(timeout_s, _GATHER_S if self.owns_clock else 0.0)
        now_ns = self._boot_ns()
        if self._port.generation != self._generation:
            self._opened(now_ns)
        seen = self._reception.frames_seen
        taken = self._reception.feed(data) if data else []
        self._watch(now_ns, self._reception.frames_seen > seen)
        if not taken:
            return empty_batch(self._channels, self._clock.vouch(now_ns, self._reach_ns))
        return self._batch(taken, now_ns)

    def status(self) -> DeviceStatus:
        """The board's state now; connected while frames that fit the site file come."""
        return DeviceStatus(
            connected=self._port.is_open and not self._hung and not self._waits_for(),
            text=self._text(),
            temperature_c=self._temperature_c,
            supply_v=self._supply_v,
            counters=self._reception.counters | self._port.counters | {"hangs": self._hangs},
            name=self._reception.banner.name if self._reception.banner else "",
        )

    def close(self) -> None:
        """Let the port go."""
        self._port.close()

    def _waits_for(self) -> str:
        if self._reception.refusal:
            return self._reception.refusal
        return "" if self._reception.banner else "waiting for the board to name itself"

    def _text(self) -> str:
        if not self._port.is_open:
            return f"{self._port.problem}; trying again"
        if self._hung:
            silent_s = (self._boot_ns() - self._heard_ns) // NS_PER_S
            return f"{self._settings.device} is open, but no new frame came for {silent_s} s"
        if self._waits_for() or self._reception.banner is None:
            return self._waits_for()
        banner = self._reception.banner
        return f"board {banner.name}, firmware {banner.firmware}, {banner.bits} bits"

    def _opened(self, now_ns: int) -> None:
        self._generation = self._port.generation
        self._reception.reopened()
        self._clock.restart()
        self._since_ns = now_ns
        self._ask(now_ns)

    def _ask(self, now_ns: int) -> None:
        self._asked_ns = now_ns
        self._port.write(b"?\n")

    def _watch(self, now_ns: int, alive: bool) -> None:
        """Notice a board that is silent: ask it, in the end open its port anew."""
        if alive:
            self._heard_ns = self._since_ns = now_ns
            self._hung = False
            self._port.heard()
        if not self._port.is_open:
            return
        patience_ns = max(int(SILENT_S * NS_PER_S), 3 * self._interval_ns)
        silent_ns = now_ns - self._since_ns
        if silent_ns >= patience_ns and not self._hung:
            self._hung = True
            self._hangs += 1
        wants = self._hung or self._reception.banner is None
        if wants and now_ns - self._asked_ns >= min(patience_ns, int(SILENT_S * NS_PER_S)):
            self._ask(now_ns)
        if silent_ns >= _GIVE_UP * patience_ns:
            self._port.reopen(f"{self._settings.device} was silent")

    def _batch(self, taken: list[Taken], now_ns: int) -> Batch:
        """One batch of all frames; the ticks of each run of the board are placed by themselves."""
        starts = [i for i, one in enumerate(taken) if one.restarted or i == 0]
        runs = [taken[a:b] for a, b in zip(starts, [*starts[1:], len(taken)])]
        times, kept = zip(*(self._placed(run, now_ns) for run in runs))
        counts = np.array(decode_counts([one.frame.counts for one in taken]), np.int64)
        placed = np.concatenate(kept)
        counts = counts.reshape(-1, self._channels)[placed]
        times_ns = np.concatenate(times)
        self._remember(taken[-1])
        return Batch(
            times_ns,
            counts.astype(np.int32),
            self._flags(times_ns.size),
            int(times_ns[-1]),
            temperatures_dc(taken)[placed],
        )

    def _placed(self, run: list[Taken], now_ns: int) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
        """Times of the samples of a run that have a place in time, and which those are."""
        ticks_ns, kept = sample_ticks(run)
        banner = self._reception.banner
        spacing_ns = (banner.spacing_ms if banner else 0) * NS_PER_MS
        times_ns = self._clock.place(ticks_ns[kept], now_ns, spacing_ns, run[0].restarted)
        return times_ns, kept

    def _remember(self, last: Taken) -> None:
        frame = last.frame
        self._temperature_c = None if frame.temperature == b"-" else int(frame.temperature) / 10
        self._supply_v = None if frame.supply == b"-" else int(frame.supply) / 1000
        if last.since_ms is not None:
            self._interval_ns = (frame.tick_ms - last.since_ms) * NS_PER_MS
            self._reach_ns = self._interval_ns - self._interval_ns // frame.samples

    def _flags(self, n: int) -> NDArray[np.int32]:
        bits = Flag.SIMULATED if self._simulated else Flag(0)
        if self._settings.supply_v and self._supply_v is not None:
            low_v, high_v = self._settings.supply_v
            if not low_v <= self._supply_v <= high_v:
                bits |= Flag.SUPPLY_OUT_OF_RANGE
        return np.full(n, int(bits), np.int32)


def temperatures_dc(taken: list[Taken]) -> NDArray[np.int32]:
    """Tenths of a degree Celsius at each sample of these frames: its frame's, or MISSING."""
    told = [one.frame.temperature for one in taken]
    of_frame = np.array([MISSING if text == b"-" else int(text) for text in told], np.int32)
    return np.repeat(of_frame, [one.frame.samples for one in taken])


def sample_ticks(run: list[Taken]) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """Tick (ns) of each sample of these frames, and whether its place in time is known.

    With m samples in (since, tick], sample j of 1 to m lies at since + (tick - since) j / m.
    """
    tick = np.array([one.frame.tick_ms for one in run], np.int64) * NS_PER_MS
    m = np.array([one.frame.samples for one in run], np.int64)
    known = np.array([one.since_ms is not None for one in run])
    since = np.array([one.since_ms or 0 for one in run], np.int64) * NS_PER_MS
    back = np.repeat(np.cumsum(m), m) - 1 - np.arange(int(m.sum()))
    span, count = np.repeat(tick - since, m), np.repeat(m, m)
    ticks = np.repeat(tick, m) - span * back // count
    return ticks, np.asarray(np.repeat(known, m) | (back == 0), np.bool_)
