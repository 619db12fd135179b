"""A daemon whose front end, clock and record are played by hand."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path

import numpy as np

from monitor.alarm_desk import AlarmDesk
from monitor.config import Band, Channel, Site
from monitor.core import pipeline
from monitor.core.readings import Batch, DeviceStatus
from monitor.core.station import Station
from monitor.daemon import Daemon
from monitor.record.types import Commit

S = 1_000_000_000


class Clock:
    """Both clocks of a machine, moved by hand. error_ns None: nothing has set the wall clock."""

    def __init__(self, error_ns: int | None = 1_000_000) -> None:
        self.now_ns = 0
        self.utc0_ns = 1_700_000_000 * S
        self.error_ns = error_ns

    def boot_ns(self) -> int:
        return self.now_ns

    def utc_ns(self) -> int:
        return self.utc0_ns + self.now_ns

    def uncertainty_ns(self) -> int | None:
        return self.error_ns


class Front:
    """Gives what was put in, one batch a read; moves the clock to the batch's now."""

    owns_clock = False
    clock_fix = None

    def __init__(self, clock: Clock, temperature_c: float | None = 20.0) -> None:
        self.clock = clock
        self.temperature_c = temperature_c
        self.batches: list[Batch] = []

    def read(self, timeout_s: float) -> Batch:
        batch = self.batches.pop(0)
        self.clock.now_ns = batch.now_ns
        return batch

    def status(self) -> DeviceStatus:
        return DeviceStatus(True, "made up", self.temperature_c)

    def close(self) -> None:
        pass


class Writer:
    """A record in memory; error set: the disk is full."""

    boot = 1

    def __init__(self) -> None:
        self.commits: list[Commit] = []
        self.error, self.refused, self.refusal = "", 0, ""

    def put(self, boot: None, commit: Commit, block: bool, timeout_s: float) -> bool:
        if self.error:
            return False
        self.commits.append(commit)
        return True

    def flush(self, timeout_s: float | None = None) -> bool:
        return not self.error

    def close(self, timeout_s: float = 10.0) -> bool:
        return not self.error


def site() -> Site:
    return Site(
        path=Path("site.toml"), name="Made up", place="", simulated=False, occupancy="public",
        field_region="far", record_path=Path("record.db"), commit_s=10.0, sensor_kind="made_up",
        hold_s=3.0, calibration=Path("calibration.toml"), sensor_options={},
        channels=(Channel("x", "x", "all"),), bands={"all": Band("all", 8e8, 1e9, "filter")},
        limit_sets=(), alerts=(), silence_after_s=30.0, host="127.0.0.1", port=0,
    )  # fmt: skip


class Desk:
    """The daemon and its surroundings."""

    def __init__(
        self, here: Station, *, error_ns: int | None = 1_000_000,
        temperature_c: float | None = 20.0, desk: AlarmDesk | None = None,
    ) -> None:  # fmt: skip
        self.clock = Clock(error_ns)
        self.front = Front(self.clock, temperature_c)
        self.writer = Writer()
        self.desk = desk or AlarmDesk()
        state = pipeline.start(here, 0, self.desk.raised())
        self.daemon = Daemon(
            site(), here, self.front, self.writer, self.clock, state, self.desk  # type: ignore[arg-type]
        )  # fmt: skip
        self.here = here

    def feed(self, times_s: Iterable[float], counts: Iterable[int], step: int = 10) -> None:
        """Readings on every channel, step of them a turn."""
        times = np.rint(np.array(list(times_s)) * S).astype(np.int64)
        column = np.array(list(counts), np.int32)
        rows = np.repeat(column[:, None], self.here.channels, axis=1)
        for first in range(0, times.size, step):
            part = slice(first, first + step)
            flags = np.zeros(times[part].size, np.int32)
            self.front.batches.append(Batch(times[part], rows[part], flags, int(times[part][-1])))
            self.daemon.turn()

    def idle(self, now_s: float) -> None:
        """Nothing came until now_s."""
        empty = np.empty(0, np.int64)
        counts = np.empty((0, self.here.channels), np.int32)
        self.front.batches.append(Batch(empty, counts, np.empty(0, np.int32), round(now_s * S)))
        self.daemon.turn()

    def now(self) -> dict:
        return self.daemon.answer({"do": "now"})["now"]  # type: ignore[return-value]

    def states(self) -> dict[str, str]:
        """State of each alarm that is not normal, by key."""
        return {alarm["key"]: alarm["state"] for alarm in self.now()["alarms"]}
