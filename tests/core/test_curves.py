"""Curves of a detector at several frequencies: between them, over a band, there and back."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.interpolate import RegularGridInterpolator

from monitor.core.curves import Curve, Curves
from monitor.core.errors import CalibrationError

VOLTS = np.linspace(0.4, 1.8, 15)
AT_HZ = np.array([1e8, 9e8, 3e9])


def bent(intercept_dbm: float, mv_per_db: float, slope: int = 1) -> Curve:
    """A log detector that is not quite straight, on VOLTS."""
    dbm = intercept_dbm + slope * (VOLTS - 0.4) * 1e3 / mv_per_db
    return Curve(dbm + 0.4 * np.sin(5 * VOLTS), VOLTS, "dbm")


def three(slope: int = 1) -> Curves:
    ends = [(-60.0, 25.0), (-58.5, 24.0), (-55.0, 22.5)]
    return Curves(AT_HZ, tuple(bent(-slope * 30 + 30 + i, s, slope) for i, s in ends))


def test_waveform_error_in_volts() -> None:
    """AD8313 data sheet, p. 19: 3.55 dB at 18 mV/dB (slope from memory) are 64 mV."""
    curve = Curve(np.array([-60.0, 0.0]), np.array([0.5, 0.5 + 60 * 0.018]), "dbm")
    assert 1e3 * (curve.volts_at(-20.0) - curve.volts_at(-23.55)) == pytest.approx(64.0, abs=0.5)


@pytest.mark.parametrize("slope", [1, -1])
def test_between_frequencies_as_scipy_has_it(slope: int) -> None:
    """RegularGridInterpolator, linear over (log f, volts), is the reference; 1e-9 dB."""
    curves = three(slope)
    dbm = np.array([curve.dbm for curve in curves.curves])
    reference = RegularGridInterpolator((np.log(AT_HZ), VOLTS), dbm)
    volts = np.linspace(0.4, 1.8, 301)
    for hz in (1e8, 1.7e8, 8.99e8, 9e8, 2e9, 3e9):
        wanted = reference(np.stack([np.full(volts.size, math.log(hz)), volts], axis=1))
        got = curves.over(hz, hz)
        np.testing.assert_allclose(got.dbm_at(volts), wanted, atol=1e-9)
        assert got.half_spread_db(volts).max() == 0.0


@pytest.mark.parametrize("slope", [1, -1])
def test_over_a_band_it_is_the_middle_of_all_frequencies(slope: int) -> None:
    """Against the smallest and largest of 2000 frequencies, one by one."""
    curves, volts = three(slope), np.linspace(0.45, 1.75, 40)
    every = np.array([curves.over(f, f).dbm_at(volts) for f in np.geomspace(2e8, 2e9, 2000)])
    band = curves.over(2e8, 2e9)
    low, high = every.min(axis=0), every.max(axis=0)
    np.testing.assert_allclose(band.dbm_at(volts), (low + high) / 2, atol=2e-3)
    np.testing.assert_allclose(band.half_spread_db(volts), (high - low) / 2, atol=2e-3)
    assert band.half_spread_db(volts).max() > 0.5


def test_the_middle_is_the_root_of_smallest_times_largest() -> None:
    """In power, as at the response over a band."""
    pair = tuple(Curve(np.array([a, a + 40.0]), np.array([0.5, 1.5]), "dbm") for a in (-50, -47))
    at = Curves(np.array([1e9, 2e9]), pair).over(1e9, 2e9).dbm_at(np.array([1.0]))[0]
    assert 10 ** (at / 10) == pytest.approx(math.sqrt(10**-3.0 * 10**-2.7))


def test_one_curve_serves_every_frequency_unchanged() -> None:
    curve = bent(-60.0, 25.0)
    band = Curves(np.empty(0), (curve,)).over(1e6, 1e11)
    np.testing.assert_array_equal(band.dbm_at(VOLTS), curve.dbm_at(VOLTS))
    assert band.half_spread_db(VOLTS).max() == 0.0


@pytest.mark.parametrize(("low", "high"), [(9e7, 2e8), (1e9, 3.1e9)])
def test_nothing_is_extrapolated(low: float, high: float) -> None:
    with pytest.raises(CalibrationError, match="covers 100 MHz to 3 GHz, but .* is measured"):
        three().over(low, high)


def test_only_voltages_that_every_curve_has() -> None:
    """By hand: 0.6 to 1.5 V in common; at 0.6 V the second still reads -50, the first -58."""
    first = Curve(np.array([-60.0, -40.0]), np.array([0.5, 1.5]), "dbm")
    second = Curve(np.array([-50.0, -30.0]), np.array([0.6, 1.6]), "dbm")
    curves = Curves(np.array([1e9, 2e9]), (first, second))
    assert curves.ends_v == (0.6, 1.5)
    assert curves.ends_dbm == pytest.approx((-50.0, -40.0))
    assert curves.volts_of(-45.0) == pytest.approx((0.85, 1.25))
    ends = curves.over(1e9, 1e9).dbm_at(np.array([0.1, 0.6, 1.5, 9.0]))
    assert ends == pytest.approx([-58.0, -58.0, -40.0, -40.0])


@pytest.mark.parametrize(
    ("at_hz", "slopes", "words"),
    [
        ([1e9, 2e9], (1, -1), "rises at one frequency and falls at another"),
        ([2e9, 1e9], (1, 1), "1 GHz stands out of order"),
        ([1e9, 1e9], (1, 1), "1 GHz stands twice"),
    ],
)
def test_curves_that_do_not_go_together(
    at_hz: list[float], slopes: tuple[int, int], words: str
) -> None:
    pair = tuple(bent(-30.0 - 30.0 * slope, 25.0, slope) for slope in slopes)
    with pytest.raises(CalibrationError, match=words):
        Curves(np.array(at_hz), pair)


def test_curves_without_common_voltages() -> None:
    pair = tuple(Curve(np.array([-60.0, 0.0]), np.array(v), "dbm") for v in ([1, 2], [2, 3]))
    with pytest.raises(CalibrationError, match="no voltage in common"):
        Curves(np.array([1e9, 2e9]), pair)


STEPS = st.lists(st.floats(0.05, 20.0), min_size=2, max_size=8)


@given(STEPS, STEPS, st.booleans(), st.sampled_from(["dbm", "amplitude"]), st.floats(0.0, 1.0))
def test_there_and_back_by_either_slope(
    dbm_steps: list[float], volt_steps: list[float], falls: bool, linear_in: str, share: float
) -> None:
    """Any strictly monotonic curve: the power of the volts of a power is that power."""
    n = min(len(dbm_steps), len(volt_steps))
    dbm = -70.0 + np.cumsum(dbm_steps[:n])
    volts = np.cumsum(volt_steps[:n]) / 40.0
    curve = Curve(dbm, volts[::-1].copy() if falls else volts, linear_in)
    assert curve.rising is not falls
    p_dbm = float(dbm[0] + share * (dbm[-1] - dbm[0]))
    assert curve.dbm_at(np.array([curve.volts_at(p_dbm)]))[0] == pytest.approx(p_dbm, abs=1e-6)


@given(
    st.booleans(), st.floats(1e8, 3e9), st.floats(1.0, 4.0), st.sampled_from(["dbm", "amplitude"])
)
def test_a_band_has_one_power_to_a_voltage(
    falls: bool, low_hz: float, ratio: float, linear_in: str
) -> None:
    """The middle over any band is strictly monotonic, with the slope of its curves."""
    whole = three(-1 if falls else 1)
    curves = Curves(AT_HZ, tuple(Curve(c.dbm, c.volts, linear_in) for c in whole.curves))
    band = curves.over(low_hz, min(low_hz * ratio, 3e9))
    steps = np.diff(band.dbm_at(np.linspace(*curves.ends_v, 400)))
    assert (steps < 0).all() if falls else (steps > 0).all()
    assert band.rising is not falls
