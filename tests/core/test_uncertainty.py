"""Combined and expanded uncertainty against published examples, closed forms and scipy."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from scipy import signal, stats

from monitor.calfile import load_chain
from monitor.config import Band, Channel
from monitor.core.budget import Contribution
from monitor.core.errors import CalibrationError
from monitor.core.uncertainty import coverage_factor, expanded_db, standard_db

ONE = np.ones((1, 1))


def line(value: float, distribution: str = "normal", **more: object) -> Contribution:
    """A line of a budget; unnamed ones differ by their figures."""
    name = str(more.pop("name", f"{distribution} {value}"))
    return Contribution(name, value, distribution, **more)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("made", "u_db"),
    [
        (line(0.3), 0.3),
        (line(0.8, "expanded", k=2.0), 0.4),
        (line(0.5, "rectangular"), 0.5 / math.sqrt(3)),
        (line(0.5, "triangular"), 0.5 / math.sqrt(6)),
        (line(0.5, "u_shaped"), 0.5 / math.sqrt(2)),
    ],
)
def test_standard_uncertainty_of_each_distribution(made: Contribution, u_db: float) -> None:
    """Divisors of GUM 4.3.7, 4.3.9 and, for the U-shape, H.1.3.4."""
    assert made.u == pytest.approx(u_db, rel=1e-12)
    assert standard_db([[made]], ONE)[0] == pytest.approx(u_db, rel=1e-12)


def test_arcsine_and_normal_as_in_gum_h_1_3_4() -> None:
    """Half width 0.5 degC and u = 0.2 degC give 0.4062 (GUM prints 0.41)."""
    u = standard_db([[line(0.5, "u_shaped"), line(0.2)]], ONE)[0]
    assert u == pytest.approx(0.406201920232, abs=1e-12)


def test_budget_of_a_30_db_attenuator() -> None:
    """EA-4/02 M, example S7: nine standard uncertainties, combined 0.0224 dB."""
    parts = [0.0091, 0.0025, 0.0014, 0.02, 0.0021, 0.0003, 0.0003, 0.002, 0.002]
    budget = [[line(u, name=f"part {i}") for i, u in enumerate(parts)]]
    assert standard_db(budget, ONE)[0] == pytest.approx(0.0224, abs=5e-5)


def test_sum_of_four_rectangles() -> None:
    """JCGM 101:2008, 9.2.3, table 3: four of half width sqrt(3), 95 % half width 3.88."""
    budget = [[line(math.sqrt(3), "rectangular", name=f"x{i}") for i in range(4)]]
    u_db, k = expanded_db(budget, ONE)
    assert u_db[0] == pytest.approx(3.88, abs=0.005)
    assert k == pytest.approx(1.94, abs=0.0025)


@pytest.mark.parametrize(
    ("distribution", "k"),
    [
        ("normal", stats.norm.ppf(0.975)),
        ("rectangular", 0.95 * math.sqrt(3)),
        ("triangular", math.sqrt(6) * (1 - math.sqrt(0.05))),
        ("u_shaped", math.sqrt(2) * math.sin(0.95 * math.pi / 2)),
    ],
)
def test_factor_of_a_single_contribution(distribution: str, k: float) -> None:
    """Quantiles of the distributions themselves, in closed form."""
    assert coverage_factor([[line(1.0, distribution)]]) == pytest.approx(k, abs=5e-4)


def test_factor_of_a_mixture_against_scipy() -> None:
    """The densities from scipy.stats, convolved by scipy.signal, integrated to 95 %."""
    step = 1e-3
    x = np.arange(-6.0, 6.0 + step / 2, step)
    density = stats.norm(scale=0.30).pdf(x)
    for other in (stats.uniform(-1.0, 2.0), stats.triang(0.5, -0.6, 1.2), stats.arcsine(-0.7, 1.4)):
        mass = np.diff(other.cdf(np.append(x - step / 2, x[-1] + step / 2)))
        density = signal.fftconvolve(density, mass, "same")
    density /= density.sum()
    reach = 0.95 - density[x.size // 2]
    both = np.cumsum(2.0 * density[x.size // 2 + 1 :])
    half = step * (0.5 + np.interp(reach, both, np.arange(1, both.size + 1)))
    u = math.sqrt(float((density * x * x).sum()))
    budget = [[line(0.3), line(1.0, "rectangular"), line(0.6, "triangular"), line(0.7, "u_shaped")]]
    assert standard_db(budget, ONE)[0] == pytest.approx(u, rel=1e-5)
    assert coverage_factor(budget) == pytest.approx(half / u, abs=1e-3)


def test_shared_errors_add_and_independent_ones_in_squares() -> None:
    """GUM 5.2.2 note 1: fully correlated inputs add with their signs; others as 5.1.2."""
    shared, own = line(1.0, shared=True, name="antenna"), line(0.6, name="detector")
    shares = np.array([[1 / 3, 1 / 3, 1 / 3], [1.0, 0.0, 0.0], [0.7, 0.2, 0.1]])
    budget = [[shared, own]] * 3
    expected = [
        math.hypot(1.0, 0.6 / math.sqrt(3)),
        math.hypot(1.0, 0.6),
        math.hypot(1.0, 0.6 * math.sqrt(0.49 + 0.04 + 0.01)),
    ]
    assert standard_db(budget, shares) == pytest.approx(expected, rel=1e-12)


def test_shared_by_name_only() -> None:
    """Two bands with antennas of their own: what is not the same error adds in squares."""
    budget = [[line(1.0, shared=True, name="low")], [line(1.0, shared=True, name="high")]]
    assert standard_db(budget, np.array([[0.5, 0.5]]))[0] == pytest.approx(math.sqrt(0.5))
    half_known = [[line(1.0, shared=True, name="low")], []]
    assert standard_db(half_known, np.array([[0.25, 0.75]]))[0] == pytest.approx(0.25)


def test_a_share_that_is_not_there_gives_no_uncertainty() -> None:
    u_db = standard_db([[line(1.0)]], np.array([[math.nan], [1.0]]))
    assert math.isnan(u_db[0])
    assert u_db[1] == pytest.approx(1.0)


def test_factor_covers_a_field_on_one_axis_and_on_all() -> None:
    """Three independent rectangles are nearly normal together, one alone is not: the larger k."""
    budget = [[line(1.0, "rectangular", name="own")]] * 3
    three = coverage_factor([[line(1.0, "rectangular", name=f"x{i}") for i in range(3)]])
    assert coverage_factor(budget) == pytest.approx(three, abs=1e-6)
    assert coverage_factor(budget) > coverage_factor([[line(1.0, "rectangular")]])


def test_without_any_uncertainty_the_factor_is_the_normal_one() -> None:
    assert coverage_factor([[line(0.0)]]) == pytest.approx(stats.norm.ppf(0.975))


def test_example_without_degrees_of_freedom_keeps_its_figures() -> None:
    """k and u of the board's example over 700 MHz to 2.7 GHz as they were before there were any."""
    path = Path(__file__).parents[2] / "hardware/examples/detector-board-calibration.toml"
    channels = [Channel(axis, axis, "main") for axis in "xyz"]
    chain = load_chain(path, channels, {"main": Band("main", 7e8, 2.7e9)})
    found = standard_db(chain.contributions, np.array([[0.5, 0.3, 0.2]]))
    assert coverage_factor(chain.contributions) == pytest.approx(1.930194203803123, rel=1e-12)
    assert found[0] == pytest.approx(1.1428670592625971, rel=1e-12)


@pytest.mark.parametrize(
    ("value", "distribution", "k", "words"),
    [
        (-0.1, "normal", 2.0, "zero or more"),
        (math.nan, "normal", 2.0, "zero or more"),
        (0.1, "gaussian", 2.0, "is not one of"),
        (0.1, "expanded", 0.0, "positive"),
    ],
)
def test_a_line_that_means_nothing_is_refused(
    value: float, distribution: str, k: float, words: str
) -> None:
    with pytest.raises(CalibrationError, match=words):
        Contribution("line", value, distribution, k)


def test_one_error_cannot_have_two_distributions() -> None:
    budget = [
        [line(1.0, "normal", shared=True, name="cable")],
        [line(1.0, "rectangular", shared=True, name="cable")],
    ]
    with pytest.raises(CalibrationError, match="cable"):
        standard_db(budget, np.array([[0.5, 0.5]]))
