"""Count tables of detectors: from the curve that a laboratory measured, or from a plain scale."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.budget import Contribution
from monitor.core.calibration import MAX_TABLE, Bits, CountTable
from monitor.core.distributions import Real
from monitor.core.errors import CalibrationError
from monitor.core.flags import Flag
from monitor.core.quantities import w_from_dbm

NOTABLE_DB = 0.01
"""A rounding step whose half is larger than this enters the uncertainty budget."""
BEYOND_DB = 20.0
"""How far above a scale's valid levels a figure is still known as one that was too strong."""


@dataclass(frozen=True, slots=True, eq=False)
class Curve:
    """Detector voltage against power: both f8 (n,), strictly monotonic; voltage of either slope.

    linear_in: 'dbm' (log detector: volts follow dBm) or 'amplitude' (rms detector: volts follow the
    root of power); the curve is a straight line between points in that figure.
    """

    dbm: Real
    volts: Real
    linear_in: str

    def __post_init__(self) -> None:
        """CalibrationError where the curve cannot be inverted."""
        if self.dbm.size < 2 or self.dbm.size != self.volts.size:
            raise CalibrationError("needs at least two points [dBm, volts]")
        for values, word in ((self.dbm, "dBm"), (self.volts, "volts")):
            steps = np.diff(values) * np.sign(values[-1] - values[0])
            if not np.all(steps > 0):
                wrong = int(np.flatnonzero(steps <= 0)[0])
                raise CalibrationError(
                    f"not monotonic: {word} {values[wrong]:g} then {values[wrong + 1]:g} at points "
                    f"{wrong + 1} and {wrong + 2}; a voltage must belong to one power"
                )

    @property
    def rising(self) -> bool:
        """Whether more power gives more volts."""
        return bool((self.volts[-1] > self.volts[0]) == (self.dbm[-1] > self.dbm[0]))

    def dbm_at(self, volts: Real) -> Real:
        """Power (n,), dBm, at volts (n,); the end of the curve beyond its ends."""
        order = np.argsort(self.volts)
        knots, dbm = self.volts[order], self.dbm[order]
        if self.linear_in == "dbm":
            return np.interp(volts, knots, dbm)
        return 20.0 * np.log10(np.interp(volts, knots, 10.0 ** (dbm / 20.0)))

    def volts_at(self, dbm: float) -> float:
        """Volts at a power within the curve, dBm."""
        order = np.argsort(self.dbm)
        knots, volts = self.dbm[order], self.volts[order]
        if self.linear_in == "dbm":
            return float(np.interp(dbm, knots, volts))
        return float(np.interp(10.0 ** (dbm / 20.0), 10.0 ** (knots / 20.0), volts))


@dataclass(frozen=True, slots=True)
class Converter:
    """Counts first to last, volts_per_count each at the detector; rails: first and last are."""

    volts_per_count: float
    first: int
    last: int
    rails: bool


