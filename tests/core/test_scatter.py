"""What sampling misses: against the spread of the mean over thousands of drawn windows."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from monitor.core.blocks import Blocks
from monitor.core.distributions import NORMAL_K
from monitor.core.scatter import of_mean, student_ratio
from monitor.core.windows import Sums, at_block_ends

BLOCK_NS = 10_000_000_000
WINDOWS = 4000


def correlated(rho: float, n: int, seed: int) -> np.ndarray:
    """Readings (WINDOWS, n) about 20, of deviation 1, correlated by rho with their neighbours."""
    rng = np.random.default_rng(seed)
    e = rng.standard_normal((WINDOWS, n))
    x = e.copy()
    for i in range(1, n):
        x[:, i] = rho * x[:, i - 1] + math.sqrt(1 - rho**2) * e[:, i]
    return 20.0 + x


def windows_of(readings: np.ndarray, per_block: int) -> Sums:
    """A window of each row of readings, one channel; readings of equal length fill its blocks."""
    rows, n = readings.shape
    mean = readings.reshape(rows * n // per_block, per_block).mean(axis=1)[:, None]
    size, shape = mean.size, mean.shape
    covered = np.full(shape, BLOCK_NS)
    count = np.full(shape, per_block)
    zero = np.zeros(shape, np.int64)
    blocks = Blocks(0, mean * BLOCK_NS, covered, covered, mean, mean, count, zero)
    wide = n // per_block
    sums = at_block_ends(blocks, wide - 1, wide, BLOCK_NS, batched=True)
    return sums.at(np.arange(0, size - wide + 1, wide))


def scatter(sums: Sums, *, bursty: bool, integration_s: float = 0.0) -> np.ndarray:
    return of_mean(sums, integration_s, np.array([bursty]))[:, 0]


@pytest.mark.parametrize("bursty", [False, True])
def test_independent_readings_by_the_root_of_their_number(bursty: bool) -> None:
    """Standard deviation over the root of N: 0.0527 for 360 readings (derived)."""
    readings = correlated(0.0, 360, 1)
    u = scatter(windows_of(readings, 10), bursty=bursty)
    assert readings.mean(axis=1).std() == pytest.approx(0.0527, rel=0.03)
    inside = np.abs(readings.mean(axis=1) - 20.0) < NORMAL_K * u
    assert 0.94 < inside.mean() < 0.965


@pytest.mark.parametrize(
    ("rho", "inflation"),
    [
        (0.5, 3.0 - 4.0 / 360),
        # 1 + 2 sum over lags of (1 - lag / 360) 0.9^lag: 18.5 (derived)
        (0.9, 18.5),
    ],
)
def test_bursts_that_stay_count_with_their_autocorrelation(rho: float, inflation: float) -> None:
    readings = correlated(rho, 360, 2)
    assert readings.mean(axis=1).var() * 360 == pytest.approx(inflation, rel=0.07)
    sums = windows_of(readings, 10)
    inside = np.abs(readings.mean(axis=1) - 20.0) < NORMAL_K * scatter(sums, bursty=True)
    assert inside.mean() > 0.91
    without = np.abs(readings.mean(axis=1) - 20.0) < NORMAL_K * scatter(sums, bursty=False)
    assert without.mean() < inside.mean()


@pytest.mark.parametrize(("beat_s", "least"), [(300.0, 0.95), (600.0, 0.85)])
def test_readings_that_keep_step_with_pulses_are_caught(beat_s: float, least: float) -> None:
    """Pulses of a quarter of the time, read so nearly in step that a beat lasts minutes: the mean
    of 360 s depends on where it begins, for 600 s by up to the whole of it."""
    start = np.random.default_rng(3).uniform(0.0, beat_s, WINDOWS)
    beat = (start[:, None] + np.arange(3600) / 10.0) % beat_s
    readings = np.where(beat < beat_s / 4.0, 1.0, 0.0)
    sums = windows_of(readings, 100)
    off = np.abs(readings.mean(axis=1) - 0.25)
    known = readings.any(axis=1)
    inside = off < NORMAL_K * scatter(sums, bursty=True)
    blind = off < NORMAL_K * scatter(sums, bursty=False)
    assert inside[known].mean() > least > 0.8 > blind[known].mean()


@pytest.mark.parametrize("bursty", [True, False])
def test_few_readings_of_rare_bursts(bursty: bool) -> None:
    """36 readings of noise that is on for an eighth of the time: without regard to the skew a
    declared band of bursts holds the truth in 84 % (drawn), nearly all misses being too low."""
    rng = np.random.default_rng(11)
    on = rng.random((WINDOWS, 36)) < 0.125
    readings = np.where(on, rng.standard_exponential(on.shape), 0.0) / 0.125
    caught = on.any(axis=1)
    u = scatter(windows_of(readings, 1), bursty=bursty)
    inside = readings.mean(axis=1) + NORMAL_K * u >= 1.0
    assert inside[caught].mean() > (0.95 if bursty else 0.85)


def test_what_is_many_times_smaller_than_the_mean_is_left_as_it_is() -> None:
    """sinh x = x (1 + x^2 / 6): 1e-5 of it at a scatter of four thousandths."""
    readings = correlated(0.0, 360, 5) * 4 / 3
    sums = windows_of(readings, 10)
    turns = np.diff(readings.reshape(WINDOWS, 36, 10).mean(axis=2), axis=1)
    u = np.sqrt((turns**2).sum(axis=1) / (2 * 35 * 36)) * student_ratio(np.array(2 / 3 * 35.0))
    assert scatter(sums, bursty=False) == pytest.approx(u, rel=1e-4)


def test_a_steady_signal_has_none() -> None:
    sums = windows_of(np.full((3, 360), 7.5), 10)
    assert scatter(sums, bursty=False).tolist() == [0.0, 0.0, 0.0]
    assert scatter(sums, bursty=True) == pytest.approx(np.zeros(3), abs=7.5e-7)


def test_readings_that_leave_no_time_between_them_miss_nothing() -> None:
    sums = windows_of(correlated(0.0, 360, 4), 10)
    none = scatter(sums, bursty=False, integration_s=1.0)
    half = scatter(sums, bursty=False, integration_s=0.5)
    whole = scatter(sums, bursty=False)
    assert not none.any()
    assert half == pytest.approx(whole * math.sqrt(0.5))


def test_two_blocks_say_only_that_the_mean_is_not_above_the_maximum() -> None:
    sums = windows_of(np.array([[1.0, 1.0, 3.0, 3.0]]), 2)
    assert scatter(sums, bursty=False) == pytest.approx([3.0 / math.sqrt(3.0)])


@given(st.floats(1.9, 200.0))
def test_the_factor_for_few_is_students(degrees_of_freedom: float) -> None:
    """scipy.stats.t; a house of few digits: within 5 % from 1.9 degrees of freedom on."""
    true = stats.t.ppf(0.975, degrees_of_freedom) / NORMAL_K
    found = float(student_ratio(np.array(degrees_of_freedom)))
    assert found == pytest.approx(true, rel=0.05)
    assert degrees_of_freedom < 5 or found == pytest.approx(true, rel=2e-3)


def test_readings_that_are_none_on_one_channel_do_not_lie_closer_together() -> None:
    """Each a mean over half the time to the next; on one of two channels every second is none."""
    readings = correlated(0.0, 360, 4)[:200]
    one = windows_of(readings, 10)
    half = one.covered_ns // 2
    both = replace(
        one,
        **{name: np.repeat(getattr(one, name), 2, axis=1) for name in Sums.__slots__
           if getattr(one, name).ndim == 2 and name != "covered_ns"},
        covered_ns=np.concatenate([half, one.covered_ns], axis=1),
    )  # fmt: skip
    u = of_mean(both, 0.5, np.array([False, False]))
    assert u[:, 0] == pytest.approx(u[:, 1])
    assert np.all(u[:, 0] > 0.0)
