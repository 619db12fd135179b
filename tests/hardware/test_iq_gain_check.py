"""The receiver steps its gain on purpose, against the simulated receiver on a socket."""

from __future__ import annotations

import json
import time
from random import Random

import numpy as np
import pytest

from hardware import iq_gain_check, settings_for
from hardware.iq_gain_check import GainCheck
from hardware.iq_receiver import Receiver
from hardware.iq_worker import settings_text, work_of
from monitor.core.errors import ConfigError
from tests.simulators.radio import radio

BANDS = [[868.0e6, 868.4e6], [868.6e6, 869.0e6], [869.3e6, 869.7e6]]
OPTIONS = {
    "host": "127.0.0.1", "rate_hz": 2.4e6, "gain_db": 19.7, "bands": BANDS,
    "gain_check_h": 0.05, "gain_check_db": 12.5,
}  # fmt: skip
AIR = """
[scene]
name = "three bands"
place = "Harrowgate Mill, Tern Hollow (invented)"
simulated = true
[[band]]
name = "signal"
low_hz = 868.0e6
high_hz = 868.4e6
[[signal]]
name = "mast"
kind = "noise"
frequency_hz = 868.2e6
width_hz = 0.3e6
level_dbm = -48.0
[[spur]]
frequency_hz = 868.8e6
level_dbfs = -20.0
slope = 3.0
[[spur]]
frequency_hz = 869.5e6
level_dbfs = -30.0
slope = 0.0
[receiver]
full_scale_dbm = -12.0
noise_figure_db = 30.0
"""
S = 1_000_000_000


def test_signals_products_and_own_lines_move_each_in_their_way(tmp_path, monkeypatch):
    """Source: the simulator's steps of 19.7 and 12.5 dB; slopes of its spurs are 3 and 0."""
    monkeypatch.setattr(iq_gain_check, "EARLIEST_NS", 0)
    (tmp_path / "air.toml").write_text(AIR)
    with radio(tmp_path, "--air", str(tmp_path / "air.toml")) as served:
        host, port = served.address
        settings = settings_for("iq_stream", OPTIONS | {"host": host, "port": port}, tmp_path)
        receiver = Receiver(settings.radio, settings.scheme, time.monotonic_ns, 1)
        receiver._check._due_ns = time.monotonic_ns() + 3 * S  # noqa: SLF001 - else minutes
        readings, done, until = [], [], time.monotonic() + 60
        while not done and time.monotonic() < until:
            readings += receiver.work(0.2)
            done += receiver.checked()
        end = time.monotonic() + 2
        while time.monotonic() < end:
            readings += receiver.work(0.2)
        gain = served.state()["gain_db"]
        receiver.close()
    (found,) = done
    # 0.2 dB: the noise that is left beside the weakest
    assert found["moved_db"] == pytest.approx([-7.2, -21.6, 0.0], abs=0.25)
    assert max(found["u_db"]) < 0.2
    assert max(share or 0.0 for share in found["image_shares"]) < 0.01
    assert len(found["image_shares"]) == 3
    assert gain == 19.7
    levels = np.array([reading.counts for reading in readings])
    assert np.ptp(levels, axis=0).max() < 700, "no reading may be of the other gain"
    starts_ns = np.array([reading.start_ns for reading in readings])
    gaps_s = np.diff(starts_ns) / 1e9
    assert (gaps_s > 0.2).sum() == 1
    assert gaps_s.max() == pytest.approx(11 * 1.25, abs=1.5)
    assert receiver.counters["check_readings"] == 110
    assert receiver.counters["gain_checks"] == 1


def check(seed, every_h=1.0):
    return GainCheck(every_h, 19.7, 12.5, 1, 0, Random(seed))


def test_each_period_has_one_at_random():
    begun = {seed: [] for seed in range(30)}
    for seed, at in begun.items():
        one = check(seed)
        for second in range(4 * 3600 + 1):
            if one.due(second * S):
                one.begin(second * S)
                one.active = False
                at.append(second)
    for at in begun.values():
        assert [(second - 1) // 3600 for second in at] == [0, 1, 2, 3]
    firsts = [at[0] for at in begun.values()]
    assert min(firsts) >= 60
    assert np.ptp(firsts) > 1800


def test_a_check_that_broke_off_comes_again_in_ten_minutes():
    one = check(1, every_h=24.0)
    one.begin(0)
    assert one.take(np.ones(2), (0, 0)) == 12.5
    one.give_up(100 * S)
    assert not one.active
    assert not one.due(699 * S)
    assert one.due(700 * S)
    assert not one.done


def test_the_process_is_told(tmp_path):
    settings = settings_for("iq_stream", OPTIONS, tmp_path)
    text = settings_text(settings.radio, settings.scheme)
    assert json.loads(text)["scheme"][-2:] == [0.05, 12.5]
    receiver = work_of(text, lambda: 0).receiver
    assert receiver._check is not None  # noqa: SLF001
    receiver.close()


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"gain_check_db": 19.0}, "gain_check_db: 19 must be 3 to 20 dB below or above gain_db"),
        ({"gain_check_h": 0.01}, "gain_check_h: 0.01 is below 0.05; 0 is never"),
        ({"gain_check_db": 12.55}, "gain_check_db: 12.55 is finer than a tenth"),
    ],
)
def test_what_makes_no_check_is_refused(tmp_path, changes, words):
    with pytest.raises(ConfigError) as caught:
        settings_for("iq_stream", OPTIONS | changes, tmp_path)
    assert words in str(caught.value)


def test_it_is_off_unless_asked_for(tmp_path):
    own = {key: value for key, value in OPTIONS.items() if not key.startswith("gain_check")}
    assert settings_for("iq_stream", own, tmp_path).scheme.check_h == 0.0
