"""Probability of conformity: printed figures are rows of worked_examples.csv; here the laws."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from monitor.core.conformity import (
    acceptance_limit,
    conformance,
    multiplier,
    ratio_conformance,
)
from monitor.core.errors import ConfigError
from monitor.core.exposure import GUARD


@given(st.floats(-50, 50), st.floats(0.1, 20), st.floats(-50, 50), st.floats(0, 60))
def test_conformance_against_scipy(value: float, u: float, low: float, width: float) -> None:
    """scipy's cumulative distribution, from whichever side loses no digits."""
    near = stats.norm(loc=value, scale=u)
    high = low + width
    expected = near.sf(low) - near.sf(high) if low > value else near.cdf(high) - near.cdf(low)
    assert conformance(value, u, low, high) == pytest.approx(expected, rel=1e-9, abs=1e-300)


def test_a_probability_far_out_keeps_its_digits() -> None:
    """From scipy: sf(9) is 1.1e-19, which is no difference of two figures near to 1."""
    assert conformance(0.0, 1.0, low=9.0) == pytest.approx(stats.norm.sf(9.0), rel=1e-12)
    assert conformance(0.0, 1.0, 9.0, 10.0) == pytest.approx(
        stats.norm.sf(9.0) - stats.norm.sf(10.0), rel=1e-12
    )


@given(st.floats(1e-12, 1.0 - 1e-12))
def test_multiplier_against_scipy(probability: float) -> None:
    assert multiplier(probability) == pytest.approx(stats.norm.ppf(probability), abs=1e-6)


@given(st.floats(-10, 10), st.floats(0.01, 5), st.floats(0.01, 0.99))
def test_a_value_at_the_acceptance_limit_has_that_probability(
    limit: float, u: float, probability: float
) -> None:
    at = acceptance_limit(limit, u, probability)
    assert conformance(at, u, high=limit) == pytest.approx(probability, abs=1e-9)


def test_the_guard_of_verdicts_is_a_probability_of_95_percent() -> None:
    """A ratio that is just allowed to conform, with u = 1.2 dB."""
    ratio = 10.0 ** (-GUARD * 1.2 / 10.0)
    assert ratio_conformance(ratio, 1.2) == pytest.approx(0.95, abs=6e-4)
    assert ratio_conformance(1.0, 1.2) == 0.5
    assert ratio_conformance(1.0 / ratio, 1.2) == pytest.approx(0.05, abs=6e-4)


def test_edges() -> None:
    assert conformance(1.0, 0.0, high=1.0) == 1.0
    assert conformance(1.1, 0.0, high=1.0) == 0.0
    assert ratio_conformance(0.0, 1.0) == 1.0
    assert ratio_conformance(-0.1, 1.0) == 1.0
    assert math.isnan(ratio_conformance(math.nan, 1.0))
    assert math.isnan(ratio_conformance(0.0, math.nan))
    assert math.isnan(conformance(0.0, math.nan, high=1.0))


@pytest.mark.parametrize("probability", [0.0, 1.0, math.nan])
def test_no_multiplier_for_what_is_certain(probability: float) -> None:
    with pytest.raises(ConfigError, match="between 0 and 1"):
        multiplier(probability)
