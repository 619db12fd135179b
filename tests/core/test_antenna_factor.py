"""Antenna factor from gain against published examples, each with its source."""

from __future__ import annotations

import math

import numpy as np
import pytest

from monitor.core.quantities import antenna_factor_db_per_m


def at(gain_dbi: float, frequency_hz: float, **more: float) -> float:
    """One figure."""
    return float(antenna_factor_db_per_m(np.array([gain_dbi]), np.array([frequency_hz]), **more)[0])


@pytest.mark.parametrize(
    ("gain_dbi", "f_mhz", "db_per_m", "tolerance"),
    [
        (15.0, 5625.0, 30.2, 0.05),  # NTIA TM-10-469 conversion sheet, eq. 13, as printed
        (8.0, 915.0, 21.5, 0.06),  # a published antenna-factor page, printed loosely
    ],
)
def test_factor_from_gain(gain_dbi: float, f_mhz: float, db_per_m: float, tolerance: float) -> None:
    assert at(gain_dbi, f_mhz * 1e6) == pytest.approx(db_per_m, abs=tolerance)


def test_gain_from_factor() -> None:
    """NTIA TM-10-469 conversion sheet, eq. 14, as printed: 30.2 dB/m at 5625 MHz is 15.0 dBi."""
    assert at(30.2, 5625e6) == pytest.approx(15.0, abs=0.05)


def test_factor_at_another_load() -> None:
    """pycraf 2.1.0, test_antfactor_from_gain: 38 dBi, 1 GHz, 10 ohm; compared as linear 1/m."""
    assert 10 ** (at(38.0, 1e9, load_ohm=10.0) / 20) == pytest.approx(0.9136917, abs=1e-4)


def test_customary_constant_is_within_its_rounding() -> None:
    """20 log f(MHz) - G - 29.79 is customary (NTIA TM-10-469); exact constants give 29.77."""
    exact = 20 * math.log10(1000.0) - at(0.0, 1e9)
    assert exact == pytest.approx(29.77, abs=0.005)
    assert exact == pytest.approx(29.79, abs=0.05)


def test_customary_form() -> None:
    """9.73 / (lambda sqrt G), common practice, good to its three digits."""
    wavelength_m = 299_792_458.0 / 2.4e9
    customary = 20 * math.log10(9.73 / (wavelength_m * math.sqrt(10 ** (6.0 / 10))))
    assert at(6.0, 2.4e9) == pytest.approx(customary, abs=0.005)
