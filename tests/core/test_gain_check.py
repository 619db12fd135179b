"""Levels that move as the gain does, and others."""

from __future__ import annotations

import numpy as np
import pytest

from monitor.core.gain_check import judged, moved


def test_a_steady_drift_cancels_and_scatter_widens():
    at = np.arange(11)
    steady = np.where(at % 2, -47.2, -40.0) + 0.3 * at
    found = moved(steady[:, None])
    assert found.db == pytest.approx([-7.2])
    assert found.u_db == pytest.approx([0.0], abs=1e-9)


def test_the_true_move_lies_within_u_in_95_of_100():
    """Drawn: 4000 checks of a level that scatters by 0.4 dB from stretch to stretch."""
    rng = np.random.default_rng(5)
    levels = np.where(np.arange(11) % 2, -7.0, 0.0)[:, None] + 0.4 * rng.standard_normal((11, 4000))
    found = moved(levels)
    inside = np.mean(np.abs(found.db + 7.0) <= found.u_db)
    assert 0.94 <= inside <= 0.985


@pytest.mark.parametrize(
    ("moved_db", "u_db", "calibrated", "least", "said"),
    [
        (-7.2, 0.0, True, -60.0, "as the gain"),
        (-7.6, 0.0, True, -60.0, "as the gain"),
        (-7.8, 0.0, True, -60.0, "more"),
        (-6.6, 0.0, True, -60.0, "less"),
        (-6.6, 0.2, True, -60.0, "as the gain"),
        (-6.6, 0.0, False, -60.0, "as the gain"),
        (-21.6, 0.5, False, -60.0, "more"),
        (0.0, 0.1, False, -60.0, "less"),
        (0.0, 0.1, False, -70.1, "too weak to tell"),
    ],
)
def test_what_a_move_says(moved_db, u_db, calibrated, least, said):
    """Step -7.2 dB, noise -80 dBFS; 0.5 dB is allowed where calibrated, 1.5 where not."""
    found = judged(moved_db, u_db, -7.2, calibrated=calibrated, least_dbfs=least, floor_dbfs=-80.0)
    assert found.said == said
    assert found.suspected == (said in ("more", "less"))


def test_a_step_up_is_judged_alike():
    for moved_db, said in ((21.6, "more"), (7.2, "as the gain"), (1.0, "less")):
        found = judged(moved_db, 0.1, 7.2, calibrated=True, least_dbfs=-60.0, floor_dbfs=-80.0)
        assert found.said == said


def test_without_a_known_floor_nothing_is_said():
    found = judged(0.0, 0.1, 7.2, calibrated=True, least_dbfs=-60.0, floor_dbfs=float("nan"))
    assert found.said == "too weak to tell"
