"""The board's temperature and its detector's drift, against a stepped model and by hand."""

from __future__ import annotations

import re
from dataclasses import replace
from datetime import UTC, datetime

import numpy as np
import pytest

from simulators import climate, detector, scenario
from simulators.climate import Climate
from simulators.source import Setup, Source
from tests.simulators import desk

HEAD = '[scene]\nname = "test"\nplace = "nowhere (invented)"\nsimulated = true\n'
START = "2026-03-01T06:00:00Z"


def test_warmest_in_the_afternoon_unless_the_scene_says_otherwise() -> None:
    hours = np.array([3.0, 9.0, 15.0, 21.0])
    assert Climate().board_c(3600 * hours) == pytest.approx([15.0, 21.0, 27.0, 21.0])
    assert Climate().told_dc(3600 * hours).tolist() == [150, 210, 270, 210]
    assert np.all(Climate().drift_db(3600 * hours) == 0)
    quick = Climate(mean_c=-5, swing_c=20, period_s=600, warmest_s=60)
    assert quick.board_c(np.array([60.0, 360.0, 660.0])) == pytest.approx([15.0, -25.0, 15.0])


def test_drift_is_so_many_decibels_a_kelvin() -> None:
    """0.04 dB/K times 27 - 23 and 15 - 23 kelvin."""
    drifting = Climate(db_per_k=0.04)
    assert drifting.drift_db(3600 * np.array([15.0, 3.0])) == pytest.approx([0.16, -0.32])


def test_a_lag_is_that_of_first_order() -> None:
    """Against steps of a second of dT/dt = (board - T) / lag, once it has settled."""
    lagging = Climate(mean_c=20, swing_c=10, period_s=3600, warmest_s=0, db_per_k=1.0, lag_s=600)
    times_s = np.arange(0.0, 20_000.0, 0.5)
    board_c = lagging.board_c(times_s + 0.25)
    now_c, found = 20.0, []
    for outside_c in board_c.tolist():
        now_c += (outside_c - now_c) * 0.5 / 600
        found.append(now_c)
    expected = lagging.drift_db(times_s + 0.5) + 23.0
    assert np.abs(np.array(found) - expected)[20_000:].max() < 0.01
    plain = replace(lagging, lag_s=0.0)
    assert np.abs(plain.drift_db(times_s) + 23.0 - lagging.board_c(times_s)).max() < 1e-9


def test_counts_move_with_the_temperature_and_the_truth_does_not() -> None:
    scene = scenario.load("quiet")
    setup = Setup(
        scene=scene, seed=3, rate_hz=1.0, channels=3, bits=16, history_s=0.0,
        start_utc=datetime(2026, 3, 1, 6, tzinfo=UTC),
    )  # fmt: skip
    warm = Climate(mean_c=33.0, swing_c=0.0, db_per_k=0.1)
    moved = Source(replace(setup, scene=replace(scene, climate=warm))).take(0, 500)
    drawn = detector.with_converter(detector.load(), 16, detector.load().volts_per_count / 16)
    power_w = detector.port_power_w(scenario.truth(scene, 3, 0.0, 500, 1.0, 21_600.0), drawn)
    assert np.array_equal(Source(setup).take(0, 500), detector.counts(power_w, drawn, seed=3))
    by_hand = detector.counts(power_w * 10**0.1, drawn, seed=3)  # 10 K of 0.1 dB/K: one decibel
    assert np.abs(moved - by_hand).max() <= 1


def test_frames_tell_the_boards_temperature(tmp_path) -> None:
    source = (
        '\n[[transmitter]]\nname = "one"\nfrequency_hz = 1e9\neirp_w = 1000\ndistance_m = 100\n'
        "polarisation = [1, 2, 2]\n[climate]\nmean_c = 10\nswing_c = 15\nperiod_s = 900\n"
    )
    (tmp_path / "scene.toml").write_text(HEAD + source)
    options = ["--scenario", str(tmp_path / "scene.toml"), "--start-utc", START]
    frames = desk.frames(desk.history(tmp_path, 1800, *options))
    ticks_s = np.array([frame.tick_ms for frame in frames]) / 1000
    expected = 100 + 150 * np.cos(2 * np.pi * (ticks_s + 6 * 3600 - 54_000) / 900)
    assert np.abs(np.array([int(frame.temp) for frame in frames]) - expected).max() <= 0.5 + 1e-9


@pytest.mark.parametrize(
    ("text", "word"),
    [
        ("warm = 3", "'warm' is not one of"),
        ("period_s = 0", "period_s above 0"),
        ("lag_s = -1", "lag_s 0 or more"),
        ("swing_c = 990", "within 999 degrees"),
        ("mean_c = nan", "finite"),
        ('mean_c = "warm"', "could not convert"),
    ],
)
def test_a_climate_that_cannot_be_is_refused(tmp_path, text: str, word: str) -> None:
    (tmp_path / "scene.toml").write_text(f"{HEAD}\n[climate]\n{text}\n")
    with pytest.raises(ValueError, match=re.escape(word)):
        scenario.load(tmp_path / "scene.toml")
    assert climate.read({}) == Climate()
