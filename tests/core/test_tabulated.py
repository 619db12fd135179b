"""Distributions from a table against closed forms, scipy's densities and draws."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, stats

from monitor.core.budget import Contribution, combined, independent, linear, table
from monitor.core.distributions import CONFIDENCE, draw, factor
from monitor.core.errors import CalibrationError
from monitor.core.montecarlo import errors_db, spread
from monitor.core.tabulated import Points, Tabulated

HALF = 0.7
RECTANGLE: Points = ((-HALF, 3.0), (HALF, 3.0))
TRIANGLE: Points = ((-HALF, 0.0), (0.0, 2.0), (HALF, 0.0))
SKEW: Points = ((-1.0, 0.0), (-1.0 + 1e-9, 1.0), (2.0, 0.0))
"""A right triangle: density falls from -1 to 2, its mean is 0, its variance 9/18."""


def line(points: Points, **more: object) -> Contribution:
    """A tabulated line of a budget."""
    return Contribution("table", 0.0, "tabulated", points=points, **more)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("points", "shape"), [(RECTANGLE, "rectangular"), (TRIANGLE, "triangular")]
)
@pytest.mark.parametrize("degrees", [math.inf, 6.0])
def test_a_table_of_a_shape_gives_what_the_shape_gives(
    points: Points, shape: str, degrees: float
) -> None:
    """u, k and U alone and beside a normal line; GUM 4.3.7 and 4.3.9 stand behind the shapes."""
    other = Contribution("other", 0.2, "normal")
    for beside in ([], [other]):
        here = linear([line(points, degrees_of_freedom=degrees), *beside])
        known = Contribution("shape", HALF, shape, degrees_of_freedom=degrees)
        there = linear([known, *beside])
        assert here.u == pytest.approx(there.u, rel=1e-12)
        assert here.k == pytest.approx(there.k, rel=1e-9)
        assert here.degrees_of_freedom == pytest.approx(there.degrees_of_freedom)


def test_moments_of_a_right_triangle() -> None:
    """Closed form: variance of a triangle of sides at -1, -1 and 2 is (9)/18."""
    found = Tabulated(SKEW)
    assert found.mean == pytest.approx(0.0, abs=1e-8)
    assert found.deviation == pytest.approx(math.sqrt(0.5), rel=1e-8)
    assert found.reach == pytest.approx(2.0 / math.sqrt(0.5))


def test_factor_of_two_tables_against_scipy() -> None:
    """P(|a + b| < k u) for two right triangles, one turned round: scipy's triang, integrated."""
    lines = [line(SKEW), Contribution("b", 0.0, "tabulated", points=SKEW, sensitivity=-0.4)]
    found = linear(lines)
    a = stats.triang(0.0, loc=-1.0, scale=3.0)
    b = stats.triang(1.0, loc=-0.8, scale=1.2)
    reach = found.k * found.u

    def inside(x: float) -> float:
        return float(b.pdf(x) * (a.cdf(reach - x) - a.cdf(-reach - x)))

    assert found.u == pytest.approx(math.hypot(a.std(), b.std()), rel=1e-7)
    assert integrate.quad(inside, -0.8, 0.4, epsabs=1e-9)[0] == pytest.approx(0.95, abs=1e-5)


def test_factor_of_a_skew_table_counts_both_sides() -> None:
    """In closed form: below x there are 1 - (2 - x)^2/9; the short side ends at -1."""
    reach = 2.0 - 3.0 * math.sqrt(1.0 - CONFIDENCE)
    assert reach > 1.0  # so that the short side lies wholly inside
    assert factor([(Tabulated(SKEW), 1.0, math.inf)]) == pytest.approx(
        reach / math.sqrt(0.5), abs=2e-3
    )


def test_a_sum_of_shared_tables_keeps_its_side() -> None:
    """Two channels off by the same skew error, one of them the other way round, by more."""
    up, down = line(SKEW, shared=True), line(SKEW, shared=True, sensitivity=-3.0)
    (error,) = independent([[up], [down]])
    shape, u, _ = error.at(np.array([0.5, 0.5]))
    assert isinstance(shape, Tabulated)
    assert shape.points[0][0] == -2.0
    assert u == pytest.approx(math.sqrt(0.5), rel=1e-8)


