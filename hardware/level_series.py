"""Front end for a recorded level series: a CSV of time and dBm or volts, plain or gzipped."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from hardware import columns
from hardware.csv_rows import CsvRows
from hardware.options import averaging, clock_start_ns, existing_file, pace
from hardware.order import misplaced
from hardware.overload import overload_word
from hardware.recorded import Pace
from monitor.core.averaging_law import Averaging
from monitor.core.errors import ConfigError
from monitor.core.flags import Flag
from monitor.core.keys import Table
from monitor.core.readings import MISSING, Batch, DeviceStatus, FrontEnd, empty_batch

Bits = NDArray[np.int32]

ROWS_A_READ = 3600
_ROWS_A_PIECE = 1 << 15
MOST_MISPLACED, MOST_MISPLACED_SHARE = 3, 0.01
"""More rows out of order than both: the file is not what it seems, and is refused."""


@dataclass(frozen=True, slots=True)
class Settings:
    """Options of [sensor] for a level series.

    resolution: unit per count. overload: the word that stands for a level above the range; ""
    where none. averaging: what each level is said to be an average of. clock_start_ns: UTC of the
    first row, where its time is not UTC.
    """

    file: Path
    separator: str
    time_column: str
    level_columns: tuple[str, ...]
    resolution: float | None
    overload: str
    averaging: Averaging
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
    separator = _separator(table)
    return Settings(
        file=existing_file(table, "file", folder),
        separator=separator,
        time_column=table.text("time_column", "time").strip(),
        level_columns=_level_columns(table),
        resolution=table.number("resolution", low=1e-9, high=1e9),
        overload=overload_word(table, separator),
        averaging=averaging(table),
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
    """See monitor.core.readings.FrontEnd. Boot time 0 is the first row; it owns its clock.

    Opening reads the times of the whole file: a row out of order is left out, whichever spares the
    most others, and counted; ConfigError where there are many.
    """

    owns_clock = True

    def __init__(self, settings: Settings, boot_ns: Callable[[], int], simulated: bool) -> None:
        self._settings = settings
        self._bits = int(Flag.SIMULATED) if simulated else 0
        keys = ("rows", "readings", "missing", "malformed", "out_of_order", "overload")
        self._counters = dict.fromkeys(keys, 0)
        self._rows = CsvRows(settings.file, settings.separator)
        try:
            self._indices = self._columns()
            self._stamps = self._stamped()
            self._origin_ns, self._dropped = self._order()
        except ConfigError:
            self._rows.close()
            raise
        self._read_rows = 0
        self._latest_ns = -1
        self._times = np.empty(0, np.int64)
        self._counts = np.empty((0, len(settings.level_columns)), np.int32)
        self._flags = np.empty(0, np.int32)
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
        if self._rows.problem:
            text = f"{text}; {self._rows.problem}"
        connected = not self._ended and not self._rows.problem
        return DeviceStatus(connected, text, counters=dict(self._counters), ended=self._ended)

    def close(self) -> None:
        """Let the file go."""
        self._pace.close()
        self._ended = True
        self._rows.close()

    def _nothing(self, now_ns: int) -> Batch:
        self._now_ns = max(self._now_ns, now_ns)
        return empty_batch(self._counts.shape[1], self._now_ns)

    def _batch(self, n: int) -> Batch:
        times, counts, flags = self._times[:n], self._counts[:n], self._flags[:n]
        self._times, self._counts = self._times[n:], self._counts[n:]
        self._flags = self._flags[n:]
        self._now_ns = int(times[-1])
        self._counters["readings"] += times.size
        self._counters["missing"] += int((counts == MISSING).sum())
        if not self._times.size:
            self._refill()
            self._ended = not self._times.size
        return Batch(times, counts, flags, self._now_ns)

    def _columns(self) -> list[int]:
        names = self._rows.names
        wanted = [self._settings.time_column, *self._settings.level_columns]
        for key, name in zip(("time_column", *["level_column"] * (len(wanted) - 1)), wanted):
            if name not in names:
                raise ConfigError(
                    f"sensor.{key}: {self._settings.file} has no column {name!r};"
                    f" it has {', '.join(names) or 'none'}"
                )
        return [names.index(name) for name in wanted]

    def _stamped(self) -> bool:
        """Whether times are stamps, as the first row with a time has it."""
        width, column = max(self._indices) + 1, self._indices[0]
        for piece in self._rows.pieces(100):
            for row in piece:
                text = row[column] if len(row) >= width else ""
                stamps = columns.is_stamp(text)
                if columns.times_ns([text], stamps)[0] != columns.NO_TIME:
                    return stamps
        raise ConfigError(
            f"sensor.time_column: {self._settings.file} has no row with a time; write RFC 3339,"
            " 'YYYY-MM-DD hh:mm:ss' (UTC) or seconds"
        )

    def _order(self) -> tuple[int, NDArray[np.int64]]:
        """UTC (ns) of the first row that is in order, and the rows that are not. Rewinds."""
        self._rows.rewind()
        pieces = [self._times_of(rows) for rows in self._rows.pieces(_ROWS_A_PIECE)]
        self._rows.rewind()
        times = np.concatenate(pieces)
        timed = np.flatnonzero(times != columns.NO_TIME)
        dropped = timed[misplaced(times[timed])]
        if dropped.size > max(MOST_MISPLACED, MOST_MISPLACED_SHARE * timed.size):
            # The header is line 1.
            lines = ", ".join(str(row + 2) for row in dropped[:3].tolist())
            raise ConfigError(
                f"sensor.file: {self._settings.file}: {dropped.size} of {timed.size} times are not"
                f" after the one before, first at lines {lines}; sort the rows by time, write each"
                " time once and in UTC"
            )
        return int(times[np.setdiff1d(timed, dropped, assume_unique=True)[0]]), dropped

    def _times_of(self, rows: list[list[str]]) -> NDArray[np.int64]:
        """UTC (ns) of each row, NO_TIME where a column or the time is missing."""
        width, column = max(self._indices) + 1, self._indices[0]
        texts = [row[column] if len(row) >= width else "" for row in rows]
        return columns.times_ns(texts, self._stamps)

    def _refill(self) -> None:
        """Parse the next rows into times and counts, until there are some or the file ends."""
        for rows in self._rows.pieces(_ROWS_A_PIECE):
            self._counters["rows"] += len(rows)
            self._times, self._counts, self._flags = self._parsed(rows)
            self._read_rows += len(rows)
            if self._times.size:
                return

    def _parsed(self, rows: list[list[str]]) -> tuple[NDArray[np.int64], Bits, Bits]:
        width = max(self._indices) + 1
        whole = [i for i, row in enumerate(rows) if len(row) >= width]
        self._counters["malformed"] += sum(0 < len(row) < width for row in rows)
        counts = np.empty((len(whole), len(self._indices) - 1), np.int32)
        flags = np.full(len(whole), self._bits, np.int32)
        for channel, index in enumerate(self._indices[1:]):
            counts[:, channel], over = self._levels([rows[i][index] for i in whole])
            flags[over] |= np.int32(Flag.ABOVE_RANGE)
        times = self._times_of(rows)[whole]
        timed = times != columns.NO_TIME
        self._counters["malformed"] += int((~timed).sum())
        number = np.array(whole, np.int64) + self._read_rows
        keep = timed & ~np.isin(number, self._dropped)
        # What was written to the file since it was opened may be out of order too.
        times = np.where(keep, times - self._origin_ns, -1)
        before = np.maximum.accumulate(np.concatenate([[self._latest_ns], times]))
        keep &= times > before[:-1]
        self._counters["out_of_order"] += int((timed & ~keep).sum())
        self._latest_ns = int(before[-1])
        return times[keep], counts[keep], flags[keep]

    def _levels(self, texts: list[str]) -> tuple[Bits, NDArray[np.bool_]]:
        """Counts of one column, and where the overload word stands instead of a figure."""
        word = self._settings.overload
        over = np.zeros(len(texts), np.bool_)
        if word:
            over[:] = [text.strip() == word for text in texts]
            texts = ["" if o else text for text, o in zip(texts, over.tolist())]
        values, wrong = columns.floats(texts)
        self._counters["malformed"] += wrong
        self._counters["overload"] += int(over.sum())
        return columns.counts(values, self._settings.resolution or 1.0), over
