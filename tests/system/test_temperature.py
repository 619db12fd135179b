"""A detector that drifts with temperature: right by its table, off by its coefficient without."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime

import numpy as np
import pytest

from monitor.core import pipeline
from monitor.core.gather import nothing, stack
from monitor.core.readings import MISSING, Batch
from monitor.core.replay import raw_span_ns, window_again
from monitor.core.rows import WindowRows
from monitor.core.station import Station, station
from simulators import climate, detector, scenario
from simulators.source import Setup, Source
from tests.system.test_ratio_coverage import station as nominal

S = 1_000_000_000
SECONDS = 3600
WARM = climate.Climate(
    mean_c=18, swing_c=25, period_s=2000, warmest_s=21_900, db_per_k=0.06, reference_c=23
)
TABLE = np.array([-20.0, 23.0, 55.0]), np.array([-43 * 0.06, 0.0, 32 * 0.06])
BOUND_DB = 0.01
"""Our choice: a tenth of a degree is 0.006 dB, a count 0.027 dB, both rounded 360 times."""


def steady() -> scenario.Scene:
    """A carrier that never changes, so that only the temperature does."""
    found = scenario.load("quiet")
    source = replace(found.transmitters[0], idle_share=1.0, spread=0.0, tdd_duty=1.0)
    return replace(found, transmitters=(source,), bursts=(), climate=WARM)


def came(scene: scenario.Scene) -> tuple[Batch, np.ndarray]:
    """The board's readings with what its frames tell, and the true power at the ports (c,), W."""
    start = datetime(2026, 3, 1, 6, tzinfo=UTC)
    setup = Setup(scene, 4, 1.0, 3, 12, start, 0.0)
    counts = Source(setup).take(0, SECONDS)
    seconds = np.arange(SECONDS)
    told_dc = scene.climate.told_dc(seconds + setup.midnight_s)
    truth = scenario.truth(scene, 4, 0.0, SECONDS, 1.0, setup.midnight_s)
    power_w = detector.port_power_w(truth, detector.load())
    assert np.ptp(power_w, axis=0).max() == 0
    flags = np.zeros(SECONDS, np.int32)
    times_ns = seconds.astype(np.int64) * S
    return Batch(times_ns, counts, flags, int(times_ns[-1]), told_dc), power_w[0]


def corrected(here: Station, tables: tuple) -> Station:
    """The station with temperature tables in its chain."""
    return station(
        replace(here.chain, temperature=tables), here.scopes, here.coefficients, here.least,
        here.watches, hold_s=here.hold_ns / S, silence_s=here.silence_ns / S,
        field_region=here.field_region, outside_excluded=here.outside_excluded,
    )  # fmt: skip


def windows(here: Station, whole: Batch, size: int) -> WindowRows:
    """Full six-minute windows at full minutes, fed in portions of size readings."""
    state, out = pipeline.start(here, 0), nothing()
    for first in range(0, whole.n, size):
        part = whole.part(slice(first, first + size), 0)
        part = replace(part, now_ns=int(part.times_ns[-1]))
        state, found = pipeline.step(state, part, here)
        out.extend(found)
    rows = stack(out.windows)
    assert rows is not None
    full = (rows.averaging_s == 360) & (rows.covered_ns == 360 * S) & (rows.end_ns % (60 * S) == 0)
    return WindowRows(*(getattr(rows, name)[full] for name in WindowRows.__slots__))


def off_db(rows: WindowRows, power_w: np.ndarray) -> np.ndarray:
    """By how much each window's mean power is above the truth, dB (windows, c)."""
    mean_w = rows.energy_w_ns / rows.covered_ns
    return 10 * np.log10((mean_w / power_w[rows.channel]).reshape(-1, power_w.size))


@pytest.fixture(scope="module")
def here(tmp_path_factory: pytest.TempPathFactory) -> Station:
    return nominal(tmp_path_factory.mktemp("nominal"))


def test_the_six_minute_mean_is_right_by_the_table_and_off_without(here: Station) -> None:
    """Off by the mean (in power) of the coefficient times what the board is above 23 degrees."""
    whole, power_w = came(steady())
    tables = TABLE, None, TABLE
    rows = windows(corrected(here, tables), whole, 977)
    ends = rows.end_ns[::3] // S
    assert ends.size > 50
    drift_db = 0.06 * (18 - 23 + 25 * np.cos(2 * np.pi * (np.arange(SECONDS) - 300) / 2000))
    shifted = [10 * np.log10(np.mean(10 ** (drift_db[end - 360 : end] / 10))) for end in ends]
    assert np.ptp(shifted) > 2.0
    off = off_db(rows, power_w)
    assert np.abs(off[:, [0, 2]]).max() < BOUND_DB
    assert np.abs(off[:, 1] - shifted).max() < BOUND_DB
    unknown = replace(whole, temperature_dc=np.full(whole.n, MISSING, np.int32))
    blind = off_db(windows(corrected(here, tables), unknown, 977), power_w)
    assert np.abs(blind - np.array(shifted)[:, None]).max() < BOUND_DB


def test_live_and_replayed_windows_are_equal_to_the_bit(here: Station) -> None:
    """Whatever the portions; and each window from the raw counts of its own span."""
    whole, _ = came(steady())
    fixed = corrected(here, (TABLE, TABLE, TABLE))
    live = windows(fixed, whole, 1)
    assert live.energy_w_ns.tobytes() == windows(fixed, whole, 613).energy_w_ns.tobytes()
    for end_s in (480, 1500, 3000):
        begin_ns, until_ns = raw_span_ns(end_s * S, 360, fixed)
        span = (whole.times_ns >= begin_ns) & (whole.times_ns < until_ns)
        again = window_again(fixed, [whole.part(span, until_ns)], end_s * S, 360)
        assert again is not None
        kept = live.energy_w_ns[live.end_ns == end_s * S]
        assert kept.size == 3
        assert again[0].energy_w_ns.tobytes() == kept.tobytes()
