"""Rolling averages against pandas and against brute-force integration."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.core import series
from monitor.core.errors import ConfigError
from monitor.core.series import rolling_e2

S = 1_000_000_000


def by_pandas(times_s: np.ndarray, e2: np.ndarray, averaging_s: int, hold_s: int) -> pd.DataFrame:
    """pandas' rolling mean of E squared, held forward to one second for at most hold_s."""
    index = pd.to_datetime(times_s, unit="s")
    grid = pd.date_range(index[0], index[-1] + pd.Timedelta(seconds=hold_s), freq="1s")
    held = pd.Series(e2, index=index).reindex(grid).ffill(limit=hold_s - 1)
    rolled = held.rolling(f"{averaging_s}s", min_periods=1)
    return pd.DataFrame({"mean": rolled.mean(), "n": rolled.count(), "max": rolled.max()})


@pytest.mark.parametrize("hold_s", [3, 7, 30])
@pytest.mark.parametrize("averaging_s", [360, 1800])
def test_equals_pandas_with_gaps(averaging_s: int, hold_s: int) -> None:
    rng = np.random.default_rng(hold_s)
    steps = rng.choice([1, 1, 1, 2, 3, 5, 40, 900], 4000)
    times_s = 1_700_000_000 + np.cumsum(steps)
    e2 = rng.lognormal(0.0, 2.0, times_s.size)
    got = rolling_e2(times_s * S, e2, averaging_s * S, 60 * S, hold_s * S)
    frame = by_pandas(times_s, e2, averaging_s, hold_s)
    want = frame.loc[pd.to_datetime(got.end_ns - S)]
    there = want["n"].to_numpy() > 0
    assert there.sum() > 100
    np.testing.assert_allclose(got.e2_mean[there], want["mean"].to_numpy()[there], rtol=1e-9)
    np.testing.assert_allclose(got.e2_max[there], want["max"].to_numpy()[there], rtol=0)
    np.testing.assert_array_equal(np.isnan(got.e2_mean), ~there)
    np.testing.assert_allclose(got.valid_share, want["n"].to_numpy() / averaging_s, rtol=1e-12)


def brute_force(
    times: np.ndarray, e2: np.ndarray, start: int, end: int, hold: int
) -> tuple[float, int]:
    """Integral of the held series over [start, end), reading by reading."""
    energy, covered = 0.0, 0
    for i, t in enumerate(times):
        until = min(t + hold, times[i + 1]) if i + 1 < len(times) else t + hold
        span = max(0, min(until, end) - max(t, start))
        if span and not np.isnan(e2[i]):
            energy += e2[i] * span
            covered += span
    return energy, covered


gaps = st.lists(st.integers(1, 400_000_000_000), min_size=1, max_size=60)


@settings(max_examples=60, deadline=None)
@given(gaps, st.integers(1, 60 * S), st.sampled_from([(360, 60), (30, 7), (60, 60)]), st.data())
def test_irregular_series_equal_brute_force(
    steps: list[int], hold: int, shape: tuple[int, int], data: st.DataObject
) -> None:
    averaging, every = shape[0] * S, shape[1] * S
    times = np.cumsum(np.array(steps, np.int64))
    values = st.one_of(st.just(float("nan")), st.floats(0, 1e6))
    size = len(steps)
    e2 = np.array(data.draw(st.lists(values, min_size=size, max_size=size)))
    got = rolling_e2(times, e2, averaging, every, hold)
    assert len(got.end_ns) == (times[-1] + hold - times[0]) // every
    for end, mean, share in list(zip(got.end_ns, got.e2_mean, got.valid_share))[:40]:
        energy, covered = brute_force(times, e2, end - averaging, end, hold)
        assert share == pytest.approx(covered / averaging, rel=1e-12)
        assert (covered == 0) == np.isnan(mean)
        if covered:
            assert mean == pytest.approx(energy / covered, rel=1e-9, abs=1e-12)


def test_ten_percent_duty_is_power_averaged() -> None:
    """On 10 % of the time, else 40 dB lower: the mean of E squared is 9.996 dB below on.

    10 log(0.1 + 0.9e-4) by arithmetic; the mean of dB would be -36 dB, 26 dB too low.
    """
    times = np.arange(3600) * S
    e2 = np.where(np.arange(3600) % 10 == 0, 100.0, 100.0e-4)
    got = rolling_e2(times, e2, 360 * S, 60 * S, 3 * S)
    full = got.valid_share == 1.0
    below_on_db = 10 * np.log10(got.e2_mean[full] / 100.0)
    np.testing.assert_allclose(below_on_db, 10 * np.log10(0.1 + 0.9e-4), atol=1e-9)
    of_db = np.mean(10 * np.log10(e2[:360] / 100.0))
    assert below_on_db[0] - of_db == pytest.approx(26.0, abs=0.01)


def test_any_chunk_gives_the_same_bits(monkeypatch: pytest.MonkeyPatch) -> None:
    rng = np.random.default_rng(5)
    times = np.cumsum(rng.integers(1, 30, 5000)) * S
    e2 = rng.lognormal(0, 3, 5000)
    whole = rolling_e2(times, e2, 360 * S, 60 * S, 20 * S)
    monkeypatch.setattr(series, "CHUNK", 17)
    parts = rolling_e2(times, e2, 360 * S, 60 * S, 20 * S)
    assert whole.e2_mean.tobytes() == parts.e2_mean.tobytes()
    assert whole.valid_share.tobytes() == parts.valid_share.tobytes()


def test_times_that_do_not_increase_are_refused() -> None:
    with pytest.raises(ConfigError, match="increase"):
        rolling_e2(np.array([0, 5, 5]), np.ones(3), 360, 60, 10)
