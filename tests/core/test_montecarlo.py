"""The budget by drawing (JCGM 101:2008) beside the analytic one."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from monitor import calparts, calreview
from monitor.core.budget import Contribution, combined
from monitor.core.montecarlo import errors_db, spread

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
DRAWS = 300_000
AXES = np.array([0.5, 0.3, 0.2])

ANTENNA = Contribution("antenna", 1.2, "expanded", 2.0, shared=True)
MISMATCH = Contribution("mismatch", 0.4, "u_shaped")
BUDGETS = {
    "one error for all": [[ANTENNA]] * 3,
    "apart": [[MISMATCH, Contribution("curve", 0.3, "rectangular")]] * 3,
    "few readings": [[replace(ANTENNA, degrees_of_freedom=4.0), MISMATCH]] * 3,
    "width unsure": [
        [Contribution("isotropy", 0.9, "rectangular", shared=True, degrees_of_freedom=3.0)]
    ]
    * 3,
    "in kelvin": [
        [
            Contribution("temperature", 12.0, "triangular", shared=True, sensitivity=sign * 0.05),
            MISMATCH,
        ]
        for sign in (1.0, 1.0, -1.0)
    ],
}


@pytest.mark.parametrize("name", BUDGETS)
def test_draws_agree_with_the_analytic_figure(name: str) -> None:
    """Within 2 % of U, on three axes with unequal shares."""
    budget = BUDGETS[name]
    found = spread(errors_db(budget, AXES, DRAWS, 5))
    here = combined(budget, AXES)
    assert found.expanded_db == pytest.approx(here.k * here.u, rel=0.02)
    low, high = found.shortest_db
    assert (high - low) / 2.0 <= found.expanded_db * 1.01
    assert low < 0.0 < high


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*-calibration.toml")), ids=lambda p: p.stem)
@pytest.mark.parametrize("alone", [False, True])
def test_draws_agree_for_every_example_of_a_calibration(path: Path, alone: bool) -> None:
    """Within 2 % of U, equal shares and the first axis alone."""
    shown = calreview.view(calparts.read(path), "xyz", None)
    shares = np.array([1.0, 0.0, 0.0]) if alone else np.full(3, 1 / 3)
    found = calreview.monte_carlo(shown.chain, shares, DRAWS, 11)
    assert found["expanded_db"] == pytest.approx(found["analytic_db"], rel=0.02)
    assert abs(float(str(found["difference_percent"]))) <= 2.0


def test_four_rectangles() -> None:
    """JCGM 101:2008, 9.2.3, table 3: half width sqrt(3) each, 95 % within 3.88."""
    budget = [[Contribution(f"x{i}", math.sqrt(3), "rectangular") for i in range(4)]]
    found = spread(errors_db(budget, np.ones(1), DRAWS, 7))
    assert found.expanded_db == pytest.approx(3.88, abs=0.02)
    assert found.deviation_db == pytest.approx(2.0, abs=0.01)
    assert found.shortest_db == pytest.approx((-3.88, 3.88), abs=0.12)


def test_channels_add_as_powers() -> None:
    """Mean of a log-normal power: exp of half the squared deviation in nepers of power."""
    budget = [[Contribution("gain", 1.5, "normal")]] * 3
    power = 10.0 ** (errors_db(budget, AXES, DRAWS, 9) / 10.0)
    sigma = 1.5 * math.log(10.0) / 10.0
    assert float(power.mean()) == pytest.approx(math.exp(sigma**2 / 2.0), rel=2e-3)


def test_the_same_seed_gives_the_same_draws() -> None:
    budget = BUDGETS["few readings"]
    first, again, other = (errors_db(budget, AXES, 250_000, seed) for seed in (1, 1, 2))
    assert (first == again).all()
    assert (first != other).any()


def test_shortest_interval_of_a_skew_spread() -> None:
    """An exponential's shortest interval starts at nothing: 0 to -ln 0.05."""
    skew = -np.log1p(-(np.arange(100_000) + 0.5) / 100_000)
    assert spread(skew).shortest_db == pytest.approx((0.0, -math.log(0.05)), abs=1e-3)
