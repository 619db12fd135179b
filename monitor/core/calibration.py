"""From raw counts to power at the detector's port, and from power to E squared."""

from __future__ import annotations

import hashlib
import math
import struct
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from monitor.core.budget import Contribution
from monitor.core.distributions import Real
from monitor.core.errors import CalibrationError
from monitor.core.flags import Flag
from monitor.core.limits import frequency_text
from monitor.core.quantities import PORT_OHM
from monitor.core.readings import MISSING

Bits = NDArray[np.int32]

MAX_TABLE = 2**18
"""Most entries that a count table may have: 18 bits of converter."""

_AT_ONCE = 2**16
"""Readings that are looked up together: what stands between the steps then stays in the cache."""

_HEAD = struct.Struct("<8sqq")
_MAGIC = b"FSCOUNT1"


@dataclass(frozen=True, slots=True, eq=False)
class CountTable:
    """Power for every raw count of one channel; no arithmetic is left at run time.

    power_w: f8 (n,), W at the detector's port, nan where the count is no reading. flags: i4 (n,).
    Entry i belongs to the count first_count + i; a count outside the table is no reading.
    """

    first_count: int
    power_w: Real
    flags: Bits
    _powers: Real = field(init=False, repr=False)
    _bits: Bits = field(init=False, repr=False)

    def __post_init__(self) -> None:
        """CalibrationError for an empty table, one that is too long, or unequal lengths."""
        n = self.power_w.size
        if not 0 < n <= MAX_TABLE or self.flags.size != n:
            raise CalibrationError(f"a count table has {n} entries; 1 to {MAX_TABLE} are possible")
        # One entry more at either end stands for all counts beyond it.
        ends = self.flags[[0, -1]] & int(Flag.ABOVE_RANGE) | int(Flag.NO_SIGNAL_WIRE)
        bits = np.concatenate([ends[:1], self.flags, ends[1:]]).astype(np.int32)
        object.__setattr__(self, "_powers", np.pad(self.power_w, 1, constant_values=np.nan))
        object.__setattr__(self, "_bits", bits)

    def convert(self, counts: NDArray[np.int32]) -> tuple[Real, Bits]:
        """Power in W (nan: no reading) and flags of raw counts; both of the shape of counts.

        A count beyond the table on its strong side is above range, too: such a gap is not quiet.
        """
        wanted = counts.reshape(-1)
        power_w, flags = np.empty(wanted.size), np.empty(wanted.size, np.int32)
        for start in range(0, wanted.size, _AT_ONCE):
            part = slice(start, start + _AT_ONCE)
            index = np.subtract(wanted[part], self.first_count - 1, dtype=np.intp)
            self._powers.take(index, out=power_w[part], mode="clip")
            self._bits.take(index, out=flags[part], mode="clip")
        if self._bits[0] & int(Flag.ABOVE_RANGE):
            flags[wanted == MISSING] = int(Flag.NO_SIGNAL_WIRE)
        return power_w.reshape(counts.shape), flags.reshape(counts.shape)

    def range_w(self) -> tuple[float, float]:
        """Smallest and largest power that carry no flag, W; CalibrationError where none does."""
        good = self.power_w[(self.flags == 0) & np.isfinite(self.power_w)]
        if not good.size:
            raise CalibrationError(
                "detector: no count lies within the range; correct bits and curve"
            )
        return float(good.min()), float(good.max())

    def to_bytes(self) -> bytes:
        """Exact image, little end first: FSCOUNT1, first count, n (i8), powers (f8), flags (i4)."""
        head = _HEAD.pack(_MAGIC, self.first_count, self.power_w.size)
        powers, flags = self.power_w.astype("<f8"), self.flags.astype("<i4")
        return b"".join((head, powers.tobytes(), flags.tobytes()))

    @classmethod
    def from_bytes(cls, body: bytes) -> CountTable:
        """The table that to_bytes wrote; CalibrationError where the image is damaged."""
        if len(body) < _HEAD.size:
            raise CalibrationError("count table: image cut short")
        magic, first_count, n = _HEAD.unpack_from(body)
        if magic != _MAGIC or n < 0 or len(body) != _HEAD.size + 12 * n:
            raise CalibrationError("count table: not an image of a count table, or damaged")
        power_w = np.frombuffer(body, "<f8", n, _HEAD.size).astype(np.float64)
        flags = np.frombuffer(body, "<i4", n, _HEAD.size + 8 * n).astype(np.int32)
        return cls(first_count, power_w, flags)

    @property
    def identity(self) -> str:
        """sha256 of the image, hex."""
        return hashlib.sha256(self.to_bytes()).hexdigest()


