"""From raw counts to power at the detector's port, and from power to E squared."""

from __future__ import annotations

import hashlib
import math
import struct
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import CalibrationError
from monitor.core.flags import Flag
from monitor.core.quantities import PORT_OHM, w_from_dbm
from monitor.core.uncertainty import Contribution

Real = NDArray[np.float64]
Bits = NDArray[np.int32]

MAX_TABLE = 2**18
"""Most entries that a count table may have: 18 bits of converter."""

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

    def __post_init__(self) -> None:
        """CalibrationError for an empty table, one that is too long, or unequal lengths."""
        n = self.power_w.size
        if not 0 < n <= MAX_TABLE or self.flags.size != n:
            raise CalibrationError(f"a count table has {n} entries; 1 to {MAX_TABLE} are possible")

    def convert(self, counts: NDArray[np.int32]) -> tuple[Real, Bits]:
        """Power in W (nan: no reading) and flags of raw counts; both of the shape of counts."""
        index = counts.astype(np.int64) - self.first_count
        inside = (index >= 0) & (index < self.power_w.size)
        index = np.where(inside, index, 0)
        power_w = np.where(inside, self.power_w[index], np.nan)
        flags = np.where(inside, self.flags[index], np.int32(Flag.NO_SIGNAL_WIRE))
        return power_w, flags.astype(np.int32)

    def to_bytes(self) -> bytes:
        """Exact image: magic FSCOUNT1, first count and n (i8), powers (f8), flags (i4), little end."""
        head = _HEAD.pack(_MAGIC, self.first_count, self.power_w.size)
        return head + self.power_w.astype("<f8").tobytes() + self.flags.astype("<i4").tobytes()

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
    figure. document: the calibration file as read; identity: its sha256, hex.
    """

    tables: tuple[CountTable, ...]
    frequencies_hz: tuple[Real, ...]
    k: tuple[Real, ...]
    k_mid: Real
    contributions: tuple[tuple[Contribution, ...], ...]
    flags: int
    valid_temperature_c: tuple[float, float]
    due_utc_ns: int | None
    identity: str
    document: bytes = field(repr=False)
