"""Drawn instruments against the budget they are drawn from."""

from __future__ import annotations

import numpy as np
import pytest

from simulators import detector, instruments
from simulators.detector import Contribution

DRAWS = 4000


def _errors(*lines: Contribution) -> np.ndarray:
    return np.array(
        [
            instruments.draw(seed, contributions=lines, band_hz=None).errors_db
            for seed in range(DRAWS)
        ]
    )


@pytest.mark.parametrize(
    ("distribution", "value_db", "k", "u_db", "bound_db"),
    [
        ("normal", 0.7, 1.0, 0.7, np.inf),
        ("expanded", 1.4, 2.0, 0.7, np.inf),
        ("rectangular", 0.9, 1.0, 0.9 / np.sqrt(3), 0.9),
        ("triangular", 0.9, 1.0, 0.9 / np.sqrt(6), 0.9),
        ("u_shaped", 0.9, 1.0, 0.9 / np.sqrt(2), 0.9),
    ],
)
def test_deviation_of_each_distribution(distribution, value_db, k, u_db, bound_db) -> None:
    """Standard uncertainties after JCGM 100:2008, 4.3 (U-shaped: H.1.3.4)."""
    errors = _errors(Contribution("line", value_db, distribution, k, shared=False))
    assert errors.std() == pytest.approx(u_db, rel=5 / np.sqrt(2 * 3 * DRAWS))
    assert abs(errors.mean()) < 5 * u_db / np.sqrt(3 * DRAWS)
    assert np.abs(errors).max() <= bound_db


def test_shared_lines_move_all_axes_alike_and_others_do_not() -> None:
    shared = _errors(Contribution("line", 1.0, "normal", 1.0, shared=True))
    assert np.array_equal(shared[:, 0], shared[:, 1])
    own = _errors(Contribution("line", 1.0, "normal", 1.0, shared=False))
    assert abs(np.corrcoef(own.T)[0, 1]) < 5 / np.sqrt(DRAWS)


def test_the_boards_own_budget_with_its_band() -> None:
    """Variances add; the chain's variation over the band is rectangular."""
    board = detector.load()
    divisor = {"rectangular": 3.0, "triangular": 6.0, "u_shaped": 2.0, "normal": 1.0}
    variance = sum(
        (line.value_db / line.k) ** 2
        if line.distribution == "expanded"
        else line.value_db**2 / divisor[line.distribution]
        for line in board.contributions
    )
    variance += board.spread_db(*instruments.BAND_HZ) ** 2 / 3
    errors = np.array([instruments.draw(seed).errors_db for seed in range(DRAWS)])
    assert errors.std(0) == pytest.approx(np.full(3, np.sqrt(variance)), rel=0.05)


def test_a_seed_is_one_instrument() -> None:
    one, again, other = (instruments.draw(seed) for seed in (11, 11, 12))
    assert np.array_equal(one.errors_db, again.errors_db)
    assert one.band_db == again.band_db
    assert not np.array_equal(one.errors_db, other.errors_db)


def test_an_unknown_distribution_is_refused() -> None:
    with pytest.raises(ValueError, match="bell"):
        instruments.draw(1, contributions=[Contribution("line", 1.0, "bell", 1.0, True)])