def stepped(step_v: float, valid_v: tuple[float, float]) -> Converter:
    """Volts that were rounded to steps of step_v: the valid ones and as many again at either end.

    A voltage beyond the valid ones on the curve's strong side must be known as such.
    """
    first, last = math.ceil(valid_v[0] / step_v), math.floor(valid_v[1] / step_v)
    valid = last - first + 1
    more = max(min(valid, (MAX_TABLE - valid) // 2), 0)
    return Converter(step_v, first - more, last + more, rails=False)


def curve_table(
    curve: Curve,
    converter: Converter,
    valid_v: tuple[float, float],
    range_dbm: tuple[float, float],
) -> CountTable:
    """Counts to volts to power. Outside valid_v a count is no reading: an open wire has a voltage.

    Outside it on the strong side an overload looks the same: no reading, but flagged as above
    range too, for such a gap must not pass as quiet. Inside it but beyond range_dbm (within the
    curve): the end of the range, flagged. A count at the converter's rail on the strong side is
    flagged as clipped, on the weak side as below range.
    """
    volts = _volts(converter.first, converter.last, converter)
    power_w, flags, invalid, overload = _levels(curve, volts, valid_v, range_dbm)
    if converter.rails:
        top = -1 if curve.rising else 0
        flags[-1 - top] |= np.int32(Flag.BELOW_RANGE)
        flags[top] |= np.int32(Flag.CLIPPED)
    if invalid.all():
        raise CalibrationError("no count of the converter is within the valid voltages")
    return CountTable(converter.first, *_without(power_w, flags, invalid, overload))


def levels_at(
    curve: Curve, volts: Real, valid_v: tuple[float, float], range_dbm: tuple[float, float]
) -> tuple[Real, Bits]:
    """Power (n,), W, nan where there is no reading, and flags (n,) at volts, as in curve_table."""
    return _without(*_levels(curve, volts, valid_v, range_dbm))


def _levels(
    curve: Curve, volts: Real, valid_v: tuple[float, float], range_dbm: tuple[float, float]
) -> tuple[Real, Bits, NDArray[np.bool_], NDArray[np.bool_]]:
    """Power in W, range flags, where no reading is, and where an overload looks the same."""
    dbm = curve.dbm_at(volts)
    low, high = (volts < curve.volts.min(), volts > curve.volts.max())
    under, over = (volts < valid_v[0], volts > valid_v[1])
    weak, strong, overload = (low, high, over) if curve.rising else (high, low, under)
    flags = _range_flags(weak | (dbm < range_dbm[0]), strong | (dbm > range_dbm[1]))
    return w_from_dbm(np.clip(dbm, *range_dbm)), flags, under | over, overload


def scale_table(
    resolution: float,
    offset_db: float,
    valid_dbm: tuple[float, float],
    range_dbm: tuple[float, float],
) -> CountTable:
    """Counts times resolution, plus offset_db, is power in dBm; no reading outside valid_dbm.

    Inside it but beyond range_dbm: the end of the range, flagged. Up to BEYOND_DB above valid_dbm:
    no reading, flagged as above range.
    """
    first = math.ceil(round((valid_dbm[0] - offset_db) / resolution, 6))
    last = math.floor(round((valid_dbm[1] - offset_db) / resolution, 6))
    valid = _size(first, last)
    more = min(math.ceil(BEYOND_DB / resolution), MAX_TABLE - valid)
    counts = np.arange(valid + more) + first
    dbm = counts * resolution + offset_db
    # A little grace: a range of -90 dBm must hold the count that stands for -90 dBm.
    grace = 1e-6 * resolution
    flags = _range_flags(dbm < range_dbm[0] - grace, dbm > range_dbm[1] + grace)
    too_strong = counts > last
    power_w = w_from_dbm(np.clip(dbm, *range_dbm))
    return CountTable(first, *_without(power_w, flags, too_strong, too_strong))


def rounding(half_step_db: float) -> tuple[Contribution, ...]:
    """The budget line of a rounding step, where it is notable; none else."""
    if half_step_db < NOTABLE_DB:
        return ()
    return (Contribution("converter resolution", half_step_db, "rectangular", kind="detector"),)


def half_step_db(curve: Curve, converter: Converter, range_dbm: tuple[float, float]) -> float:
    """Half a count in dB where the curve is flattest within the range: the worst case."""
    ends = sorted(curve.volts_at(dbm) for dbm in range_dbm)
    first = max(converter.first, math.ceil(ends[0] / converter.volts_per_count))
    last = min(converter.last, math.floor(ends[1] / converter.volts_per_count))
    dbm = curve.dbm_at(_volts(first, last, converter))
    return float(np.abs(np.diff(dbm)).max()) / 2.0


def _volts(first: int, last: int, converter: Converter) -> Real:
    counts = np.arange(_size(first, last), dtype=np.float64) + first
    return np.asarray(counts * converter.volts_per_count)


def _size(first: int, last: int) -> int:
    n = last - first + 1
    if not 1 < n <= MAX_TABLE:
        raise CalibrationError(
            f"{n} counts within the range; 2 to {MAX_TABLE} (18 bits) are possible; check the step"
        )
    return n


def _range_flags(below: NDArray[np.bool_], above: NDArray[np.bool_]) -> Bits:
    flags = np.where(below, np.int32(Flag.BELOW_RANGE), np.int32(0))
    return np.asarray(flags | np.where(above, np.int32(Flag.ABOVE_RANGE), np.int32(0)), np.int32)


def _without(
    power_w: Real, flags: Bits, invalid: NDArray[np.bool_], overload: NDArray[np.bool_]
) -> tuple[Real, Bits]:
    """Powers and flags with the invalid readings struck out.

    overload: those among them that an overload gives as well as an open wire.
    """
    struck = np.where(overload, flags & int(Flag.CLIPPED) | int(Flag.ABOVE_RANGE), 0)
    struck |= int(Flag.NO_SIGNAL_WIRE)
    bits = np.where(invalid, struck, flags).astype(np.int32)
    return np.where(invalid, np.nan, power_w), bits