@dataclass(frozen=True, slots=True, eq=False)
class Chain:
    """All that turns the raw counts of a station into E squared, channel by channel.

    frequencies_hz, k: f8 (m,) per channel: E squared per watt at the port, V2/m2 per W, on a grid
    over the channel's band (ends, knots and points between). k_mid: f8 (c,), root of smallest times
    largest k; the spread over the band is among the contributions. flags: bits that hold for every
    figure. due_utc_ns: from here on the calibration is overdue. resolution: what one raw count
    stands for, where the front end rounds to it; None for converter counts. document: the
    calibration file as read; identity: its sha256, hex.

    bursty: bool (c,), the channel may carry pulses or time-divided signals that its readings can
    keep step with. noise_w: f8 (c,), power at the port that the detector shows without any signal,
    W, which is taken from averages; 0 where it is in the tables already. noise_u_w: f8 (c,), its
    standard uncertainty. least_w: f8 (c,), lower end of the range to be trusted, W. integration_s:
    time over which each reading is itself a mean of power; 0 for a momentary one. temperature: per
    channel (celsius (t,), dB (t,)) by how much the chain reads too high, or None.
    """

    tables: tuple[CountTable, ...]
    frequencies_hz: tuple[Real, ...]
    k: tuple[Real, ...]
    k_mid: Real
    contributions: tuple[tuple[Contribution, ...], ...]
    flags: int
    valid_temperature_c: tuple[float, float]
    due_utc_ns: int | None
    resolution: float | None
    identity: str
    document: bytes = field(repr=False)
    bursty: NDArray[np.bool_]
    noise_w: Real
    noise_u_w: Real
    least_w: Real
    integration_s: float = 0.0
    temperature: tuple[tuple[Real, Real] | None, ...] = ()


def temperature_db(table: tuple[Real, Real] | None, celsius: Real) -> Real:
    """By how much readings at celsius (n,) are too high, dB (n,): take it off, in dB of power.

    table: rising celsius (t,) and dB (t,), straight between rows, or None: nothing is known.
    Beyond the table its end holds; the reading carries OUT_OF_TEMPERATURE. nan celsius: 0 dB.
    """
    if table is None:
        return np.zeros_like(celsius, dtype=np.float64)
    return np.where(np.isnan(celsius), 0.0, np.interp(celsius, *table))


GRID_STEP = 1.005
"""Largest ratio of neighbouring frequencies of a grid over a band, up to MAX_GRID points."""
MAX_GRID = 4001


@dataclass(frozen=True, slots=True, eq=False)
class FrequencyTable:
    """dB over frequency: f8 (n,) each; frequencies strictly rising. Linear in dB over log f."""

    frequencies_hz: Real
    db: Real

    def __post_init__(self) -> None:
        """CalibrationError for fewer than two rows and for frequencies that do not rise."""
        if self.frequencies_hz.size < 2 or self.frequencies_hz.size != self.db.size:
            raise CalibrationError("needs at least two rows [frequency, dB]")
        falls = np.flatnonzero(np.diff(self.frequencies_hz) <= 0)
        if falls.size:
            f = float(self.frequencies_hz[falls[0] + 1])
            word = "twice" if f == self.frequencies_hz[falls[0]] else "out of order"
            raise CalibrationError(f"{frequency_text(f)} stands {word}; frequencies must rise")

    def at(self, frequencies_hz: Real) -> Real:
        """dB (m,) at frequencies (m,); CalibrationError outside the table: nothing extrapolated."""
        low, high = float(self.frequencies_hz[0]), float(self.frequencies_hz[-1])
        wanted = float(frequencies_hz.min()), float(frequencies_hz.max())
        if wanted[0] < low or wanted[1] > high:
            has, asked = (" to ".join(map(frequency_text, ends)) for ends in ((low, high), wanted))
            raise CalibrationError(
                f"covers {has}, but {asked} is measured; narrow the band or calibrate further"
            )
        return np.interp(np.log(frequencies_hz), np.log(self.frequencies_hz), self.db)


def band_grid(low_hz: float, high_hz: float, tables: Sequence[FrequencyTable]) -> Real:
    """Frequencies (m,) over a band: both ends, every knot of the tables, points between."""
    n = min(MAX_GRID, 2 + math.ceil(math.log(high_hz / low_hz) / math.log(GRID_STEP)))
    points = np.geomspace(low_hz, high_hz, n)
    points[0], points[-1] = low_hz, high_hz
    knots = np.concatenate([points[:0], *(table.frequencies_hz for table in tables)])
    inside = knots[(knots > low_hz) & (knots < high_hz)]
    return np.unique(np.concatenate([points, inside]))


def e2_per_w(
    frequencies_hz: Real, antenna: FrequencyTable, losses: Sequence[FrequencyTable]
) -> Real:
    """E squared per watt at the port (m,), V2/m2 per W: 50 ohm times antenna factor and losses.

    E = V * AF * sqrt(loss), V2 = 50 P; antenna factor in 20 log (1/m), losses in 10 log.
    """
    db = antenna.at(frequencies_hz)
    for loss in losses:
        db = db + loss.at(frequencies_hz)
    return np.asarray(PORT_OHM * 10.0 ** (db / 10.0))


BAND_KIND = "response over the band"
"""Kind of the budget line that spread() makes."""


def middle(k: Real) -> float:
    """Root of smallest times largest: the figure with the smallest worst error in dB."""
    return math.sqrt(float(k.min()) * float(k.max()))


def spread(k: Real, band: str) -> tuple[Contribution, ...]:
    """The budget line for a signal anywhere in the band: rectangular, half the range of k in dB.

    Shared by the axes of a band, which hear the same signals.
    """
    half_db = 5.0 * math.log10(float(k.max()) / float(k.min()))
    if half_db == 0.0:
        return ()
    return (
        Contribution(
            f"response over band {band}", half_db, "rectangular", shared=True, kind=BAND_KIND
        ),
    )
