"""Front end for any board that already prints numbers: delimited text on a serial line."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from hardware.options import averaging
from hardware.overload import overload_word
from hardware.timing import LATENESS_NS, increasing_after
from hardware.transport import Port, check_device, url_problem
from monitor.core.averaging_law import Averaging
from monitor.core.errors import ConfigError
from monitor.core.flags import Flag
from monitor.core.keys import Table
from monitor.core.numerals import figure
from monitor.core.readings import (
    MISSING,
    NS_PER_S,
    Batch,
    DeviceStatus,
    FrontEnd,
    empty_batch,
)

LONGEST_LINE = 1000
"""Bytes; a longer line is thrown away."""
SILENT_S = 30.0
_MOST_COUNTS = 2**31 - 1


@dataclass(frozen=True, slots=True)
class Settings:
    """Options of [sensor] for text lines.

    columns: one per channel, counted from 1. separator: empty stands for any blanks.
    resolution: unit per count; a count is the printed figure divided by it, rounded.
    overload: the word that the board prints instead of a figure above its range; "" where none.
    averaging: what the board says that it averages before it prints.
    """

    device: str
    baud: int
    separator: str
    columns: tuple[int, ...]
    resolution: float | None
    overload: str
    averaging: Averaging

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
        """The front end; ConfigError unless there is one column for each channel."""
        if len(self.columns) != channels:
            raise ConfigError(
                f"sensor.columns: {len(self.columns)} columns for {channels} channels;"
                " name one column for each channel"
            )
        return TextLines(self, boot_ns, simulated)


def settings_from(table: Table) -> Settings:
    """Settings from the options; ConfigError about each wrong key."""
    device = table.text("device")
    if not device or url_problem(device):
        raise table.error("device", url_problem(device) or "is empty; name a port")
    columns = table.any("columns")
    if not isinstance(columns, (list, tuple)) or not columns:
        raise table.error("columns", "must be a list of column numbers, one for each channel")
    for column in columns:
        if type(column) is not int or column < 1:
            raise table.error("columns", f"{column!r} is not a column number; the first is 1")
    separator = table.text("separator", ",").strip()
    return Settings(
        device=device,
        baud=table.whole("baud", 115_200, 300, 4_000_000),
        separator=separator,
        columns=tuple(columns),
        resolution=table.number("resolution", low=1e-9, high=1e9),
        overload=overload_word(table, separator),
        averaging=averaging(table),
    )


class TextLines:
    """See monitor.core.readings.FrontEnd. Readings are stamped by their arrival.

    The first line after an opening is thrown away: it may lack its beginning. Lines that arrive
    together are spread backwards by the usual interval between lines.
    """

    owns_clock = False
    clock_fix: tuple[int, int] | None = None

    def __init__(self, settings: Settings, boot_ns: Callable[[], int], simulated: bool) -> None:
        self._settings = settings
        self._boot_ns = boot_ns
        self._bits = int(Flag.SIMULATED) if simulated else 0
        self._port = Port(settings.device, settings.baud, boot_ns)
        keys = ("lines", "readings", "partial", "comments", "malformed", "too_long", "missing",
                "overload")  # fmt: skip
        self._counters = dict.fromkeys(keys, 0)
        self._generation = 0
        self._rest = b""
        self._skip_line = True
        self._last_ns = self._vouched_ns = self._heard_ns = boot_ns()
        self._usual_ns = NS_PER_S

    def read(self, timeout_s: float) -> Batch:
        """Readings that came since the last call; waits at most timeout_s."""
        data = self._port.read(timeout_s)
        now_ns = self._boot_ns()
        if self._port.generation != self._generation:
            self._generation = self._port.generation
            self._rest = b""
            self._skip_line = True
        rows = [row for line in self._lines(data) if (row := self._row(line)) is not None]
        if not rows:
            self._vouched_ns = max(self._vouched_ns, now_ns - LATENESS_NS)
            return empty_batch(len(self._settings.columns), self._vouched_ns)
        self._port.heard()
        self._heard_ns = now_ns
        self._counters["readings"] += len(rows)
        return self._batch(rows, now_ns)

    def status(self) -> DeviceStatus:
        """The port's state now; connected while lines with numbers come."""
        silent_s = (self._boot_ns() - self._heard_ns) / NS_PER_S
        hung = silent_s > SILENT_S
        if not self._port.is_open:
            text = f"{self._port.problem}; trying again"
        elif hung:
            text = f"{self._settings.device} is open, but no number came for {silent_s:.0f} s"
        else:
            text = self._settings.device
        counters = self._counters | self._port.counters
        return DeviceStatus(self._port.is_open and not hung, text, counters=counters)

    def close(self) -> None:
        """Let the port go."""
        self._port.close()

    def _lines(self, data: bytes) -> list[bytes]:
        lines = (self._rest + data).split(b"\n")
        self._rest = lines.pop()
        self._counters["lines"] += len(lines)
        if lines and self._skip_line:
            self._counters["partial"] += bool(lines[0].strip())
            del lines[0]
            self._skip_line = False
        if len(self._rest) > LONGEST_LINE:
            self._counters["too_long"] += 1
            self._rest = b""
            self._skip_line = True
        return [line for line in lines if line.strip()]

    def _row(self, line: bytes) -> tuple[list[int], int] | None:
        """Counts and flags of a line; None where it is a comment, too short, too long or empty."""
        text = line.decode("ascii", "replace").strip()
        if text.startswith("#"):
            self._counters["comments"] += 1
            return None
        fields = text.split(self._settings.separator or None)
        if len(line) > LONGEST_LINE or len(fields) < max(self._settings.columns):
            self._counters["malformed"] += 1
            return None
        words = [fields[column - 1].strip() for column in self._settings.columns]
        over = [bool(word) and word == self._settings.overload for word in words]
        values = [math.nan if o else figure(word) for word, o in zip(words, over)]
        self._counters["overload"] += sum(over)
        if None in values:
            self._counters["malformed"] += 1
        if all(value is None for value in values):
            return None
        bits = int(Flag.ABOVE_RANGE) if any(over) else 0
        return [self._count(value) for value in values], bits

    def _count(self, value: float | None) -> int:
        scaled = math.nan if value is None else value / (self._settings.resolution or 1.0)
        if not abs(scaled) <= _MOST_COUNTS:
            self._counters["missing"] += 1
            return MISSING
        return round(scaled)

    def _batch(self, rows: list[tuple[list[int], int]], now_ns: int) -> Batch:
        n = len(rows)
        step_ns = (now_ns - self._last_ns) // n
        self._usual_ns += (step_ns - self._usual_ns) // 8
        step_ns = min(step_ns, self._usual_ns)
        times_ns = now_ns - step_ns * np.arange(n - 1, -1, -1, dtype=np.int64)
        times_ns = increasing_after(times_ns, max(self._vouched_ns, self._last_ns))
        self._last_ns = self._vouched_ns = int(times_ns[-1])
        counts = np.array([counts for counts, _ in rows], np.int32)
        flags = np.array([bits | self._bits for _, bits in rows], np.int32)
        return Batch(times_ns, counts, flags, self._last_ns)
