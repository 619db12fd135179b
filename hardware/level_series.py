"""Front end for a recorded level series: a CSV of time and dBm or volts, plain or gzipped."""

from __future__ import annotations

import csv
import gzip
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from itertools import islice
from pathlib import Path
from typing import TextIO

import numpy as np
from numpy.typing import NDArray

from hardware import columns
from hardware.options import clock_start_ns, existing_file, pace
from hardware.recorded import Pace
from monitor.core.errors import ConfigError, DeviceError
from monitor.core.flags import Flag
from monitor.core.keys import Table
from monitor.core.readings import MISSING, Batch, DeviceStatus, FrontEnd, empty_batch

ROWS_A_READ = 3600
_ROWS_A_PIECE = 1 << 15


@dataclass(frozen=True, slots=True)
class Settings:
    """Options of [sensor] for a level series.

    resolution: unit per count. clock_start_ns: UTC of the first row, where its time is not UTC.
    """

    file: Path
    separator: str
    time_column: str
    level_columns: tuple[str, ...]
    resolution: float | None
    clock_start_ns: int | None
    real_pace: bool

    def check_device(self) -> None:
        """DeviceError where the file cannot be read, ConfigError where a column is missing."""
        LevelSeries(self, lambda: 0, False).close()

    def open(
        self,
        channels: int,
        boot_ns: Callable[[], int],
        utc_ns: Callable[[], int],
        simulated: bool,
    ) -> FrontEnd:
        """The front end; ConfigError about its columns, DeviceError about the file."""
        if len(self.level_columns) != channels:
            raise ConfigError(
                f"sensor.level_columns: {len(self.level_columns)} columns for {channels} channels;"
                " name one column for each channel"
            )
        return LevelSeries(self, boot_ns, simulated)


def settings_from(table: Table, folder: Path) -> Settings:
    """Settings from the options; ConfigError about each wrong key, DeviceError without the file."""
    return Settings(
        file=existing_file(table, "file", folder),
        separator=_separator(table),
        time_column=table.text("time_column", "time").strip(),
        level_columns=_level_columns(table),
        resolution=table.number("resolution", low=1e-9, high=1e9),
        clock_start_ns=clock_start_ns(table),
        real_pace=pace(table),
    )


def _separator(table: Table) -> str:
    separator = table.text("separator", ",")
    if len(separator) != 1:
        raise table.error("separator", f"{separator!r} is not one character")
    return str(separator)


def _level_columns(table: Table) -> tuple[str, ...]:
    one = table.text("level_column", None)
    many = table.any("level_columns", None)
    if (one is None) == (many is None):
        raise table.error("level_column", "name either level_column, or level_columns as a list")
    names = [one] if many is None else many
    if (
        not isinstance(names, (list, tuple))
        or not names
        or not all(isinstance(name, str) for name in names)
    ):
        raise table.error("level_columns", f"{names!r} is not a list of column names")
    return tuple(name.strip() for name in names)


