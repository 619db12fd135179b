"""The coarse spectrum: its scale, its maximum, what is left out, and its size as a line."""

from __future__ import annotations

import json
import time
from random import Random

import numpy as np
import pytest

from hardware import open_front_end, settings_for
from hardware.iq_picture import EVERY_S, FFT, GROUPS, Picture
from hardware.iq_plan import Part, Tune
from hardware.iq_shown import Shown
from tests.hardware.iq_servers import Server, streams, tone

RATE_HZ = 1_024_000.0
TUNES = (Tune(868_000_000, (Part(0, 1e5, 2e5),)), Tune(900_000_000, (Part(1, 1e5, 2e5),)))
S = 1_000_000_000


def picture():
    return Picture(RATE_HZ, TUNES, Random(1))


def noise(n, rms, seed=1):
    values = np.random.default_rng(seed).normal(0.0, rms / np.sqrt(2), 2 * n)
    return np.clip(np.rint(values * 127.5 + 127.5), 0, 255).astype("u1").tobytes()


def told(made, at_s=EVERY_S):
    return [one["picture"] for one in made.due(round(at_s * S))]


def total_dbfs(levels):
    return 10 * np.log10(sum(10 ** (level / 100) for level in levels if level is not None))


def test_a_tone_stands_in_its_group_with_its_power():
    """Source: amplitude 0.5 is -6.02 dBFS; Hann has all of a tone within four lines of 1 kHz."""
    made = picture()
    made.add(0, tone(100_000, RATE_HZ, 201_500.0), 0)
    (one,) = told(made)
    assert one["mean"].index(max(x for x in one["mean"] if x is not None)) == (512 + 201) // 4
    assert total_dbfs(one["mean"]) == pytest.approx(-6.02, abs=0.1)
    assert total_dbfs(one["max"]) == pytest.approx(-6.02, abs=0.15)
    assert (one["place"], one["centre_hz"]) == (0, 868_000_000)


def test_noise_has_its_power_and_a_burst_shows_in_the_maximum():
    """Source: variance of the samples; 2 of 256 groups are left out (0.03 dB)."""
    made = picture()
    raw = noise(1_000_000, 0.1)
    made.add(0, raw, 0)
    made.add(0, noise(16 * FFT, 0.5, 2), 0)
    (one,) = told(made)
    assert one["looked_s"] == pytest.approx(62 * FFT / RATE_HZ)
    expected = 10 * np.log10((0.1**2 * 61 + 0.5**2) / 62)
    assert total_dbfs(one["mean"]) == pytest.approx(expected, abs=0.25)
    assert total_dbfs(one["max"]) > -6.5


def test_a_steady_offset_is_left_out():
    made = picture()
    made.add(0, bytes([140, 140]) * 50_000, 0)
    (one,) = told(made)
    assert [i for i, level in enumerate(one["mean"]) if level is None] == [127, 128]
    assert max(level for level in one["mean"] if level is not None) < -1000


def test_each_place_has_its_own_and_begins_anew_when_it_was_told():
    made = picture()
    made.add(1, tone(50_000, RATE_HZ, 1e5), 0)
    assert told(made, EVERY_S - 0.1) == []
    (one,) = told(made)
    assert one["place"] == 1
    assert (one["start_ns"], one["end_ns"]) == (0, round(50_000 / RATE_HZ * S))
    assert told(made, 3 * EVERY_S) == []
    made.add(0, b"\x80" * 100, 0)  # too few to look at
    assert told(made, 5 * EVERY_S) == []


def test_it_fits_in_a_line_that_a_pipe_takes_whole():
    """Source: POSIX write(2), a pipe takes up to PIPE_BUF, 4096 on Linux, whole or not at all."""
    made = picture()
    made.add(0, b"\x7f\x80" * 100_000, 0)
    (one,) = made.due(round(EVERY_S * S))
    assert len(one["picture"]["mean"]) == len(one["picture"]["max"]) == GROUPS
    assert len(json.dumps(one, separators=(",", ":")).encode()) < 4096


def test_readings_are_shown_with_the_spectrum_that_came_after_them():
    """Source: the mean of 0 dB and 10 log 3 dB is 10 log 2 dB, by hand."""
    shown = Shown()
    assert shown.view == {"places": [], "readings": None}
    shown.note(5, 7, [0, -1000], 1)
    shown.note(7, 9, [round(1e4 * np.log10(3)), -1000], 4)
    before = shown.view
    shown.take({"place": 1, "mean": []})
    assert before["readings"] is None
    found = shown.view["readings"]
    assert (found["n"], found["start_ns"], found["end_ns"], found["flags"]) == (2, 5, 9, 5)
    assert found["mean"] == [round(1e4 * np.log10(2)), -1000]
    assert found["max"] == [round(1e4 * np.log10(3)), -1000]
    shown.take({"place": 0, "mean": [1]})
    assert [one["place"] for one in shown.view["places"]] == [0, 1]
    assert shown.view["readings"] == found  # none came since


def test_a_receiver_at_work_shows_its_spectrum(tmp_path):
    server = Server(streams())
    options = {
        "host": "127.0.0.1", "port": server.port, "rate_hz": 1e6, "gain_db": 19.7,
        "bands": [[868.0e6, 868.2e6], [868.4e6, 868.6e6]],
    }  # fmt: skip
    front = open_front_end(
        settings_for("iq_stream", options, tmp_path), 2, time.monotonic_ns, time.time_ns, False
    )
    try:
        end = time.monotonic() + 20.0
        while not (front.shown()["places"] and front.shown()["readings"]):
            assert time.monotonic() < end, front.status()
            front.read(0.2)
    finally:
        front.close()
        server.close()
    (one,) = front.shown()["places"]
    strongest = one["mean"].index(max(x for x in one["mean"] if x is not None))
    assert strongest == int((100e3 + 0.5e6) / 1e6 * GROUPS)
    assert total_dbfs(one["mean"]) == pytest.approx(-6.02, abs=0.15)
    assert 0.02 < one["looked_s"] / ((one["end_ns"] - one["start_ns"]) / S) < 0.1
