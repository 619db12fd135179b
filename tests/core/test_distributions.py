"""Coverage factors with finite degrees of freedom against printed tables, scipy and draws."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, stats

from monitor.core.distributions import DIVISOR, draw, factor, scale_weights

TN_1297 = [
    (2, 0.9545, 4.53, 0.005),
    (5, 0.95, 2.57, 0.005),
    (8, 0.99, 3.36, 0.005),
    (10, 0.9545, 2.28, 0.005),
    (16, 0.99, 2.92, 0.005),
    (19, 0.95, 2.09, 0.005),
    (30, 0.9973, 3.27, 0.005),
    (50, 0.95, 2.01, 0.005),
    (1, 0.6827, 1.84, 0.005),
    (math.inf, 0.95, 1.96, 0.0005),
    (math.inf, 0.99, 2.576, 0.0005),
]
"""NIST TN 1297 (1994), table B.1, which is table G.2 of JCGM 100:2008."""


@pytest.mark.parametrize(("degrees", "share", "t", "off"), TN_1297)
def test_factor_of_one_normal_is_students(
    degrees: float, share: float, t: float, off: float
) -> None:
    assert factor([("normal", 0.7, degrees)], share) == pytest.approx(t, abs=off)


@pytest.mark.parametrize("degrees", [1, 1.5, 2, 3.3, 8, 40, 500, 1e6])
def test_students_factor_against_scipy(degrees: float) -> None:
    expected = stats.t.ppf(0.975, degrees)
    assert factor([("normal", 1.0, degrees)]) == pytest.approx(expected, rel=2e-4)


def test_sum_of_student_and_rectangle_against_scipy() -> None:
    """P(|T + R| < x) from scipy's t, integrated over the rectangle."""
    u_t, degrees, half = 0.5, 4.0, 1.1
    u = math.hypot(u_t, half / math.sqrt(3.0))
    k = factor([("normal", u_t, degrees), ("rectangular", half / math.sqrt(3.0), math.inf)])

    def within(r: float) -> float:
        ends = [(k * u - r) / u_t, (-k * u - r) / u_t]
        high, low = stats.t.cdf(ends, degrees)
        return float(high - low) / (2.0 * half)

    assert integrate.quad(within, -half, half)[0] == pytest.approx(0.95, abs=1e-5)


@pytest.mark.parametrize("degrees", [1.0, 2.0, 7.0, 60.0, 1e5])
def test_scales_have_the_law_of_chi_squared(degrees: float) -> None:
    """1/scale squared is chi squared over its degrees: mean 1, variance 2/v (and the median)."""
    scale, weight = scale_weights(degrees)
    inverse = scale**-2.0
    assert float(weight.sum()) == pytest.approx(1.0, rel=1e-12)
    assert float(weight @ inverse) == pytest.approx(1.0, rel=1e-6)
    assert float(weight @ (inverse - 1.0) ** 2) == pytest.approx(2.0 / degrees, rel=1e-4)


@pytest.mark.parametrize("shape", sorted(DIVISOR))
def test_factor_of_a_bounded_error_of_unsure_width_against_draws(shape: str) -> None:
    """numpy's own draws, by the definition: shape times root(v over chi squared of v)."""
    rng = np.random.default_rng(17)
    n, degrees = 400_000, 5.0
    bare = {
        "normal": lambda: rng.normal(0.0, 1.0, n),
        "rectangular": lambda: rng.uniform(-math.sqrt(3), math.sqrt(3), n),
        "triangular": lambda: rng.triangular(-math.sqrt(6), 0.0, math.sqrt(6), n),
        "u_shaped": lambda: math.sqrt(2) * np.cos(rng.uniform(0.0, math.pi, n)),
    }[shape]()
    drawn = np.abs(bare * np.sqrt(degrees / rng.chisquare(degrees, n)))
    assert factor([(shape, 1.0, degrees)]) == pytest.approx(np.quantile(drawn, 0.95), rel=5e-3)


@pytest.mark.parametrize("shape", sorted(DIVISOR))
@pytest.mark.parametrize("degrees", [math.inf, 30.0])
def test_draws_have_the_distribution_that_they_are_said_to_have(shape: str, degrees: float) -> None:
    """Standard deviation 1 times root(v/(v-2)) (Student's), the bounds of a bounded shape."""
    drawn = draw(shape, 200_000, degrees, np.random.default_rng(3))
    widened = math.sqrt(degrees / (degrees - 2.0)) if math.isfinite(degrees) else 1.0
    assert float(drawn.std()) == pytest.approx(widened, rel=0.01)
    assert float(drawn.mean()) == pytest.approx(0.0, abs=0.01)
    if math.isinf(degrees) and shape != "normal":
        assert 0.98 * DIVISOR[shape] < float(np.abs(drawn).max()) <= DIVISOR[shape]


@settings(max_examples=40, deadline=None)
@given(
    st.sampled_from(sorted(DIVISOR)),
    st.floats(2.0, 300.0),
    st.floats(1.2, 5.0),
    st.floats(1e-6, 1e6),
)
def test_fewer_degrees_of_freedom_never_give_a_smaller_factor(
    shape: str, degrees: float, times: float, unit: float
) -> None:
    """And no unit changes it. To within the grid, 2e-4."""
    others = [("normal", 0.5, math.inf), ("rectangular", 0.7, 20.0)]
    fewer = factor([(shape, 1.0, degrees), *others])
    more = factor([(shape, 1.0, degrees * times), *others])
    assert fewer >= more - 2e-4
    scaled = [(s, u * unit, v) for s, u, v in [(shape, 1.0, degrees), *others]]
    assert factor(scaled) == pytest.approx(fewer, rel=1e-9)
