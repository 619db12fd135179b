"""What one figure of a detector means: power at its port, by the law that its table rests on."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from monitor.core.detector import Curve, levels_at
from monitor.core.flags import Flag
from monitor.core.quantities import dbm_from_w


@dataclass(frozen=True, slots=True, eq=False)
class CurveLaw:
    """Volts by a curve. volts_per_count at the detector; no reading outside valid_v."""

    curve: Curve
    volts_per_count: float
    valid_v: tuple[float, float]
    range_dbm: tuple[float, float]

    def at_volts(self, volts: float) -> tuple[float, int]:
        """Power in dBm (nan: no reading) and flags, as the count table has them, unrounded."""
        power_w, flags = levels_at(self.curve, np.array([volts]), self.valid_v, self.range_dbm)
        p_w = float(power_w[0])
        return (math.nan if math.isnan(p_w) else dbm_from_w(p_w)), int(flags[0])

    def at_dbm(self, dbm: float) -> tuple[float, int]:
        """A power at the port; beyond the range its end, flagged, for no reading would say more."""
        return _within(dbm, self.range_dbm)


@dataclass(frozen=True, slots=True)
class ScaleLaw:
    """Figures that are dBm or dBFS already; offset_db: what 0 of them is at the port, dBm."""

    quantity: str
    offset_db: float
    valid_dbm: tuple[float, float]
    range_dbm: tuple[float, float]

    def at_dbm(self, dbm: float) -> tuple[float, int]:
        """Power in dBm (nan: no reading) and flags, as the count table has them, unrounded."""
        if dbm < self.valid_dbm[0]:
            return math.nan, int(Flag.NO_SIGNAL_WIRE)
        if dbm > self.valid_dbm[1]:
            return math.nan, int(Flag.NO_SIGNAL_WIRE | Flag.ABOVE_RANGE)
        return _within(dbm, self.range_dbm)


Law = CurveLaw | ScaleLaw


def _within(dbm: float, range_dbm: tuple[float, float]) -> tuple[float, int]:
    low, high = range_dbm
    flags = Flag.BELOW_RANGE if dbm < low else Flag.ABOVE_RANGE if dbm > high else Flag(0)
    return min(max(dbm, low), high), int(flags)
