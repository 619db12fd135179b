"""What one figure of a detector means: power at its port, and the count table made of the same.

A law is for one band and one gain step. What it says of a single figure is what its table says,
unrounded: a figure weaker than range_dbm is kept, for only an average may be found too weak.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from monitor.core import detector as det
from monitor.core import probe
from monitor.core.calibration import Bits, CountTable
from monitor.core.curves import Blend
from monitor.core.distributions import Real
from monitor.core.flags import Flag
from monitor.core.quantities import dbm_from_w

Said = tuple[float, int]
"""Power in dBm (nan: no reading) and flags."""


@dataclass(frozen=True, slots=True, eq=False)
class CurveLaw:
    """Volts by a curve, or by the middle of several. No reading outside valid_v."""

    curve: Blend
    converter: det.Converter
    valid_v: tuple[float, float]
    range_dbm: tuple[float, float]

    @property
    def volts_per_count(self) -> float:
        """Volts at the detector."""
        return self.converter.volts_per_count

    def table(self) -> CountTable:
        """Power of every count; CalibrationError where there is none, or too many."""
        return det.curve_table(self.curve, self.converter, self.valid_v, self.range_dbm)

    def half_step_db(self) -> float:
        """Half a count in dB where the curve is flattest within the range."""
        return det.half_step_db(self.curve.dbm_at(self._volts()), self.range_dbm)

    def half_spread_db(self) -> float:
        """How far a signal of the band may be off the middle within the range, dB."""
        low, high = self.curve.ends_v
        knots = [c.volts for pair in self.curve.pairs for c in pair[:2]]
        volts = np.clip(np.concatenate([self._volts(), *knots]), low, high)
        dbm = self.curve.dbm_at(volts)
        inside = (dbm >= self.range_dbm[0]) & (dbm <= self.range_dbm[1])
        return float(self.curve.half_spread_db(volts[inside]).max(initial=0.0))

    def _volts(self) -> Real:
        """The volts of every count on the curve."""
        volts, (low, high) = det.volts_of(self.converter), self.curve.ends_v
        return np.asarray(volts[(volts >= low) & (volts <= high)])

    def at_volts(self, volts: float) -> Said:
        """Of a voltage at the detector."""
        at = np.array([volts])
        return _said(*det.levels_at(self.curve, at, self.valid_v, self.range_dbm))

    def at_dbm(self, dbm: float) -> Said:
        """Of a power at the port; beyond what the curve shows its end, flagged."""
        ends = self.curve.dbm_at(np.array(self.curve.ends_v))
        return _within(dbm, (float(ends.min()), self.range_dbm[1]))


@dataclass(frozen=True, slots=True)
class ScaleLaw:
    """Figures that are dBm or dBFS already; offset_db: what 0 of them is at the port, dBm."""

    quantity: str
    resolution: float
    offset_db: float
    valid_dbm: tuple[float, float]
    range_dbm: tuple[float, float]

    def table(self) -> CountTable:
        """Power of every count; CalibrationError where there are too many."""
        return det.scale_table(self.resolution, self.offset_db, self.valid_dbm, self.range_dbm)

    def half_step_db(self) -> float:
        """Half a count, dB."""
        return self.resolution / 2.0

    def at_dbm(self, dbm: float) -> Said:
        """Of a power at the port; no reading outside valid_dbm."""
        if dbm < self.valid_dbm[0]:
            return math.nan, int(Flag.NO_SIGNAL_WIRE)
        if dbm > self.valid_dbm[1]:
            return math.nan, int(Flag.NO_SIGNAL_WIRE | Flag.ABOVE_RANGE)
        return _within(dbm, (-math.inf, self.range_dbm[1]))


@dataclass(frozen=True, slots=True, eq=False)
class ProbeLaw:
    """Figures of a probe calibrated as a whole; see monitor.core.probe for what its port is."""

    quantity: str
    resolution: float
    linearity: probe.Linearity
    valid_v_per_m: tuple[float, float]
    range_v_per_m: tuple[float, float]

    @property
    def range_dbm(self) -> tuple[float, float]:
        """The range to be trusted, as power at the port."""
        low, high = self.range_v_per_m
        return probe.port_dbm(low), probe.port_dbm(high)

    def table(self) -> CountTable:
        """Power of every count; CalibrationError where there are too many."""
        return probe.probe_table(
            self.quantity, self.resolution, self.linearity, self.valid_v_per_m, self.range_v_per_m
        )

    def half_step_db(self) -> float:
        """Half a count in dB where it is worth most within the range."""
        table = self.table()
        known = table.power_w[(table.flags == 0) & (table.power_w > 0)]
        return det.half_step_db(10.0 * np.log10(known / 1e-3), self.range_dbm)

    def at_v_per_m(self, indicated: float) -> Said:
        """Of an indicated field strength."""
        at = np.array([indicated])
        return _said(
            *probe.probe_levels(at, self.linearity, self.valid_v_per_m, self.range_v_per_m)
        )

    def at_dbm(self, dbm: float) -> Said:
        """Of a power at the port, that is of a true field strength."""
        return _within(dbm, (probe.port_dbm(float(self.linearity.true[0])), self.range_dbm[1]))


Law = CurveLaw | ScaleLaw | ProbeLaw


def _said(power_w: Real, flags: Bits) -> Said:
    p_w = float(power_w[0])
    return (math.nan if math.isnan(p_w) else dbm_from_w(p_w)), int(flags[0])


def _within(dbm: float, known_dbm: tuple[float, float]) -> Said:
    low, high = known_dbm
    flags = Flag.BELOW_RANGE if dbm < low else Flag.ABOVE_RANGE if dbm > high else Flag(0)
    return min(max(dbm, low), high), int(flags)
