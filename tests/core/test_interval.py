"""The interval of what multiplies and what adds, and the detection limit, against drawing."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from monitor.core.distributions import NORMAL_K
from monitor.core.flags import Flag
from monitor.core.interval import DETECTION, interval, reported, total_db

figures = st.floats(1e-6, 1e6)
widths_db = st.floats(0.0, 10.0)
shares = st.floats(0.0, 3.0)


def test_without_what_adds_it_is_in_decibels() -> None:
    found = interval(2.0, 3.0, 3.0, 0.0)
    assert float(found.low) == pytest.approx(2.0 / 10**0.3)
    assert float(found.high) == pytest.approx(3.0 * 10**0.3)


def test_without_what_multiplies_it_is_an_amount() -> None:
    found = interval(2.0, 3.0, 0.0, 0.5)
    assert (float(found.low), float(found.high)) == pytest.approx((1.5, 3.5))
    assert float(interval(0.2, 0.2, 0.0, 0.5).low) == 0.0


@given(figures, widths_db, shares, shares)
def test_more_doubt_never_narrows_it(value: float, db: float, share: float, more: float) -> None:
    near = interval(value, value, db, share * value)
    far = interval(value, value, db + 0.1, (share + more) * value)
    assert float(far.low) <= float(near.low) * (1 + 1e-12)
    assert float(near.high) <= float(far.high) * (1 + 1e-12)
    assert 0.0 <= float(near.low) <= value <= float(near.high)


@pytest.mark.parametrize("u_db", [0.3, 0.8, 1.5])
@pytest.mark.parametrize("u_added", [0.02, 0.1, 0.3])
def test_it_holds_the_truth_as_often_as_it_says(u_db: float, u_added: float) -> None:
    """A truth of 1, a gain that is off by a normal error in dB, a zero off by a normal amount."""
    rng = np.random.default_rng(5)
    seen = 10 ** (rng.normal(0, u_db, 200_000) / 10) + rng.normal(0, u_added, 200_000)
    seen = seen[seen > 0]
    found = interval(seen, seen, NORMAL_K * u_db, np.full(seen.size, NORMAL_K * u_added))
    inside = (found.low <= 1.0) & (found.high >= 1.0)
    assert 0.94 < inside.mean() < 0.965


def test_the_detection_limit_is_two_one_sided_quantiles() -> None:
    """Currie 1968, ISO 11929-1 (from memory): k for 5 % false alarms plus k for 5 % missed."""
    assert pytest.approx(2 * stats.norm.ppf(0.95), abs=1e-12) == DETECTION
    rng = np.random.default_rng(6)
    at_limit = rng.normal(DETECTION, 1.0, 400_000)
    threshold = DETECTION / 2
    assert np.mean(rng.normal(0.0, 1.0, 400_000) > threshold) == pytest.approx(0.05, abs=2e-3)
    assert np.mean(at_limit < threshold) == pytest.approx(0.05, abs=2e-3)


def test_below_the_detection_limit_the_bound_is_not_widened_again() -> None:
    flags = np.array([0, int(Flag.BELOW_RANGE)])
    found = reported(np.ones(2), np.full(2, 2.0), 3.0, 0.0, flags)
    assert found.low.tolist() == [pytest.approx(10**-0.3), 0.0]
    assert found.high.tolist() == [pytest.approx(2 * 10**0.3), 2.0]


def test_total_is_first_order_and_says_nothing_below_the_limit() -> None:
    """GUM 5.1.2: 10 percent of a power is 0.434 dB."""
    total = total_db(1.0, 2.0, 0.2, 0)
    assert float(total) == pytest.approx(math.hypot(1.0, 0.4343), rel=1e-4)
    assert math.isnan(float(total_db(1.0, 2.0, 0.2, int(Flag.BELOW_RANGE))))
    assert float(total_db(1.0, 0.0, 0.0, 0)) == 1.0
