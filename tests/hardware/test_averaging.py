"""What each front end declares that it averages, and that none of them averages counts."""

from __future__ import annotations

import ast
import time
from pathlib import Path

import numpy as np
import pytest

from hardware import declared, open_front_end, settings_for
from monitor.config import load_site
from monitor.core.averaging_law import UNDECLARED, Averaging
from monitor.core.errors import ConfigError
from monitor.wiring import averaging_of
from tests.hardware.boards import board, counters, greet, until

HARDWARE = Path(__file__).parents[2] / "hardware"
SMOOTHERS = {"mean", "average", "median", "nanmean", "nanmedian", "convolve", "lfilter", "fmean"}
FILES = {"file": "levels.csv", "level_column": "dbm", "resolution": 0.1}
TEXT = {"device": "/dev/x", "columns": [1], "resolution": 0.1}
IQ = {"file": "a.cu8", "datatype": "cu8", "rate_hz": 1e6, "centre_hz": 9e8, "bands": [[-1e5, 1e5]]}


@pytest.mark.parametrize(
    ("kind", "options", "holds"),
    [
        ("detector_board", {"device": "/dev/x"}, Averaging("none")),
        ("text_lines", TEXT, UNDECLARED),
        ("text_lines", TEXT | {"averages": "log", "averaging_s": 0.5}, Averaging("log", 0.5)),
        ("level_series", FILES, UNDECLARED),
        ("level_series", FILES | {"averages": "none"}, Averaging("none")),
        ("level_series", FILES | {"averages": "power", "averaging_s": 60}, Averaging("power", 60)),
        ("iq_file", IQ, Averaging("power", 0.1)),
        ("iq_file", IQ | {"interval_s": 0.05}, Averaging("power", 0.05)),
    ],
)
def test_what_a_front_end_declares(tmp_path, kind, options, holds):
    """The settings say the same as the options alone, for which no file need be there."""
    assert declared(kind, options) == holds
    for name in ("levels.csv", "a.cu8"):
        (tmp_path / name).write_bytes(b"")
    assert settings_for(kind, options, tmp_path).averaging == holds


@pytest.mark.parametrize(
    "path", sorted(HARDWARE.glob("examples/*-site.toml")), ids=lambda p: p.name
)
def test_every_example_declares(path):
    assert averaging_of(load_site(path)).kind in ("none", "power", "undeclared")


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"averages": "mean"}, "sensor.averages: 'mean' is not one of none, log, power"),
        ({"averages": "log", "averaging_s": -1}, "sensor.averaging_s: -1 is outside"),
        ({"averages": "none", "averaging_s": 1}, "sensor.averaging_s: only where averages is log"),
        ({"averaging_s": 1}, "sensor.averaging_s: only where averages is log or power"),
    ],
)
def test_what_cannot_be_declared(options, words):
    with pytest.raises(ConfigError, match=words):
        declared("text_lines", TEXT | options)


def test_a_board_and_a_receiver_say_it_themselves(tmp_path):
    """Their wire fixes it: an option that says otherwise is not known."""
    (tmp_path / "a.cu8").write_bytes(b"")
    for kind, options in (("detector_board", {"device": "/dev/x"}), ("iq_file", IQ)):
        with pytest.raises(ConfigError, match="unknown key"):
            settings_for(kind, options | {"averages": "log"}, tmp_path)


def test_counts_of_a_board_come_as_they_were_sent(bench, banner):
    """PROTOCOL.md: not averaged. Two levels far apart: a mean of any two would be a third."""
    front_end = board(bench.path)
    greet(bench, front_end, banner)
    sent = np.random.default_rng(3).choice([1000, 3000], (40, 3))
    frames = [";".join(",".join(map(str, row)) for row in part) for part in np.split(sent, 8)]
    bench.send(*(f"FS1 {i} {500 * i} 3 {frame} - -" for i, frame in enumerate(frames)))
    batches = until(front_end, lambda: counters(front_end)["samples"] == 40)
    front_end.close()
    assert np.concatenate([b.counts for b in batches]).tolist() == sent.tolist()


def test_levels_of_a_file_come_one_for_each_row(tmp_path):
    sent = np.random.default_rng(4).choice([-900, -100], 50)
    rows = "".join(f"{i},{count / 10}\n" for i, count in enumerate(sent))
    (tmp_path / "levels.csv").write_text("time,dbm\n" + rows)
    settings = settings_for("level_series", FILES | {"averages": "log"}, tmp_path)
    front_end = open_front_end(settings, 1, time.monotonic_ns, time.time_ns, False)
    read = []
    while not front_end.status().ended:
        read += front_end.read(0.1).counts[:, 0].tolist()
    front_end.close()
    assert read == sent.tolist()


def test_lines_of_a_board_come_one_for_each_line(bench):
    settings = settings_for("text_lines", TEXT | {"device": str(bench.path)}, bench.path.parent)
    front_end = open_front_end(settings, 1, time.monotonic_ns, time.time_ns, False)
    sent = np.random.default_rng(5).choice([-900, -100], 50).tolist()
    read, end = front_end.read(0.0).counts[:, 0].tolist(), time.monotonic() + 5
    bench.send(("cut\n" + "".join(f"{count / 10}\n" for count in sent)).encode())
    while len(read) < 50 and time.monotonic() < end:
        read += front_end.read(0.05).counts[:, 0].tolist()
    front_end.close()
    assert read == sent


def test_a_receiver_averages_power_and_not_decibels(tmp_path):
    """Half of the time 0 dBFS, half of it 40 dB less: -3.01 dBFS, where a mean of dB says -20."""
    n = 50_000
    z = np.where(np.arange(n) < n // 2, 1.0, 0.01).astype("<f4")
    np.column_stack([z, np.zeros_like(z)]).ravel().tofile(tmp_path / "a.cf32")
    options = IQ | {"file": "a.cf32", "datatype": "cf32", "interval_s": 0.05}
    front_end = open_front_end(
        settings_for("iq_file", options, tmp_path), 1, time.monotonic_ns, time.time_ns, False
    )
    (count,) = front_end.read(0.1).counts[0].tolist()
    front_end.close()
    assert count == pytest.approx(-3010, abs=50)


def test_no_front_end_smooths_anything():
    """No call in the folder has a name that says so; a receiver's power is the core's to form."""
    called = {
        (path.name, ast.unparse(node.func).split(".")[-1])
        for path in HARDWARE.glob("*.py")
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
        if isinstance(node, ast.Call)
    }
    assert len(called) > 100
    assert sorted(one for one in called if one[1] in SMOOTHERS) == []
