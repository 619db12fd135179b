"""Floors that a front end tells, in the daemon's alarms; the site and calibration are examples."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from monitor import wiring
from monitor.calparts import read
from monitor.config import load_site
from monitor.core import noise_floor
from monitor.core.quantities import dbm_from_w
from monitor.core.readings import MISSING, DeviceStatus
from monitor.core.rows import BlockRows
from monitor.noise_watch import NoiseWatch

EXAMPLES = Path("hardware/examples")
S = 1_000_000_000


@pytest.fixture
def here(tmp_path):
    """A station with noise of -90 dBm +- 0.2 dB and a drift of -0.04 dB/K from 23 degrees."""
    text = (EXAMPLES / "iq-stream-calibration.toml").read_text()
    added = "noise_dbm = -90\nnoise_u_db = 0.2\n"
    added += "temperature_coefficient_db_per_k = -0.04\nreference_c = 23\n"
    text = text.replace('averages = "power"\n', 'averages = "power"\n' + added)
    (tmp_path / "iq-stream-calibration.toml").write_text(text)
    (tmp_path / "site.toml").write_text((EXAMPLES / "iq-stream-site.toml").read_text())
    site = load_site(tmp_path / "site.toml")
    chain = wiring.chain_for(site, wiring.sensor_settings(site))
    assert read(site.calibration).certificate.id
    return wiring.station_for(site, chain)


def block(start_s):
    full = np.full(2, 10 * S)
    level_w = np.array([1e-9, 1e-9])
    return BlockRows(
        np.full(2, start_s * S), np.arange(2), level_w * 10 * S, full, full, level_w, level_w,
        np.full(2, 100), np.zeros(2, np.int64),
    )  # fmt: skip


def told(watch, status):
    return [e for s in range(0, 3700, 10) for e in watch.look([block(s)], status)]


def test_a_floor_in_counts_is_power_at_the_port_at_its_temperature(here):
    """Source: -78 dBFS less 12 dB is -90 dBm; 12.5 K more read 0.5 dB low, which is put back."""
    watch = NoiseWatch(here, ["lower", "upper"], frozenset())
    floor_w = watch.floor_w(DeviceStatus(True, floors=(-78_000, MISSING)))
    assert dbm_from_w(floor_w[0]) == pytest.approx(-90.0, abs=1e-6)
    assert np.isnan(floor_w[1])
    warm_w = watch.floor_w(DeviceStatus(True, temperature_c=35.5, floors=(-78_000, MISSING)))
    assert dbm_from_w(warm_w[0]) == pytest.approx(-89.5, abs=1e-6)


def test_noise_raised_by_3_db_is_an_alarm_and_the_calibrated_one_is_none(here):
    status = DeviceStatus(True, floors=(-78_000, -78_000))
    assert not told(NoiseWatch(here, ["lower", "upper"], frozenset()), status)
    raised = DeviceStatus(True, floors=(-78_000, -75_000))
    (event,) = told(NoiseWatch(here, ["lower", "upper"], frozenset()), raised)
    assert (event.kind, event.name) == ("alarm", noise_floor.ABOVE)
    assert event.body["text"].startswith("upper -87.0 dBm, calibrated -90.0 dBm")


def test_a_front_end_that_tracks_nothing_raises_nothing(here):
    watch = NoiseWatch(here, ["lower", "upper"], frozenset())
    assert not told(watch, DeviceStatus(True))
