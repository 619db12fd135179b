"""Ratios and their uncertainty: several bands, a dead axis, a signal anywhere in a wide band."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from monitor.core import pipeline
from monitor.core.budget import Contribution
from monitor.core.calibration import BAND_KIND
from monitor.core.exposure import Verdict
from monitor.core.figures import exposures, fields
from monitor.core.readings import MISSING, Batch
from monitor.core.station import Station, station
from tests.core.stations import SCOPES, chain, made

S = 1_000_000_000


def after(here: Station, counts: list[int], seconds: int = 1900):
    """Windows of 360 s after constant counts."""
    times = np.arange(seconds, dtype=np.int64) * S
    rows = np.tile(np.array(counts, np.int32), (seconds, 1))
    batch = Batch(times, rows, np.zeros(seconds, np.int32), int(times[-1]))
    state, _ = pipeline.step(pipeline.start(here, 0), batch, here)
    return pipeline.live(state, 360, here)


def test_the_ratio_of_two_bands_weighs_uncertainty_by_ratio_and_not_by_field() -> None:
    """u of 0.3 and 1.8 dB at ratios of 0.55 and 0.85: 1.099 dB by hand (GUM 5.1.2 in shares)."""
    base = chain(2)
    lines = [(Contribution(f"band {u}", u, "normal", shared=False),) for u in (0.3, 1.8)]
    two = replace(base, contributions=tuple(lines))
    power_w = 1e-6  # -30 dBm in both
    coefficients = np.array([[0.55 / power_w] * 2, [0.85 / power_w] * 2])
    # the first band is a thousand times the field of the second
    two = replace(two, k=(np.array([1e8]), np.array([1e5])), k_mid=np.array([1e8, 1e5]))
    here = station(
        two, SCOPES, coefficients, coefficients, (),
        hold_s=3, silence_s=30, field_region="far", outside_excluded=True,
    )  # fmt: skip
    sums = after(here, [-30_000, -30_000])
    row = exposures(sums, 360, here)
    assert row.ratio_mean[0] == pytest.approx(1.40, rel=1e-3)
    by_hand = np.hypot(0.3 * 0.55, 1.8 * 0.85) / 1.40
    assert row.u_db[0] / here.k_ratio == pytest.approx(by_hand, rel=1e-3)
    assert row.verdict[0] == Verdict.UNDECIDED  # 1.46 dB above, the guard is 1.80 dB
    field = fields(sums, 360, here)
    assert field.u_db[0] / here.k == pytest.approx(0.3, rel=0.02)


def test_a_dead_axis_leaves_a_lower_figure_that_may_exceed() -> None:
    here = made(3, ratio_per_e2=1.0)
    row = exposures(after(here, [MISSING, 0, 0]), 360, here)
    assert np.isnan(row.ratio_mean[0])
    assert row.ratio_low[0] == pytest.approx(200.0, rel=1e-3)
    assert row.u_db[0] == pytest.approx(1.96, rel=0.01)
    assert row.verdict[0] == Verdict.EXCEEDS


def test_within_a_wide_band_exceeds_needs_the_smallest_response() -> None:
    """The largest response over the band says 1.9, the smallest 0.85: it cannot be decided."""
    base = chain(1)
    lines = (*base.contributions[0], Contribution("band", 3.5 / 2, "rectangular", kind=BAND_KIND))
    wide = replace(base, contributions=(lines,))
    most, least = np.full((1, 2), 1.9e6), np.full((1, 2), 0.85e6)
    here = station(
        wide, SCOPES, most, least, (),
        hold_s=3, silence_s=30, field_region="far", outside_excluded=True,
    )  # fmt: skip
    row = exposures(after(here, [-30_000]), 360, here)
    assert (row.ratio_low[0], row.ratio_mean[0]) == pytest.approx((0.85, 1.9), rel=1e-3)
    assert row.verdict[0] == Verdict.UNDECIDED
    assert row.u_db[0] == pytest.approx(1.96, rel=0.01)  # without the response over the band
