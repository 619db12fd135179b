"""Rolling six-minute averages of a day at one reading a second, beside pandas.

Both begin with the same readings, gaps among them, and end with the same averages: checked here
before anything is timed, since a fast wrong answer is worth nothing.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pandas as pd

from monitor.core.series import RollingAverages, rolling_e2
from tests.bench.measure import Figure, compare

S = 1_000_000_000
DAY_S = 86_400
HOLD_S = 3
AVERAGING_S = 360
ALLOWED = 1e-9


def _day() -> tuple[np.ndarray, np.ndarray]:
    """Times (ns) and E squared (V2/m2): noise-like, a tenth of the seconds lost at random."""
    random = np.random.default_rng(20)
    times_s = np.flatnonzero(random.random(DAY_S) > 0.1)
    return times_s * S, random.exponential(4.0, times_s.size)


def _pandas(times_ns: np.ndarray, e2: np.ndarray) -> pd.Series:
    """Filled forward second by second as far as the hold reaches, then pandas' own window."""
    series = pd.Series(e2, index=pd.to_datetime(times_ns))
    seconds = pd.date_range(series.index[0], series.index[-1], freq="1s")
    filled = series.reindex(seconds).ffill(limit=HOLD_S - 1)
    return filled.rolling(f"{AVERAGING_S}s", min_periods=1).mean()


def _ours(times_ns: np.ndarray, e2: np.ndarray, every_s: int) -> RollingAverages:
    return rolling_e2(times_ns, e2, AVERAGING_S * S, every_s * S, HOLD_S * S)


def largest_difference(times_ns: np.ndarray, e2: np.ndarray) -> float:
    """Largest relative difference of the two over all seconds of the day."""
    theirs = _pandas(times_ns, e2)
    ours = _ours(times_ns, e2, 1)
    mean = pd.Series(ours.e2_mean, index=pd.to_datetime(ours.end_ns - S))
    both = pd.concat([theirs, mean], axis=1, join="inner").dropna()
    if len(both) < 0.99 * DAY_S:
        raise ValueError(f"only {len(both)} seconds have both averages")
    return float((both[1] / both[0] - 1).abs().max())


def bench_windows() -> Iterator[Figure]:
    """Averages at every second, and at every minute as a record keeps them."""
    times_ns, e2 = _day()
    difference = largest_difference(times_ns, e2)
    if difference > ALLOWED:
        raise ValueError(f"the averages differ by {difference:.3g}, allowed is {ALLOWED:.0e}")
    yield Figure("largest relative difference between the two", difference, "")
    for every_s, what in ((1, "at every second"), (60, "at every minute")):
        yield compare(
            f"a day's six-minute averages {what}",
            lambda every_s=every_s: _ours(times_ns, e2, every_s),
            lambda: _pandas(times_ns, e2),
            "pandas rolling, every second",
        )
