"""Drift between two calibrations: its line in a budget, and what it does to a stated U."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.core.budget import combined
from monitor.core.caldrift import drift_line, largest_db, widened_db
from monitor.core.calibration import FrequencyTable
from monitor.core.errors import CalibrationError


def curve(*rows: tuple[float, float]) -> FrequencyTable:
    return FrequencyTable(np.array([r[0] for r in rows]), np.array([r[1] for r in rows]))


def test_the_line_is_rectangular_with_the_drift_as_its_half_width() -> None:
    line = drift_line(-0.6)
    assert (line.value, line.distribution, line.kind) == (0.6, "rectangular", "drift")
    assert line.u == pytest.approx(0.6 / math.sqrt(3), rel=1e-12)  # JCGM 100:2008, 4.3.7
    assert line.shared


def test_the_largest_drift_over_a_band_is_that_of_the_sum() -> None:
    cable, antenna = curve((1e9, 0.4), (2e9, 0.1)), curve((1e9, -0.1), (1.5e9, 0.5), (2e9, 0.0))
    assert largest_db([cable], [], 1e9, 2e9) == pytest.approx(0.4)
    share = math.log(1.5) / math.log(2)
    assert largest_db([cable, antenna], [], 1e9, 2e9) == pytest.approx(0.4 - 0.3 * share + 0.5)
    assert largest_db([cable], [-0.9], 1e9, 2e9) == pytest.approx(0.8)
    assert largest_db([], [0.2, -0.5], 1e9, 2e9) == pytest.approx(0.3)
    with pytest.raises(CalibrationError, match="covers 1 GHz to 2 GHz, but 900 MHz to 2 GHz"):
        largest_db([cable], [], 0.9e9, 2e9)


def test_a_stated_uncertainty_is_widened_as_a_budget_with_the_line_would_be() -> None:
    """1.5 dB at k = 2 and a drift of 0.9 dB: sqrt(0.5625 + 0.81 / 3) = 0.912414; U 1.824829."""
    found = widened_db(np.array([1.5, np.nan]), np.array([2.0, 2.0]), np.array([0.9, 0.9]))
    assert found[0] == pytest.approx(1.824829, abs=1e-6)
    assert np.isnan(found[1])
    u = combined([[drift_line(0.9)]], np.ones(1)).u
    assert found[0] / 2 == pytest.approx(math.hypot(0.75, u), rel=1e-12)


@given(st.floats(0, 6), st.floats(1.5, 3), st.floats(-3, 3))
def test_a_drift_never_makes_it_smaller_and_none_leaves_it(
    u: float, k: float, drift: float
) -> None:
    at = np.array([u]), np.array([k])
    assert widened_db(*at, np.array([drift]))[0] >= u
    assert widened_db(*at, np.zeros(1))[0] == u
