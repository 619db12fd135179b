"""A probe calibrated as a whole: the field strength it indicates, and the true one.

Its figures are taken as power at a port of 50 ohm behind an antenna factor of 0 dB/m: E squared
over 50 ohm. So blocks, windows and records need no second kind of figure.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from monitor.core import detector as det
from monitor.core.calibration import Bits, CountTable
from monitor.core.distributions import Real
from monitor.core.errors import CalibrationError
from monitor.core.quantities import PORT_OHM, Z0_OHM, dbm_from_w

QUANTITIES = ("v_per_m", "v2_per_m2", "w_per_m2", "dbv_per_m")
GRACE = 1e-9
"""Relative: rounding of the last digit must not put an end outside itself."""


def e_of(quantity: str, figures: Real) -> Real:
    """Field strength (n,), V/m, of figures (n,) in one of QUANTITIES; nan where below zero."""
    if quantity == "dbv_per_m":
        return np.asarray(10.0 ** (figures / 20.0))
    if quantity == "v_per_m":
        return np.where(figures < 0.0, np.nan, figures)
    scale = Z0_OHM if quantity == "w_per_m2" else 1.0
    return np.sqrt(np.where(figures < 0.0, np.nan, figures) * scale)


def figure_of(quantity: str, e_v_per_m: float) -> float:
    """The figure in one of QUANTITIES of a field strength, V/m."""
    if quantity == "dbv_per_m":
        return 20.0 * math.log10(e_v_per_m)
    if quantity == "v_per_m":
        return e_v_per_m
    return e_v_per_m**2 / (Z0_OHM if quantity == "w_per_m2" else 1.0)


def port_dbm(e_v_per_m: float) -> float:
    """The power, dBm, that stands for a positive field strength, V/m."""
    return dbm_from_w(e_v_per_m**2 / PORT_OHM)


@dataclass(frozen=True, slots=True, eq=False)
class Linearity:
    """Indicated and true field strength, V/m, f8 (n,) each, both rising; in dB a straight line
    between points."""

    indicated: Real
    true: Real

    def __post_init__(self) -> None:
        """CalibrationError unless both are positive and rise."""
        if self.indicated.size < 2 or self.indicated.size != self.true.size:
            raise CalibrationError("needs at least two points [indicated, true]")
        for values, word in ((self.indicated, "indicated"), (self.true, "true")):
            falls = np.flatnonzero(np.diff(values, prepend=0.0) <= 0)
            if falls.size:
                raise CalibrationError(
                    f"{word} {values[falls[0]]:g} V/m at point {falls[0] + 1}; must be positive and"
                    " rise from point to point"
                )

    def true_at(self, indicated: Real) -> Real:
        """True field strength (n,), V/m, of indicated (n,); that of the end beyond the ends."""
        inside = np.log(np.clip(indicated, self.indicated[0], self.indicated[-1]))
        return np.exp(np.interp(inside, np.log(self.indicated), np.log(self.true)))


def probe_table(
    quantity: str,
    resolution: float,
    linearity: Linearity,
    valid_v_per_m: tuple[float, float],
    range_v_per_m: tuple[float, float],
) -> CountTable:
    """Counts times resolution to true field strength, as power at the port.

    No reading where the figure is below zero or outside valid_v_per_m (indicated). Below the first
    point of the linearity: that point, flagged; above range_v_per_m (true): its end, flagged.
    """
    lowest = max(valid_v_per_m[0], linearity.indicated[0] * 1e-2)
    low = figure_of(quantity, lowest) if quantity == "dbv_per_m" else 0.0
    first = math.ceil(round(low / resolution, 6))
    last = math.floor(round(figure_of(quantity, valid_v_per_m[1]) / resolution, 6))
    # One more than is valid: so a figure beyond the table is known as too strong.
    counts = np.arange(det.table_size(first, last + 1), dtype=np.float64) + first
    return CountTable(
        first,
        *probe_levels(e_of(quantity, counts * resolution), linearity, valid_v_per_m, range_v_per_m),
    )


def probe_levels(
    indicated: Real,
    linearity: Linearity,
    valid_v_per_m: tuple[float, float],
    range_v_per_m: tuple[float, float],
) -> tuple[Real, Bits]:
    """Power (n,), W, nan where there is no reading, and flags (n,) at indicated V/m (n,)."""
    e = linearity.true_at(indicated)
    weak = indicated < linearity.indicated[0] * (1.0 - GRACE)
    strong = (e > range_v_per_m[1] * (1.0 + GRACE)) | (
        indicated > linearity.indicated[-1] * (1.0 + GRACE)
    )
    too_strong = indicated > valid_v_per_m[1] * (1.0 + GRACE)
    invalid = too_strong | np.isnan(indicated) | (indicated < valid_v_per_m[0] * (1.0 - GRACE))
    power_w = np.minimum(e, range_v_per_m[1]) ** 2 / PORT_OHM
    return det.without(power_w, det.range_flags(weak, strong), invalid, too_strong)