class LevelSeries:
    """See monitor.core.readings.FrontEnd. Boot time 0 is the first row; it owns its clock."""

    owns_clock = True

    def __init__(self, settings: Settings, boot_ns: Callable[[], int], simulated: bool) -> None:
        self._settings = settings
        self._bits = int(Flag.SIMULATED) if simulated else 0
        keys = ("rows", "readings", "missing", "malformed", "out_of_order")
        self._counters = dict.fromkeys(keys, 0)
        self._file = _opened(settings.file)
        self._problem = ""
        self._rows = csv.reader(self._file, delimiter=settings.separator)
        try:
            self._indices = self._header()
            self._origin_ns, self._stamps = self._first_row()
        except ConfigError:
            self._file.close()
            raise
        self._latest_ns = -1
        self._times = np.empty(0, np.int64)
        self._counts = np.empty((0, len(settings.level_columns)), np.int32)
        self._now_ns = 0
        self._ended = False
        start_ns = self._origin_ns if settings.clock_start_ns is None else settings.clock_start_ns
        self.clock_fix: tuple[int, int] | None = (0, start_ns)
        self._pace = Pace(settings.real_pace, boot_ns)

    def read(self, timeout_s: float) -> Batch:
        """The next rows, at most 3600; at real pace those that are due."""
        if not self._ended and not self._times.size:
            self._refill()
        if not self._times.size:
            self._ended = True
            return self._nothing(self._now_ns)
        reached_ns = self._pace.until(int(self._times[0]), timeout_s)
        elapsed_ns = self._pace.elapsed_ns()
        last = ROWS_A_READ
        if elapsed_ns is not None:
            last = min(last, int(np.searchsorted(self._times, elapsed_ns, side="right")))
        if last == 0:
            return self._nothing(reached_ns)
        return self._batch(last)

    def status(self) -> DeviceStatus:
        """How far the series is; ended once all its rows have been read."""
        text = f"{self._settings.file.name}, {self._counters['readings']} readings"
        if self._problem:
            text = f"{text}; {self._problem}"
        connected = not self._ended and not self._problem
        return DeviceStatus(connected, text, counters=dict(self._counters), ended=self._ended)

    def close(self) -> None:
        """Let the file go."""
        self._pace.close()
        self._ended = True
        self._file.close()

    def _nothing(self, now_ns: int) -> Batch:
        self._now_ns = max(self._now_ns, now_ns)
        return empty_batch(self._counts.shape[1], self._now_ns)

    def _batch(self, n: int) -> Batch:
        times, counts = self._times[:n], self._counts[:n]
        self._times, self._counts = self._times[n:], self._counts[n:]
        self._now_ns = int(times[-1])
        self._counters["readings"] += times.size
        self._counters["missing"] += int((counts == MISSING).sum())
        if not self._times.size:
            self._refill()
            self._ended = not self._times.size
        return Batch(times, counts, np.full(times.size, self._bits, np.int32), self._now_ns)

    def _header(self) -> list[int]:
        names = [name.strip().lstrip("\ufeff") for name in next(self._pieces(1), [[]])[0]]
        wanted = [self._settings.time_column, *self._settings.level_columns]
        for key, name in zip(("time_column", *["level_column"] * (len(wanted) - 1)), wanted):
            if name not in names:
                raise ConfigError(
                    f"sensor.{key}: {self._settings.file} has no column {name!r};"
                    f" it has {', '.join(names) or 'none'}"
                )
        return [names.index(name) for name in wanted]

    def _first_row(self) -> tuple[int, bool]:
        """UTC (ns) of the first row with a time, and whether times are stamps. Rewinds."""
        column = self._indices[0]
        for piece in self._pieces(100):
            for row in piece:
                text = row[column].strip() if len(row) > column else ""
                stamps = columns.is_stamp(text)
                first_ns = int(columns.times_ns([text], stamps)[0])
                if first_ns != columns.NO_TIME:
                    self._file.seek(0)
                    self._rows = csv.reader(self._file, delimiter=self._settings.separator)
                    next(self._rows)
                    return first_ns, stamps
        raise ConfigError(
            f"sensor.time_column: {self._settings.file} has no row with a time; write RFC 3339,"
            " 'YYYY-MM-DD hh:mm:ss' (UTC) or seconds"
        )

    def _pieces(self, size: int) -> Iterator[list[list[str]]]:
        """Rows in pieces; a file that breaks off ends there, and the status says so."""
        while True:
            rows: list[list[str]] = []
            try:
                rows.extend(islice(self._rows, size))
            except (OSError, EOFError, UnicodeDecodeError, csv.Error) as error:
                self._problem = f"{self._settings.file} cannot be read further ({error})"
            if rows:
                yield rows
            if self._problem or len(rows) < size:
                return

    def _refill(self) -> None:
        """Parse the next rows into times and counts, until there are some or the file ends."""
        for rows in self._pieces(_ROWS_A_PIECE):
            self._counters["rows"] += len(rows)
            self._times, self._counts = self._parsed(rows)
            if self._times.size:
                return

    def _parsed(self, rows: list[list[str]]) -> tuple[NDArray[np.int64], NDArray[np.int32]]:
        width = max(self._indices) + 1
        whole = [row for row in rows if len(row) >= width]
        self._counters["malformed"] += sum(0 < len(row) < width for row in rows)
        times = columns.times_ns([row[self._indices[0]] for row in whole], self._stamps)
        counts = np.empty((len(whole), len(self._indices) - 1), np.int32)
        for channel, index in enumerate(self._indices[1:]):
            values, wrong = columns.floats([row[index] for row in whole])
            counts[:, channel] = columns.counts(values, self._settings.resolution or 1.0)
            self._counters["malformed"] += wrong
        timed = times != columns.NO_TIME
        self._counters["malformed"] += int((~timed).sum())
        times, counts = times[timed] - self._origin_ns, counts[timed]
        before = np.maximum.accumulate(np.concatenate([[self._latest_ns], times]))
        later = times > before[:-1]
        self._counters["out_of_order"] += int((~later).sum())
        self._latest_ns = int(before[-1])
        return times[later], counts[later]


def _opened(path: Path) -> TextIO:
    """The file as text, unpacked where its name ends in .gz; DeviceError where unreadable."""
    try:
        if path.suffix == ".gz":
            return gzip.open(path, "rt", encoding="utf-8", newline="")
        return path.open("r", encoding="utf-8", newline="")
    except OSError as error:
        raise DeviceError(
            f"sensor.file: {path} cannot be read ({error.strerror}); correct the path"
        ) from None
