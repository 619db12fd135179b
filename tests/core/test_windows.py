"""Windows that end inside a block: estimates within bounds that hold wherever the readings lay."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.core import pipeline
from monitor.core.figures import powers, valid_share
from monitor.core.readings import MISSING, Batch
from tests.core.stations import made

S = 1_000_000_000
AVERAGING_S = 360


def exact(times_s: np.ndarray, power_w: np.ndarray, end_s: float, hold_s: float) -> tuple:
    """Energy (W s), valid time (s) and largest power of [end - 360 s, end), reading by reading."""
    until = np.minimum(np.append(times_s[1:], times_s[-1] + hold_s), times_s + hold_s)
    span = np.clip(np.minimum(until, end_s) - np.maximum(times_s, end_s - AVERAGING_S), 0, None)
    span = np.where(np.isnan(power_w), 0.0, span)
    there = span > 0
    return (np.nan_to_num(power_w) * span).sum(), span.sum(), power_w[there].max(initial=0.0)


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 10_000), st.floats(0, 0.6))
def test_bounds_hold_against_the_exact_window(seed: int, missing: float) -> None:
    """low <= truth and truth <= high, and no more valid time than there was, gaps or none."""
    rng = np.random.default_rng(seed)
    times_s = np.cumsum(rng.choice([0.7, 1.0, 2.3, 6.0, 31.0], 700, p=[0.3, 0.4, 0.2, 0.08, 0.02]))
    counts = rng.integers(-60_000, -10_000, (times_s.size, 1)).astype(np.int32)
    counts[rng.random(times_s.size) < missing] = MISSING
    power_w = np.where(counts[:, 0] == MISSING, np.nan, 1e-3 * 10.0 ** (counts[:, 0] / 10_000))
    here = made(1)
    state = pipeline.start(here, 0)
    times_ns = np.rint(times_s * S).astype(np.int64)
    flags = np.zeros(times_s.size, np.int32)
    for first in range(0, times_s.size, 13):
        last = min(first + 13, times_s.size)
        part = slice(first, last)
        batch = Batch(times_ns[part], counts[part], flags[part], int(times_ns[last - 1]))
        state, _ = pipeline.step(state, batch, here)
        sums = pipeline.live(state, AVERAGING_S, here)
        if not sums.present[0]:
            continue
        figures = powers(sums, AVERAGING_S, here)
        energy, valid_s, largest = exact(times_s[:last], power_w[:last], times_s[last - 1], 3.0)
        assert figures.low[0, 0] * AVERAGING_S <= energy * (1 + 1e-9) + 1e-18
        assert valid_share(sums, AVERAGING_S)[0] <= valid_s / AVERAGING_S + 1e-9
        if valid_s > 0 and not np.isnan(figures.high[0, 0]):
            at_most = energy + (AVERAGING_S - valid_s) * largest
            assert figures.high[0, 0] * AVERAGING_S >= at_most * (1 - 1e-9)
