"""Samples round a moment, kept as a recording by the receiver's own process."""

from __future__ import annotations

import hashlib
import json
import time

import numpy as np
import pytest
from scipy import signal as dsp

from hardware import open_front_end, settings_for
from hardware.iq_keep import MOST_WAITING, Keeper, recording_bytes
from hardware.iq_plan import Part, Tune
from hardware.iq_ring import Ring
from monitor.core.errors import ConfigError
from monitor.core.readings import empty_batch, joined
from tests.hardware.iq_servers import Server, streams, tone
from tests.hardware.test_sigmf_write import keys_follow_the_schema

RATE_HZ = 1_000_000
BANDS = [[868.0e6, 868.2e6], [868.4e6, 868.6e6]]
OPTIONS = {"host": "127.0.0.1", "rate_hz": RATE_HZ, "gain_db": 19.7, "bands": BANDS}
STEP = 5 * RATE_HZ
"""Number of the sample from which on the carrier is stronger."""


def boot_ns():
    return time.clock_gettime_ns(time.CLOCK_BOOTTIME)


def steps(centre, rate, first, n):
    """A carrier in the upper band, 20 dB stronger from sample STEP on, in noise."""
    number = first + np.arange(n)
    z = np.where(number >= STEP, 0.5, 0.05) * np.exp(2j * np.pi * 160e3 / rate * number)
    rng = np.random.default_rng(first)
    z = z + rng.normal(0.0, 0.02, n) + 1j * rng.normal(0.0, 0.02, n)
    both = np.column_stack([z.real, z.imag]).ravel()
    return np.clip(np.rint(both * 127.5 + 127.5), 0, 255).astype("u1").tobytes()


@pytest.fixture
def at(tmp_path):
    made = []

    def make(*scripts, **options):
        server = Server(*scripts)
        settings = settings_for("iq_stream", OPTIONS | {"port": server.port} | options, tmp_path)
        front = open_front_end(settings, len(settings.bands), boot_ns, time.time_ns, True)
        made.extend([front, server])
        return front

    yield make
    for one in made:
        one.close()


def wanted(folder, at_ns, **own):
    return {
        "at_ns": at_ns, "folder": str(folder / "watch.iq"), "label": "x", "names": ["lower", "up"],
        "why": "went over: a tenth", "utc_offset_ns": time.time_ns() - boot_ns(),
        "simulated": True, "recorder": "fieldsill",
    } | own  # fmt: skip


def until(front, what, channels=2, seconds=20.0):
    end = time.monotonic() + seconds
    batches = [empty_batch(channels, 0)]
    while not what(batches):
        assert time.monotonic() < end, front.status()
        batches.append(front.read(0.2))
    return joined(batches)


def answer(front, channels=2):
    """The next answer to a request; (answer, readings on the way)."""
    said = []

    def heard(_):
        said.extend(front.kept())
        return said

    batch = until(front, heard, channels)
    return said, batch


def power_dbfs(raw, low_hz, high_hz):
    """Of bytes, in a band from the centre, by scipy's Welch; source: definition of cu8."""
    z = np.frombuffer(raw, "u1").astype(np.float64) - 127.5
    z = (z[::2] + 1j * z[1::2]) / 127.5
    hz, density = dsp.welch(
        z, RATE_HZ, "hann", 4096, return_onesided=False, detrend=False, scaling="density"
    )
    inside = (hz >= low_hz) & (hz < high_hz)
    return 10 * np.log10(density[inside].sum() * RATE_HZ / 4096)


def test_a_second_round_the_moment_is_kept_and_agrees_with_the_readings(at, tmp_path):
    """Source: the file's bytes by scipy, within 0.1 dB of the readings that it covers."""
    front = at(streams(make=steps))
    before = until(front, lambda got: got[-1].n and got[-1].counts[-1, 1] > -10_000)
    stepped_ns = int(before.times_ns[np.flatnonzero(before.counts[:, 1] > -10_000)[0]])
    assert front.keep(wanted(tmp_path, stepped_ns))
    said, after = answer(front)
    (kept,) = (one["kept"] for one in said)
    batch = joined([before, after])
    data = (tmp_path / "watch.iq" / f"{kept['name']}.sigmf-data").read_bytes()
    meta = (tmp_path / "watch.iq" / f"{kept['name']}.sigmf-meta").read_bytes()
    document = json.loads(meta)
    keys_follow_the_schema(document)
    assert kept["sha256"] == hashlib.sha256(data).hexdigest()
    assert kept["meta_sha256"] == hashlib.sha256(meta).hexdigest()
    assert kept["covers"] is True
    assert document["global"]["core:sample_rate"] == pytest.approx(RATE_HZ, rel=1e-6)
    assert kept["samples"] == len(data) // 2 == pytest.approx(RATE_HZ, rel=1e-6)
    assert "SIMULATED" in document["global"]["core:description"]
    labels = [one["core:label"] for one in document["annotations"]]
    assert labels == ["lower", "up", "alert"]
    mark = document["annotations"][-1]["core:sample_start"]
    assert mark == len(data) // 4
    z = np.abs(np.frombuffer(data, "u1").astype(float) - 127.5).reshape(-1, 2).max(axis=1)
    risen = int(np.flatnonzero(z > 0.3 * 127.5)[0])
    assert 0 <= risen - mark <= 0.11 * RATE_HZ  # within the reading that told of it
    (capture,) = document["captures"]
    centre = capture["core:frequency"]
    for at_share, part in ((0.0, slice(0, mark)), (0.65, slice(int(0.65 * RATE_HZ), None))):
        start_ns = capture["fieldsill:boot_ns"] + at_share * 1e9
        end_ns = capture["fieldsill:boot_ns"] + (0.4e9 if at_share == 0.0 else 1e9)
        inside = (batch.times_ns >= start_ns) & (batch.times_ns + 100_000_000 <= end_ns)
        assert inside.sum() >= 2
        read = 10 * np.log10(np.mean(10 ** (batch.counts[inside, 1] / 10_000)))
        raw = data[2 * part.start : 2 * part.stop if part.stop else None]
        low, high = (edge - centre for edge in BANDS[1])
        assert power_dbfs(raw, low, high) == pytest.approx(read, abs=0.1)


