"""Front end for a recorded I/Q file: the power of each band per interval, in milli-dBFS."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import BinaryIO, ClassVar

import numpy as np
from numpy.typing import NDArray

from hardware import sigmf
from hardware.options import clock_start_ns, existing_file, pace, utc_ns_of
from hardware.recorded import Pace
from monitor.core.averaging_law import Averaging
from monitor.core.errors import ConfigError, DeviceError
from monitor.core.flags import Flag
from monitor.core.keys import REQUIRED, Table
from monitor.core.readings import MISSING, NS_PER_S, Batch, DeviceStatus, FrontEnd, empty_batch
from monitor.core.sigmf import DATA, IqFormat
from monitor.core.spectrum import (
    DATATYPES,
    BandAccumulator,
    bytes_per_sample,
    clipped_components,
    samples_from_bytes,
)

COUNTS_PER_DB = 1000.0
_CHUNK_SAMPLES = 1 << 18
INTERVAL_S = 0.1
"""Of one reading, where the options do not say."""

Bands = tuple[tuple[float, float], ...]


@dataclass(frozen=True, slots=True)
class Settings:
    """Options of [sensor] for an I/Q file. bands: (low, high) in Hz from centre_hz, per channel.

    start_utc_ns: of the first sample; start_source: where that was found. form: what the file says.
    """

    file: Path
    datatype: str
    rate_hz: float
    centre_hz: float
    bands: Bands
    fft: int
    overlap: float
    interval_s: float
    start_utc_ns: int
    start_source: str
    form: IqFormat
    real_pace: bool
    resolution: ClassVar[float | None] = 1.0 / COUNTS_PER_DB

    @property
    def bands_hz(self) -> Bands:
        """(low, high) on the air per channel, Hz."""
        return tuple((self.centre_hz + low, self.centre_hz + high) for low, high in self.bands)

    @property
    def bin_hz(self) -> float:
        """Spacing of the spectrum's bins: an edge of a band cannot be finer."""
        return self.rate_hz / self.fft

    @property
    def averaging(self) -> Averaging:
        """A reading is the mean power of its interval."""
        return Averaging("power", self.interval_s)

    def check_device(self) -> None:
        """DeviceError where the file cannot be read."""
        _opened(self.file).close()

    def open(
        self,
        channels: int,
        boot_ns: Callable[[], int],
        utc_ns: Callable[[], int],
        simulated: bool,
    ) -> FrontEnd:
        """The front end; ConfigError unless there is one band for each channel, and where simulated
        samples are to pass for real ones.
        """
        if len(self.bands) != channels:
            raise ConfigError(
                f"sensor.bands: {len(self.bands)} bands for {channels} channels;"
                " give one [low, high] for each channel"
            )
        if self.form.simulated and not simulated:
            raise ConfigError(
                f"sensor.file: {self.file} holds simulated samples, its metadata say;"
                " write simulated = true under [site]"
            )
        return IqFile(self, boot_ns, simulated)


def settings_from(table: Table, folder: Path) -> Settings:
    """Settings from the options; ConfigError about each wrong key, DeviceError without the file."""
    capture = table.any("capture", None)
    if capture is not None:
        capture = table.whole("capture", 0, 0, 1 << 31)
    data, form = sigmf.find(existing_file(table, "file", folder), capture)
    known = form or IqFormat("")
    if data.suffix != DATA:
        known = replace(known, header_bytes=table.whole("header_bytes", 0, 0, 1 << 31))
        if capture is not None:
            raise table.error("capture", f"{data.name} has no header with captures; leave it out")
    datatype = table.text("datatype", known.datatype or REQUIRED, tuple(DATATYPES))
    rate_hz = _agreed(table, "rate_hz", known.rate_hz)
    fft = table.whole("fft", 1024, 8, 1 << 20)
    start_utc_ns, source = _start(table, data, known)
    settings = Settings(
        file=data,
        datatype=datatype,
        rate_hz=rate_hz,
        centre_hz=_agreed(table, "centre_hz", known.centre_hz),
        bands=_bands(table),
        fft=fft,
        overlap=table.number("overlap", 0.5, 0.0, 0.99),
        interval_s=table.number("interval_s", INTERVAL_S, fft / rate_hz, 3600.0),
        start_utc_ns=start_utc_ns,
        start_source=source,
        form=known,
        real_pace=pace(table),
    )
    _accumulator(settings, table)
    return settings


def _agreed(table: Table, key: str, header_hz: float | None) -> float:
    """A frequency from the options or the header; ConfigError where neither or both tell it.

    Both may, if they agree. A header's 0 is a receiver that did not know: it tells nothing.
    """
    given_hz = table.number(key, header_hz or REQUIRED, low=1.0, high=1e12)
    if header_hz and not math.isclose(given_hz, header_hz, rel_tol=1e-9):
        raise table.error(
            key,
            f"{given_hz:.12g} differs from {header_hz:.12g} in the recording's header;"
            " leave it out or correct the header",
        )
    return given_hz


def _start(table: Table, path: Path, form: IqFormat) -> tuple[int, str]:
    given_ns = clock_start_ns(table)
    if given_ns is not None:
        return given_ns, "clock_start"
    header_ns = utc_ns_of(form.start)
    if header_ns is not None:
        return header_ns, "header"
    return path.stat().st_mtime_ns, "time of the file, its recording time is unknown"


