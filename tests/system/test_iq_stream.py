"""A simulated receiver through fieldsill measure: the record holds the true band powers."""

from __future__ import annotations

import hashlib
import json
import os
import re
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from monitor import control
from monitor.core.errors import DeviceError
from monitor.record.reader import Record
from tests.system.commands import fieldsill, filled, start, wait_for

EXAMPLES = Path("hardware/examples")
FULL_SCALE_DBM = -12.0
GAIN_DB = 19.7
AIR = """
[scene]
name = "two bands"
place = "Harrowgate Mill, Tern Hollow (invented)"
simulated = true
[[band]]
name = "lower"
low_hz = 868.0e6
high_hz = 868.6e6
[[band]]
name = "upper"
low_hz = 869.0e6
high_hz = 869.7e6
[[signal]]
name = "mast"
kind = "noise"
frequency_hz = 868.3e6
width_hz = 0.4e6
level_dbm = -48.0
[[signal]]
name = "shared"
kind = "tdd"
frequency_hz = 869.35e6
width_hz = 0.4e6
on_us = 3750
period_us = 5000
level_dbm = -50.0
[receiver]
full_scale_dbm = -12.0
noise_figure_db = 6.0
crystal_ppm = 2.0
"""
FAR = """
[[band]]
name = "pager"
low_hz = 466.0e6
high_hz = 466.4e6
[[signal]]
name = "pager"
kind = "carrier"
frequency_hz = 466.23e6
level_dbm = -45.0
"""
TRUTH_DBFS = (
    -48.0 - FULL_SCALE_DBM + GAIN_DB,
    -50.0 + 10 * np.log10(0.75) - FULL_SCALE_DBM + GAIN_DB,
)


@pytest.fixture
def place(tmp_path):
    """A folder with a site, its calibration and a receiver at work: (folder, simulator)."""
    (tmp_path / "air.toml").write_text(AIR.replace("[receiver]", FAR + "[receiver]"))
    server = subprocess.Popen(
        [
            sys.executable, "-m", "simulators", "iq", "--port", "0", "--air", tmp_path / "air.toml",
            "--control", tmp_path / "iq.sock", "--with-parent",
        ],
        stdout=subprocess.PIPE,
    )  # fmt: skip
    port = json.loads(server.stdout.readline())["port"]
    site = filled(
        (EXAMPLES / "iq-stream-site.toml").read_text(),
        {"port = 1234": f"port = {port}", "simulated = false": "simulated = true"},
    )
    (tmp_path / "site.toml").write_text(site)
    body = (EXAMPLES / "iq-stream-calibration.toml").read_text()
    (tmp_path / "iq-stream-calibration.toml").write_text(body)
    yield tmp_path
    server.kill()
    server.communicate()


