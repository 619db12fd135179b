"""Count tables of detectors: from the curve that a laboratory measured, or from a plain scale."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.budget import Contribution
from monitor.core.calibration import MAX_TABLE, Bits, CountTable
from monitor.core.curves import Inverse
from monitor.core.distributions import Real
from monitor.core.errors import CalibrationError
from monitor.core.flags import Flag
from monitor.core.quantities import w_from_dbm

NOTABLE_DB = 0.01
"""A rounding step whose half is larger than this enters the uncertainty budget."""
BEYOND_DB = 20.0
"""How far above a scale's valid levels a figure is still known as one that was too strong."""
GRACE_DB = 1e-9
"""Rounding of the last digit must not put a count at the end of the range outside it."""


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
    curve: Inverse,
    converter: Converter,
    valid_v: tuple[float, float],
    range_dbm: tuple[float, float],
) -> CountTable:
    """Counts to volts to power. Outside valid_v a count is no reading: an open wire has a voltage.

    Outside it on the strong side an overload looks the same: no reading, but flagged as above
    range too, for such a gap must not pass as quiet. Inside it but above range_dbm: the end of the
    range, flagged. Below range_dbm: what the curve says, without a flag, for only an average may be
    found too weak; weaker than the curve's end: that end, flagged. A count at the converter's rail
    on the strong side is flagged as clipped, on the weak side as below range.
    """
    volts = volts_of(converter)
    power_w, flags, invalid, overload = _levels(curve, volts, valid_v, range_dbm)
    if converter.rails:
        top = -1 if curve.rising else 0
        flags[-1 - top] |= np.int32(Flag.BELOW_RANGE)
        flags[top] |= np.int32(Flag.CLIPPED)
    if invalid.all():
        raise CalibrationError("no count of the converter is within the valid voltages")
    return CountTable(converter.first, *without(power_w, flags, invalid, overload))


def levels_at(
    curve: Inverse, volts: Real, valid_v: tuple[float, float], range_dbm: tuple[float, float]
) -> tuple[Real, Bits]:
    """Power (n,), W, nan where there is no reading, and flags (n,) at volts, as in curve_table."""
    return without(*_levels(curve, volts, valid_v, range_dbm))


def _levels(
    curve: Inverse, volts: Real, valid_v: tuple[float, float], range_dbm: tuple[float, float]
) -> tuple[Real, Bits, NDArray[np.bool_], NDArray[np.bool_]]:
    """Power in W, range flags, where no reading is, and where an overload looks the same."""
    dbm = curve.dbm_at(volts)
    low, high = (volts < curve.ends_v[0], volts > curve.ends_v[1])
    under, over = (volts < valid_v[0], volts > valid_v[1])
    weak, strong, overload = (low, high, over) if curve.rising else (high, low, under)
    flags = range_flags(weak, strong | (dbm > range_dbm[1]))
    return w_from_dbm(np.minimum(dbm, range_dbm[1])), flags, under | over, overload


def scale_table(
    resolution: float,
    offset_db: float,
    valid_dbm: tuple[float, float],
    range_dbm: tuple[float, float],
) -> CountTable:
    """Counts times resolution, plus offset_db, is power in dBm; no reading outside valid_dbm.

    Inside it but above range_dbm: the end of the range, flagged; below range_dbm: as it is. Up to
    BEYOND_DB above valid_dbm: no reading, flagged as above range.
    """
    first = math.ceil(round((valid_dbm[0] - offset_db) / resolution, 6))
    last = math.floor(round((valid_dbm[1] - offset_db) / resolution, 6))
    valid = table_size(first, last)
    more = min(math.ceil(BEYOND_DB / resolution), MAX_TABLE - valid)
    counts = np.arange(valid + more) + first
    dbm = counts * resolution + offset_db
    # A little grace: a range to -15 dBm must hold the count that stands for -15 dBm.
    above = dbm > range_dbm[1] + 1e-6 * resolution
    flags = range_flags(np.zeros_like(above), above)
    too_strong = counts > last
    power_w = w_from_dbm(np.minimum(dbm, range_dbm[1]))
    return CountTable(first, *without(power_w, flags, too_strong, too_strong))


def rounding(half_step_db: float) -> tuple[Contribution, ...]:
    """The budget line of a rounding step, where it is notable; none else."""
    if half_step_db < NOTABLE_DB:
        return ()
    return (Contribution("converter resolution", half_step_db, "rectangular", kind="detector"),)


def half_step_db(dbm: Real, range_dbm: tuple[float, float]) -> float:
    """Half the largest step between neighbouring counts within the range, dB: the worst case.

    dbm: of all counts (n,), in their order. CalibrationError where fewer than two are within.
    """
    low, high = range_dbm
    inside = dbm[(dbm >= low - GRACE_DB) & (dbm <= high + GRACE_DB)]
    table_size(0, inside.size - 1)
    return float(np.abs(np.diff(inside)).max()) / 2.0


def volts_of(converter: Converter) -> Real:
    """Volts at the detector (n,) of all counts of a converter."""
    first, last = converter.first, converter.last
    counts = np.arange(table_size(first, last), dtype=np.float64) + first
    return np.asarray(counts * converter.volts_per_count)


def table_size(first: int, last: int) -> int:
    """Counts from first to last; CalibrationError where a table cannot hold that many."""
    n = last - first + 1
    if not 1 < n <= MAX_TABLE:
        raise CalibrationError(
            f"{n} counts within the range; 2 to {MAX_TABLE} (18 bits) are possible; check the step"
        )
    return n


def range_flags(below: NDArray[np.bool_], above: NDArray[np.bool_]) -> Bits:
    """Flags (n,) of figures beyond the ends of what is known."""
    flags = np.where(below, np.int32(Flag.BELOW_RANGE), np.int32(0))
    return np.asarray(flags | np.where(above, np.int32(Flag.ABOVE_RANGE), np.int32(0)), np.int32)


def without(
    power_w: Real, flags: Bits, invalid: NDArray[np.bool_], overload: NDArray[np.bool_]
) -> tuple[Real, Bits]:
    """Powers and flags with the invalid readings struck out.

    overload: those among them that an overload gives as well as an open wire.
    """
    struck = np.where(overload, flags & int(Flag.CLIPPED) | int(Flag.ABOVE_RANGE), 0)
    struck |= int(Flag.NO_SIGNAL_WIRE)
    bits = np.where(invalid, struck, flags).astype(np.int32)
    return np.where(invalid, np.nan, power_w), bits