@pytest.mark.parametrize("points", [RECTANGLE, TRIANGLE, SKEW], ids=["flat", "peak", "skew"])
def test_draws_follow_the_table(points: Points) -> None:
    """Kolmogorov and Smirnov's test against the table's own cumulative distribution."""
    shape = Tabulated(points)
    drawn = draw(shape, 50_000, math.inf, np.random.default_rng(8))
    assert stats.kstest(drawn, shape.cumulative).pvalue > 0.01
    assert float(drawn.std()) == pytest.approx(1.0, rel=0.01)


@pytest.mark.parametrize("degrees", [math.inf, 9.0])
def test_draws_agree_with_the_analytic_figure(degrees: float) -> None:
    """Within 2 % of U, for three channels that share a skew error beside errors of their own."""
    shared = line(SKEW, shared=True, degrees_of_freedom=degrees, sensitivity=0.4)
    own = Contribution("own", 0.0, "tabulated", points=TRIANGLE)
    normal = Contribution("normal", 0.2, "normal")
    budget, shares = [[shared, own, normal]] * 3, np.array([0.6, 0.3, 0.1])
    here = combined(budget, shares)
    found = spread(errors_db(budget, shares, 400_000, 3))
    assert found.expanded_db == pytest.approx(here.k * here.u, rel=0.02)


@pytest.mark.parametrize(
    ("points", "words"),
    [
        ((), "at least two rows"),
        (((0.0, 1.0),), "at least two rows"),
        (((-1.0, 1.0), (-1.0, 2.0), (1.0, 1.0)), "-1 then -1; errors must rise"),
        (((-1.0, 1.0), (0.0, -0.5), (1.0, 1.0)), "weight -0.5"),
        (((-1.0, 0.0), (1.0, 0.0)), "all weights are zero"),
        (((-1.0, 1.0), (math.nan, 1.0)), "finite"),
        (((-1.0, 1.0), (1.5, 1.0)), "mean is 0.25, not zero; correct the table by its mean first"),
    ],
)
def test_a_table_that_is_no_distribution_of_an_error_is_refused(points: Points, words: str) -> None:
    with pytest.raises(CalibrationError, match=words):
        line(points)


def test_value_and_points_must_not_say_two_things() -> None:
    with pytest.raises(CalibrationError, match="leave out: points give it"):
        Contribution("table", 0.5, "tabulated", points=TRIANGLE)
    with pytest.raises(CalibrationError, match="points belong to a tabulated distribution"):
        Contribution("line", 0.5, "normal", points=TRIANGLE)


def test_the_contribution_table_shows_the_deviation_as_the_value() -> None:
    (row,) = table([[line(TRIANGLE, sensitivity=2.0)]], np.ones(1))
    assert (row.distribution, row.sensitivity) == ("tabulated", 2.0)
    assert row.value == pytest.approx(HALF / math.sqrt(6.0))
    assert row.u == pytest.approx(2.0 * HALF / math.sqrt(6.0))


centred = st.lists(
    st.tuples(st.floats(0.01, 2.0), st.floats(0.0, 5.0)), min_size=2, max_size=8
).filter(lambda rows: max(weight for _, weight in rows) > 0.1)


@settings(max_examples=60, deadline=None)
@given(centred, st.floats(1e-3, 1e3))
def test_laws_of_every_table(rows: list[tuple[float, float]], unit: float) -> None:
    """Mirrored about zero: the mean vanishes; unit and scale of weights change nothing.

    The deviation against scipy's integral over the pieces, the inverse against the cumulative.
    """
    right = [(math.fsum(step for step, _ in rows[: i + 1]), w) for i, (_, w) in enumerate(rows)]
    points = tuple([(-x, w) for x, w in reversed(right)] + right)
    shape = Tabulated(points)
    scaled = Tabulated(tuple((x * unit, w / unit) for x, w in points))
    assert scaled.deviation == pytest.approx(shape.deviation * unit, rel=1e-9)
    x = np.array([error for error, _ in points])
    w = np.array([weight for _, weight in points])

    def moment(power: int) -> float:
        pieces = zip(x[:-1], x[1:])
        return sum(
            integrate.fixed_quad(lambda t: np.interp(t, x, w) * t**power, a, b)[0]
            for a, b in pieces
        )

    assert shape.deviation == pytest.approx(math.sqrt(moment(2) / moment(0)), rel=1e-9)
    share = np.linspace(0.0, 1.0, 101)
    assert shape.cumulative(shape.at(share)) == pytest.approx(share, abs=1e-9)
