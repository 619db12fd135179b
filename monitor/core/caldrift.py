"""Drift between two calibrations: what it adds to the uncertainty of the data in between."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from monitor.core.budget import Contribution
from monitor.core.calibration import FrequencyTable, band_grid
from monitor.core.distributions import Real

NAME = "drift between calibrations"
KIND = "drift"


def largest_db(
    curves: Sequence[FrequencyTable], constants_db: Sequence[float], low_hz: float, high_hz: float
) -> float:
    """The largest size, dB, over a band of the sum of drifts, over frequency and alike anywhere.

    CalibrationError where a curve does not cover the band: nothing is extrapolated.
    """
    grid = band_grid(low_hz, high_hz, curves)
    total = np.full(grid.size, math.fsum(constants_db))
    for curve in curves:
        total = total + curve.at(grid)
    return float(np.abs(total).max())


def drift_line(drift_db: float) -> Contribution:
    """The budget line of a drift: when between the two calibrations it came is not known.

    Rectangular, half width = its size (JCGM 100:2008, 4.3.7); one error, the same on every axis
    (our choice, and the cautious one).
    """
    return Contribution(NAME, abs(drift_db), "rectangular", shared=True, kind=KIND)


def widened_db(u_db: Real, k: Real, drift_db: Real) -> Real:
    """Expanded uncertainties (n,), dB, with the drift as one more line at the same k.

    u_db: (n,), expanded with k (n,). drift_db: (n,), 0 leaves u_db to the bit.
    """
    with np.errstate(invalid="ignore"):
        wider = np.hypot(u_db, k * drift_db / math.sqrt(3.0))
    return np.where(drift_db == 0.0, u_db, wider)
