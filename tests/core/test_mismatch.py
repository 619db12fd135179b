"""Mismatch: printed limits are rows of worked_examples.csv; here what holds for every pair."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.core.budget import Contribution, linear
from monitor.core.errors import CalibrationError
from monitor.core.mismatch import Mismatch, reflection

reflections = st.floats(0.0, 0.5)


@given(reflections, reflections)
def test_limits_are_those_of_the_phase_that_is_worst(rho1: float, rho2: float) -> None:
    """|1 + rho1 rho2 e^(i phase)|^2 over every phase, in dB and percent."""
    found = Mismatch(rho1, rho2)
    phase = np.linspace(-math.pi, math.pi, 721)
    power = np.abs(1.0 + rho1 * rho2 * np.exp(1j * phase)) ** 2
    ends = np.array([power.min(), power.max()])
    assert found.limits_db == pytest.approx(tuple(10.0 * np.log10(ends)), abs=1e-9)
    assert found.limits_percent == pytest.approx(tuple(100.0 * (ends - 1.0)), abs=1e-9)
    assert found.half_width_db >= found.limits_db[1] - 1e-12


def test_standard_uncertainty_is_that_of_phases_at_random() -> None:
    """numpy's draws of the phase: the U-shape by the larger limit is just not too small."""
    found = Mismatch(0.2, 0.2)
    phase = np.random.default_rng(4).uniform(-math.pi, math.pi, 400_000)
    power = np.abs(1.0 + found.voltage * np.exp(1j * phase)) ** 2
    drawn_db = float((10.0 * np.log10(power)).std())
    assert drawn_db < found.standard_db < 1.05 * drawn_db
    assert found.standard_percent == pytest.approx(100.0 * float(power.std()), rel=5e-3)
    assert linear([Contribution("joint", found.half_width_db, "u_shaped")]).u == pytest.approx(
        found.standard_db, rel=1e-12
    )


@pytest.mark.parametrize("vswr", [0.9, math.nan, math.inf])
def test_no_standing_wave_ratio_below_one(vswr: float) -> None:
    with pytest.raises(CalibrationError, match="must be 1 or more"):
        reflection(vswr)


@pytest.mark.parametrize("rho", [-0.1, 1.0, math.nan])
def test_no_reflection_of_more_than_all(rho: float) -> None:
    with pytest.raises(CalibrationError, match="from 0 to below 1"):
        Mismatch(0.1, rho)