def fault(folder, *words):
    """A fault of the receiver, at once."""
    done = subprocess.run(
        [sys.executable, "-m", "simulators", "fault", "--control", folder / "iq.sock", *words],
        capture_output=True, text=True, check=False,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr


def device(folder):
    """What the running daemon says about its receiver; {} before it answers."""
    try:
        return control.ask(folder / "watch.sock", {"do": "now"})["now"]["device"]
    except DeviceError:
        return {}


def child_of(pid):
    """The one process that this one has started."""
    found = []
    for path in Path("/proc").glob("[0-9]*/stat"):
        try:
            stat = path.read_text()
        except OSError:  # gone meanwhile
            continue
        if int(stat.rpartition(")")[2].split()[1]) == pid:
            found.append(int(stat.split()[0]))
    (child,) = found
    return child


def ended(process):
    process.send_signal(signal.SIGTERM)
    assert process.wait(20) == 0


def test_the_record_holds_the_true_powers_and_trouble_is_got_over(place):
    """Source: levels of the air in dBm, less full scale, plus gain; 3 of 4 time slots are on."""
    daemon = start("measure", "--site", place / "site.toml")
    try:
        wait_for(lambda: device(place).get("connected"))
        time.sleep(3.0)
        fault(place, "stall", "--seconds", "4")
        wait_for(lambda: device(place)["counters"]["stalls"] == 1, 8)
        wait_for(lambda: device(place).get("connected"))
        time.sleep(2.0)
    finally:
        ended(daemon)
    with Record.open(place / "watch.db") as record:
        batches = list(record.raw_batches(record.boots()[0].boot))
    times = np.concatenate([b.times_ns for b in batches])
    counts = np.concatenate([b.counts for b in batches])
    assert len(times) > 40
    for channel, truth in enumerate(TRUTH_DBFS):
        mean_dbfs = 10 * np.log10(np.mean(10 ** (counts[:, channel] / 10_000)))
        assert mean_dbfs == pytest.approx(truth, abs=0.1)
    gaps_s = np.diff(times) / 1e9
    assert (gaps_s > 2.0).sum() == 1
    assert np.median(gaps_s) == pytest.approx(0.1, abs=0.001)


def test_check_hears_the_receiver_and_finds_what_cannot_work(place):
    done = fieldsill("check", "--site", place / "site.toml", "--listen", "6")
    assert done.returncode == 0, done.stderr
    assert "iq_stream: can be reached" in done.stdout
    heard = re.search(r"gain 19.7 dB; simulated, ([\d.]+) readings a second", done.stdout)
    assert float(heard.group(1)) == pytest.approx(10.0, abs=0.5)
    good = (place / "site.toml").read_text()
    for old, new, code, words in (
        ("gain_db = 19.7", 'gain_db = "auto"', 2, "automatic gain is refused"),
        ("rate_hz = 2.4e6", "rate_hz = 5e5", 2, "refused by receivers"),
        ("span = 0.8", "span = 0.8\ncentre_hz = 867e6", 2, "outside the span"),
        ('host = "127.0.0.1"', 'host = "127.0.0.2"', 3, "start the receiver's server"),
        ("hold_s = 0.5", "hold_s = 0.05", 2, "the longest from one reading"),
        ("fft = 1024", "fft = 1024\nbands = [[1, 2]]", 2, "the bands are those of [[band]]"),
    ):
        (place / "site.toml").write_text(filled(good, {old: new}))
        done = fieldsill("check", "--site", place / "site.toml", "--listen", "0")
        assert done.returncode == code, (old, done.stdout, done.stderr)
        assert words in done.stderr
        assert len(done.stderr.splitlines()) == 1


def test_each_fault_of_the_server_is_noticed_and_got_over(place):
    """In the times of hardware/IQ.md; the daemon is told why, and measures on."""
    daemon = start("measure", "--site", place / "site.toml")
    try:
        wait_for(lambda: device(place).get("connected"))
        for words, counter, within_s in (
            (["halt", "--seconds", "3"], "stalls", 2.0),
            (["shut"], "closed", 0.0),
            (["absent", "--seconds", "2"], "connect_failures", 0.5),
        ):
            before = device(place)["counters"][counter]
            fault(place, *words)
            wait_for(lambda: device(place)["counters"][counter] > before, within_s + 2.0)  # noqa: B023
            wait_for(lambda: device(place).get("connected"), 15)
        for kind, counter, within_s in (("mislabel", "wrong", 0.5), ("mute", "no_header", 5.5)):
            before = device(place)["counters"][counter]
            fault(place, kind)
            fault(place, "shut")
            wait_for(lambda: device(place)["counters"][counter] > before, within_s + 2.5)  # noqa: B023
            wait_for(lambda: device(place).get("connected"), 15)
    finally:
        ended(daemon)


def test_a_process_that_stood_still_takes_nothing_old_for_new(place):
    """Stopped for 3.5 s, less than it takes to be thought dead; the samples of that time wait."""
    daemon = start("measure", "--site", place / "site.toml")
    try:
        wait_for(lambda: device(place).get("connected"))
        worker = child_of(daemon.pid)
        os.kill(worker, signal.SIGSTOP)
        time.sleep(3.5)
        os.kill(worker, signal.SIGCONT)
        wait_for(lambda: device(place)["counters"].get("stale") == 1, 3)
        wait_for(lambda: device(place).get("connected"))
        assert device(place)["counters"]["worker_starts"] == 1
    finally:
        ended(daemon)


def test_bands_far_apart_are_swept_and_the_record_tells_how_little_was_observed(place):
    """Source: levels of the air; a carrier of -45 dBm at 466 MHz beside the bands at 868 MHz."""
    text = filled(
        (place / "site.toml").read_text(),
        {
            "hold_s = 0.5": "hold_s = 2.0",
            '[[channel]]\nname = "lower"': '[[band]]\nname = "pager"\nlow = "466MHz"\n'
            'high = "466.4MHz"\n\n[[channel]]\nname = "pager"\nband = "pager"\n\n'
            '[[channel]]\nname = "lower"',
        },
    )
    (place / "site.toml").write_text(text)
    calibration = filled(
        (place / "iq-stream-calibration.toml").read_text(),
        {
            '["800MHz", 25.1]': '["400MHz", 20.0], ["800MHz", 25.1]',
            '["500MHz", 0.6]': '["400MHz", 0.5]',
        },
    )
    (place / "iq-stream-calibration.toml").write_text(calibration)
    daemon = start("measure", "--site", place / "site.toml")
    try:
        wait_for(lambda: device(place).get("connected"))
        assert "2 places of the tuner in turn" in device(place)["text"]
        time.sleep(24.0)
    finally:
        ended(daemon)
    with Record.open(place / "watch.db") as record:
        boot = record.boots()[0].boot
        counts = np.concatenate([b.counts for b in record.raw_batches(boot)])
        blocks = record.blocks(boot)
    truths = (-45.0 - FULL_SCALE_DBM + GAIN_DB, *TRUTH_DBFS)
    for channel, truth in enumerate(truths):
        mean_dbfs = 10 * np.log10(np.mean(10 ** (counts[:, channel] / 10_000)))
        assert mean_dbfs == pytest.approx(truth, abs=0.1)
    whole = blocks.covered_ns == 10_000_000_000
    assert whole.sum() >= 3
    share = blocks.observed_ns[whole] / blocks.covered_ns[whole]
    # a round is two places of 0.25 s, a dwell of 0.2 s and up to as much again before it
    assert ((0.1 < share) & (share < 0.25)).all()


def test_a_crossed_level_leaves_a_recording_that_the_record_vouches_for(place):
    """Source: hashes by hashlib; the level is so low that the simulated air is above it."""
    site = (place / "site.toml").read_text()
    (place / "site.toml").write_text(
        filled(site, {"ratio = 0.1": "ratio = 1e-9", "returns_at = 0.08": "returns_at = 1e-10"})
    )
    daemon = start("measure", "--site", place / "site.toml")
    folder = place / "watch.iq"
    try:
        wait_for(lambda: folder.is_dir() and any(folder.glob("*.sigmf-meta")), 30)
        time.sleep(1.0)
    finally:
        ended(daemon)
    with Record.open(place / "watch.db") as record:
        events = record.events()
    kept = [one for one in events if one.kind == "evidence"]
    assert len(kept) == 1
    data = (folder / f"{kept[0].name}.sigmf-data").read_bytes()
    meta = (folder / f"{kept[0].name}.sigmf-meta").read_bytes()
    assert kept[0].body["sha256"] == hashlib.sha256(data).hexdigest()
    assert kept[0].body["meta_sha256"] == hashlib.sha256(meta).hexdigest()
    alarms = {one.name for one in events if one.kind == "alarm" and one.body["raised"]}
    assert set(kept[0].body["alarms"]) <= alarms
    document = json.loads(meta)
    assert document["global"]["fieldsill:simulated"] is True
    labels = {one["core:label"] for one in document["annotations"]}
    assert labels >= {"lower carrier", "upper carrier"}