def test_places_of_the_tuner_are_captures_of_their_own_with_their_bands(at, tmp_path):
    far = [BANDS[0], [900.0e6, 900.2e6]]
    front = at(streams(), bands=far, dwell_s=0.1, settle_s=0.1)
    until(front, lambda got: sum(one.n for one in got) >= 3)
    assert front.keep(wanted(tmp_path, boot_ns() - 600_000_000, utc_offset_ns=None))
    ((said,), _) = answer(front)
    meta = tmp_path / "watch.iq" / f"{said['kept']['name']}.sigmf-meta"
    document = json.loads(meta.read_text())
    keys_follow_the_schema(document)
    assert len(document["captures"]) >= 5
    assert not any("core:datetime" in one for one in document["captures"])
    starts = {one["core:sample_start"]: one["core:frequency"] for one in document["captures"]}
    for one in document["annotations"]:
        if one["core:label"] != "alert":
            centre = starts[one["core:sample_start"]]
            low, high = one["core:freq_lower_edge"], one["core:freq_upper_edge"]
            assert abs(low - centre) < RATE_HZ / 2
            assert [low, high] == far[0 if one["core:label"] == "lower" else 1]


def test_the_budget_holds_and_every_removal_is_told(at, tmp_path):
    budget_mb = 2.4 * recording_bytes(RATE_HZ) / 1e6
    front = at(streams(), evidence_mb=budget_mb)
    until(front, lambda got: sum(one.n for one in got) >= 5)
    removed = []
    for _ in range(4):
        assert front.keep(wanted(tmp_path, boot_ns()))
        said, _ = answer(front)
        while not any("kept" in one for one in said):
            said += answer(front)[0]
        removed += [one["removed"]["name"] for one in said if "removed" in one]
        size = sum(path.stat().st_size for path in (tmp_path / "watch.iq").iterdir())
        assert size <= budget_mb * 1e6
    assert removed == ["000001-x", "000002-x"]
    assert len(list((tmp_path / "watch.iq").glob("*.sigmf-meta"))) == 2


def test_what_cannot_be_written_is_told_with_the_reason_and_readings_go_on(at, tmp_path):
    (tmp_path / "watch.iq").write_text("in the way")
    front = at(streams())
    until(front, lambda got: sum(one.n for one in got) >= 2)
    front.keep(wanted(tmp_path, boot_ns()))
    ((said,), _) = answer(front)
    assert "File exists" in said["kept"]["why"]
    until(front, lambda got: sum(one.n for one in got) >= 5)
    assert front.status().counters["worker_ended"] == 0


def test_readings_do_not_wait_for_a_request_and_no_sample_is_lost(at, tmp_path):
    front = at(streams())
    until(front, lambda got: sum(one.n for one in got) >= 3)
    for _ in range(MOST_WAITING):
        began = time.monotonic()
        assert front.keep(wanted(tmp_path, boot_ns()))
        assert time.monotonic() - began < 0.05
        until(front, lambda got: sum(one.n for one in got) >= 3)
    until(front, lambda _: front.kept())
    counters = front.status().counters
    assert (counters["lost_samples"], counters["unsaid"], counters["stale"]) == (0, 0, 0)


def test_without_a_budget_nothing_is_kept(at):
    assert at(streams(), evidence_mb=0).keeps is False
    assert at(streams()).keeps is True


def test_a_budget_for_less_than_one_recording_is_refused(tmp_path):
    with pytest.raises(ConfigError, match=r"sensor.evidence_mb: 1 holds no recording.*2.1 MB"):
        settings_for("iq_stream", OPTIONS | {"evidence_mb": 1}, tmp_path)


def test_too_many_requests_and_no_samples_are_told(tmp_path):
    tunes = (Tune(868_000_000, (Part(0, -1e5, 1e5),)),)
    keeper = Keeper(Ring(1e6, 3.0), 1e6, tunes, 10_000_000, "receiver")
    for at_s in range(MOST_WAITING + 1):
        keeper.ask(wanted(tmp_path, round(at_s * 1e9)))
    (refused,) = keeper.said()
    assert "too many" in refused["kept"]["why"]
    keeper.turn(round(2.5e9))  # the first has waited for long enough
    keeper.close()
    (refused,) = keeper.said()
    assert refused == {"kept": {"at_ns": 0, "why": "no samples came"}}


def test_the_second_half_is_waited_for(tmp_path):
    tunes = (Tune(868_000_000, (Part(0, -1e5, 1e5),)),)
    ring = Ring(1e6, 3.0)
    keeper = Keeper(ring, 1e6, tunes, 10_000_000, "receiver")
    for i in range(15):
        ring.add(tone(100_000, 1e6, 1e5), round(i * 1e8), 0, i * 100_000)
        if i == 9:
            keeper.ask(wanted(tmp_path, round(0.98e9)))
        keeper.turn(round(i * 1e8))
    keeper.close()
    (said,) = keeper.said()
    assert said["kept"]["samples"] == 1_000_000
    assert said["kept"]["start_ns"] == round(0.48e9)
    assert said["kept"]["name"] == "000001-x"
