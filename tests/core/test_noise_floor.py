"""The tracked noise floor, and what is told of it."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest

from monitor.core import noise_floor
from monitor.core.rows import BlockRows

S = 1_000_000_000
NAMES = ("lower", "upper")
NOISE_W = np.array([1e-12, 2e-12])
CHAIN = SimpleNamespace(noise_w=NOISE_W, noise_u_w=0.05 * NOISE_W)


@pytest.mark.parametrize("independent", [20.0, 100.0, 1024.0])
def test_the_quantile_is_that_of_chi_squared(independent):
    stats = pytest.importorskip("scipy.stats")
    exact = stats.chi2.ppf(0.1, 2 * independent) / (2 * independent)
    assert noise_floor.quantile_share(independent) == pytest.approx(exact, rel=2e-4)


def test_the_floor_of_noise_is_its_mean_and_signals_come_and_go_over_it():
    """Drawn: 60 looks at 20 pieces, each a mean of 1024 samples; bursts in four looks of five."""
    rng = np.random.default_rng(1)
    cells = rng.gamma(1024.0, 1.0 / 1024.0, (60, 20))
    assert noise_floor.quiet(cells, 1024.0) == pytest.approx(1.0, abs=0.03)
    cells[rng.random((60, 20)) < 0.8] += 5.0
    found = noise_floor.quiet(cells, 1024.0)
    assert ((found > 0.97) & (found < 1.08)).all()


def rows(start_s, level_w):
    n = len(level_w)
    full = np.full(n, 10 * S)
    return BlockRows(
        np.full(n, start_s * S), np.arange(n), np.array(level_w) * 10.0 * S, full, full,
        np.array(level_w), np.array(level_w), np.full(n, 100), np.zeros(n, np.int64),
    )  # fmt: skip


class Story:
    """Blocks of ten seconds, one after the other."""

    def __init__(self, raised=frozenset(), chain=CHAIN):
        self.state, self.chain = noise_floor.start(2, raised), chain
        self.at_s, self.told = 0, []

    def go(self, seconds, level_w, floor_w):
        for _ in range(seconds // 10):
            self.state, events = noise_floor.step(
                self.state, rows(self.at_s, level_w), np.array(floor_w), self.chain, NAMES
            )
            self.told += [(self.at_s, e.name, e.body["raised"], e.body["text"]) for e in events]
            self.at_s += 10


def test_noise_raised_by_3_db_is_told_after_an_hour_and_taken_back_after_another():
    story = Story()
    story.go(600, 3 * NOISE_W, NOISE_W)
    story.go(4000, 3 * NOISE_W, [2e-12, 2e-12])
    ((at_s, name, raised, text),) = story.told
    assert (at_s, name, raised) == (600 + 3600, noise_floor.ABOVE, True)
    assert text.startswith("lower -87.0 dBm, calibrated -90.0 dBm; ")
    assert "upper" not in text
    story.go(4000, 3 * NOISE_W, NOISE_W)
    assert story.told[1][:3] == (600 + 4000 + 3600, noise_floor.ABOVE, False)


def test_what_lies_within_the_uncertainty_is_not_told():
    """u is 5 %, so 9.9 % is within twice of it and 10.1 % is not."""
    story = Story()
    story.go(8000, 3 * NOISE_W, 1.099 * NOISE_W)
    assert not story.told
    story.go(8000, 3 * NOISE_W, 1.101 * NOISE_W)
    assert [told[1] for told in story.told] == [noise_floor.ABOVE]


def test_lost_gain_is_told():
    story = Story()
    story.go(3700, 3 * NOISE_W, 0.5 * NOISE_W)
    ((at_s, name, raised, _),) = story.told
    assert (at_s, name, raised) == (3600, noise_floor.BELOW, True)


def test_an_antenna_that_drops_off_is_told_within_70_seconds_and_its_return():
    story = Story()
    story.go(700, [1e-9, 1e-10], NOISE_W)
    story.go(300, NOISE_W, NOISE_W)
    ((at_s, name, raised, text),) = story.told
    assert (name, raised) == (noise_floor.VANISHED, True)
    assert at_s - 700 == 60
    assert "lower at -90.0 dBm" in text
    story.go(100, [1e-9, 1e-10], NOISE_W)
    assert story.told[1][1:3] == (noise_floor.VANISHED, False)


def test_one_transmitter_of_two_that_pauses_is_no_loss_nor_is_a_band_that_pauses_often():
    story = Story()
    story.go(700, [1e-9, 1e-10], NOISE_W)
    story.go(300, [1e-9, 2e-12], NOISE_W)
    fickle = Story()
    for _ in range(10):
        fickle.go(300, [1e-9, 1e-10], NOISE_W)
        fickle.go(300, NOISE_W, NOISE_W)
    assert not story.told
    assert not fickle.told


def test_signals_that_fill_everything_are_missed_too_where_the_noise_is_calibrated():
    """The floor is then the signal itself, until it is gone."""
    story = Story()
    story.go(700, [1e-9, 1e-9], [1e-9, 1e-9])
    story.go(100, NOISE_W, NOISE_W)
    assert [told[1:3] for told in story.told] == [(noise_floor.VANISHED, True)]


def test_without_a_calibrated_noise_only_vanishing_is_told():
    story = Story(chain=SimpleNamespace(noise_w=np.zeros(2), noise_u_w=np.zeros(2)))
    story.go(4000, [1e-9, 1e-9], 50 * NOISE_W)
    story.go(100, 50 * NOISE_W, 50 * NOISE_W)
    assert [told[1:3] for told in story.told] == [(noise_floor.VANISHED, True)]


def test_an_alarm_of_the_run_before_stands_until_it_is_over():
    story = Story(raised=frozenset({noise_floor.VANISHED}))
    story.go(600, NOISE_W, NOISE_W)
    assert not story.told
    story.go(100, [1e-9, 1e-9], NOISE_W)
    assert story.told[0][1:3] == (noise_floor.VANISHED, False)


def test_nothing_is_judged_while_the_floor_is_not_known():
    story = Story()
    story.go(8000, [1e-9, 1e-9], [np.nan, np.nan])
    assert not story.told