def _bands(table: Table) -> Bands:
    value = table.any("bands")
    if not isinstance(value, (list, tuple)) or not value:
        raise table.error("bands", "must be a list of [low, high], Hz from the centre")
    for pair in value:
        good = isinstance(pair, (list, tuple)) and len(pair) == 2
        if not good or not all(type(edge) in (int, float) for edge in pair):
            raise table.error("bands", f"{pair!r} is not [low, high], Hz from the centre")
    return tuple((float(low), float(high)) for low, high in value)


def _accumulator(settings: Settings, table: Table | None = None) -> BandAccumulator:
    """A fresh one; ConfigError about bands outside the sampled span."""
    try:
        return BandAccumulator(settings.rate_hz, settings.bands, settings.fft, settings.overlap)
    except ConfigError as error:
        raise (table.error("bands", str(error)) if table else error) from None


class IqFile:
    """See monitor.core.readings.FrontEnd. One reading for each interval, stamped at its start.

    Boot time 0 is the first sample. A rest shorter than one segment at the end is left out.
    """

    owns_clock = True

    def __init__(self, settings: Settings, boot_ns: Callable[[], int], simulated: bool) -> None:
        self._settings = settings
        self._bits = int(Flag.SIMULATED) if simulated else 0
        self._size = bytes_per_sample(settings.datatype)
        self._interval = max(settings.fft, round(settings.interval_s * settings.rate_hz))
        self._file = _opened(settings.file)
        first, end = settings.form.span(self._file.seek(0, 2))
        self._file.seek(first)
        self._samples = (end - first) // self._size
        self._at = 0
        self._now_ns = 0
        self._ended = False
        self._problem = ""
        keys = ("readings", "samples", "clipped_components", "samples_left_out", "missing")
        self._counters = dict.fromkeys(keys, 0)
        self.clock_fix: tuple[int, int] | None = (0, settings.start_utc_ns)
        self._pace = Pace(settings.real_pace, boot_ns)

    def read(self, timeout_s: float) -> Batch:
        """The next interval; at real pace once its time is over."""
        n = min(self._interval, self._samples - self._at)
        if self._ended or n < self._settings.fft:
            self._counters["samples_left_out"] += max(n, 0)
            self._at = self._samples
            self._ended = True
            return empty_batch(len(self._settings.bands), self._now_ns)
        start_ns, end_ns = self._time_ns(self._at), self._time_ns(self._at + n)
        if self._pace.until(end_ns, timeout_s) < end_ns:
            # the reading of the running interval lies at its start: nothing later is sure
            self._now_ns = max(self._now_ns, start_ns)
            return empty_batch(len(self._settings.bands), self._now_ns)
        powers, clipped = self._measure(n)
        self._at += n
        self._now_ns = end_ns
        self._ended = self._samples - self._at < self._settings.fft or bool(self._problem)
        if self._ended:
            self._counters["samples_left_out"] += self._samples - self._at
        return self._batch(start_ns, powers, clipped)

    def status(self) -> DeviceStatus:
        """How far the file is; ended once all of it has been read."""
        settings = self._settings
        text = f"{settings.file.name}, {self._time_ns(self._at) / NS_PER_S:.3f} s;"
        text += f" begins at: {settings.start_source}"
        if self._problem:
            text = f"{text}; {self._problem}"
        connected = not self._ended and not self._problem
        return DeviceStatus(connected, text, counters=dict(self._counters), ended=self._ended)

    def close(self) -> None:
        """Let the file go."""
        self._pace.close()
        self._ended = True
        self._file.close()

    def _time_ns(self, sample: int) -> int:
        return round(sample * NS_PER_S / self._settings.rate_hz)

    def _measure(self, n: int) -> tuple[NDArray[np.float64], int]:
        """Band powers of the next n samples (1.0 = 0 dBFS), and how many components clipped."""
        accumulator = _accumulator(self._settings)
        clipped = 0
        while n > 0:
            raw = self._take(min(n, _CHUNK_SAMPLES) * self._size)
            if len(raw) < self._size:
                break
            n -= len(raw) // self._size
            accumulator.add(samples_from_bytes(raw, self._settings.datatype))
            clipped += clipped_components(raw, self._settings.datatype)[0]
        result = accumulator.result()
        self._counters["samples"] += result.samples
        self._counters["clipped_components"] += clipped
        return result.power * self._settings.form.scale**2, clipped

    def _take(self, size: int) -> bytes:
        try:
            raw = self._file.read(size)
        except OSError as error:
            raw = b""
            self._problem = f"cannot be read further ({error.strerror})"
        if len(raw) < size and not self._problem:
            self._problem = "became shorter while it was read"
        return raw

    def _batch(self, start_ns: int, powers: NDArray[np.float64], clipped: int) -> Batch:
        counts = np.full((1, powers.size), MISSING, np.int32)
        there = powers > 0
        decibels = 10.0 * np.log10(powers[there])
        counts[0, there] = np.rint(COUNTS_PER_DB * decibels).astype(np.int32)
        self._counters["readings"] += 1
        self._counters["missing"] += int((~there).sum())
        bits = self._bits | (int(Flag.CLIPPED) if clipped else 0)
        times = np.array([start_ns], np.int64)
        return Batch(times, counts, np.array([bits], np.int32), self._now_ns)


def _opened(path: Path) -> BinaryIO:
    try:
        return path.open("rb")
    except OSError as error:
        raise DeviceError(
            f"sensor.file: {path} cannot be read ({error.strerror}); correct the path"
        ) from None
