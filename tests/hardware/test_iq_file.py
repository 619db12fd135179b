"""Recorded I/Q: every kind of sample, intervals, clipping, pairs with a header, real recordings."""

from __future__ import annotations

import json
import os
import time

import numpy as np
import pytest

from hardware import open_front_end, settings_for
from monitor.core.errors import ConfigError, DeviceError
from monitor.core.flags import Flag
from monitor.core.readings import MISSING

RATE_HZ = 100_000.0
CENTRE_HZ = 9e8
KINDS = {
    "cu8": lambda z: np.rint(z * 127.5 + 127.5).astype("u1"),
    "cs8": lambda z: np.rint(z * 128).astype("i1"),
    "cs16": lambda z: np.rint(z * 32768).astype("<i2"),
    "cf32": lambda z: z.astype("<f4"),
}


def tone(n, amplitude=0.5, hz=12_500.0):
    """I and Q interleaved of a tone in the middle of a bin of 1024 at 100 kHz."""
    z = amplitude * np.exp(2j * np.pi * hz * np.arange(n) / RATE_HZ)
    return np.column_stack([z.real, z.imag]).ravel()


_opened = []


@pytest.fixture(autouse=True)
def _files_are_let_go():
    yield
    while _opened:
        _opened.pop().close()


def iq(path, bands=((-50_000, 50_000),), clock_ns=time.monotonic_ns, simulated=False, **options):
    own = {"file": path.name, "bands": [list(band) for band in bands], "centre_hz": CENTRE_HZ}
    settings = settings_for("iq_file", own | options, path.parent)
    _opened.append(open_front_end(settings, len(bands), clock_ns, time.time_ns, simulated))
    return _opened[-1]


def all_of(front_end):
    batches = []
    while not front_end.status().ended:
        batches.append(front_end.read(0.1))
        assert len(batches) < 1000
    return [b for b in batches if b.n]


@pytest.mark.parametrize("kind", KINDS)
def test_a_tone_of_half_scale_reads_minus_six_decibels_in_its_band(tmp_path, kind):
    """Source: 10 log 0.25 = -6.0206 dB, by hand; the other band holds rounding noise only."""
    path = tmp_path / "a.iq"
    path.write_bytes(KINDS[kind](tone(30_000)).tobytes())
    bands = ((10_000, 15_000), (-15_000, -10_000))
    front_end = iq(path, bands, datatype=kind, rate_hz=RATE_HZ, interval_s=0.1)
    batches = all_of(front_end)
    assert [int(b.times_ns[0]) for b in batches] == [0, 100_000_000, 200_000_000]
    for batch in batches:
        assert abs(int(batch.counts[0, 0]) + 6021) <= (60 if kind in ("cu8", "cs8") else 2)
        assert batch.counts[0, 1] < -45_000
        assert batch.flags.tolist() == [0]
    assert batches[-1].now_ns == 300_000_000
    assert front_end.status().ended
    assert front_end.owns_clock


def test_only_the_interval_that_clips_is_flagged(tmp_path):
    path = tmp_path / "a.cs8"
    loud = np.concatenate([tone(10_000, 0.5), tone(10_000, 0.5), tone(10_000, 0.5)])
    loud[30_001] = 127 / 128
    path.write_bytes(KINDS["cs8"](loud).tobytes())
    batches = all_of(iq(path, datatype="cs8", rate_hz=RATE_HZ, interval_s=0.1, simulated=True))
    flags = [int(b.flags[0]) for b in batches]
    marked = int(Flag.SIMULATED)
    assert flags == [marked, marked | Flag.CLIPPED, marked]


def test_the_rest_at_the_end_counts_if_a_segment_fits(tmp_path):
    path = tmp_path / "a.cf32"
    path.write_bytes(KINDS["cf32"](tone(11_500)).tobytes() + b"\0\0\0")
    front_end = iq(path, datatype="cf32", rate_hz=RATE_HZ, interval_s=0.1)
    batches = all_of(front_end)
    assert [b.now_ns for b in batches] == [100_000_000, 115_000_000]
    assert front_end.status().counters["samples_left_out"] == 0
    front_end = iq(path, datatype="cf32", rate_hz=RATE_HZ, interval_s=0.11)
    assert len(all_of(front_end)) == 1
    assert front_end.status().counters["samples_left_out"] == 500


def test_no_signal_at_all_is_missing_and_not_a_number(tmp_path):
    path = tmp_path / "a.cs16"
    path.write_bytes(bytes(4 * 10_000))
    assert all_of(iq(path, datatype="cs16", rate_hz=RATE_HZ))[0].counts.tolist() == [[MISSING]]


def test_an_empty_file_ends_at_once(tmp_path):
    path = tmp_path / "a.cs16"
    path.write_bytes(b"")
    front_end = iq(path, datatype="cs16", rate_hz=RATE_HZ)
    assert all_of(front_end) == []
    assert front_end.status().ended


def test_real_pace_gives_an_interval_when_it_is_over(tmp_path):
    path = tmp_path / "a.cf32"
    path.write_bytes(KINDS["cf32"](tone(20_000)).tobytes())
    now = [5]
    front_end = iq(
        path, datatype="cf32", rate_hz=RATE_HZ, pace="real", interval_s=0.1, clock_ns=lambda: now[0]
    )
    assert front_end.read(0.0).n == 0
    now[0] += 100_000_000
    assert front_end.read(0.0).times_ns.tolist() == [0]
    assert front_end.read(0.0).now_ns == 100_000_000
    now[0] += 100_000_000
    assert front_end.read(0.0).times_ns.tolist() == [100_000_000]
    assert front_end.status().ended


def pair(folder, general=None, capture=None, name="rec"):
    (folder / f"{name}.sigmf-data").write_bytes(b"HEADER__" + KINDS["cs16"](tone(10_000)).tobytes())
    header = {
        "global": {"core:datatype": "ci16_le", "core:sample_rate": RATE_HZ, "core:version": "1.0.0"}
        | (general or {}),
        "captures": [
            {
                "core:sample_start": 0,
                "core:frequency": CENTRE_HZ,
                "core:datetime": "2026-03-01T00:00:00.250Z",
                "core:header_bytes": 8,
            }
            | (capture or {})
        ],
        "annotations": [],
    }
    path = folder / f"{name}.sigmf-meta"
    path.write_text(json.dumps(header), encoding="utf-8")
    return path


def test_a_pair_brings_its_own_header(tmp_path):
    meta = pair(tmp_path)
    for path in (meta, meta.with_suffix(".sigmf-data")):
        front_end = iq(path)
        (batch,) = all_of(front_end)
        assert abs(int(batch.counts[0, 0]) + 6021) <= 2
        assert front_end.clock_fix == (0, 1_772_323_200_250_000_000)
        assert front_end.status().counters["samples"] == 10_000
        assert "header" in front_end.status().text


def test_a_capture_of_several_and_what_has_none(tmp_path):
    meta = pair(tmp_path)
    document = json.loads(meta.read_text(encoding="utf-8"))
    document["captures"].append({"core:sample_start": 8000, "core:frequency": 2 * CENTRE_HZ})
    meta.write_text(json.dumps(document), encoding="utf-8")
    with pytest.raises(ConfigError, match="choose one capture, 0 to 1"):
        iq(meta)
    for capture, centre_hz, samples in ((0, CENTRE_HZ, 8000), (1, 2 * CENTRE_HZ, 2000)):
        front_end = iq(meta, capture=capture, centre_hz=centre_hz)
        assert len(all_of(front_end)) == 1
        assert front_end.status().counters["samples"] == samples
    with pytest.raises(ConfigError, match="no number 2"):
        iq(meta, capture=2)
    raw = tmp_path / "a.cs16"
    raw.write_bytes(meta.with_suffix(".sigmf-data").read_bytes())
    front_end = iq(raw, rate_hz=RATE_HZ, header_bytes=8)
    assert abs(int(all_of(front_end)[0].counts[0, 0]) + 6021) <= 2
    with pytest.raises(ConfigError, match="sensor.capture"):
        iq(raw, rate_hz=RATE_HZ, capture=0)
    with pytest.raises(ConfigError, match="header_bytes"):
        iq(meta, capture=0, header_bytes=8)
    with pytest.raises(ConfigError, match="unpack it first"):
        iq(raw.rename(tmp_path / "a.sigmf"), rate_hz=RATE_HZ)


def test_floats_take_the_scale_of_their_header(tmp_path):
    meta = pair(tmp_path, {"core:datatype": "cf32_le"}, {"capture_details:acq_scale_factor": 1e-3})
    samples = KINDS["cf32"](tone(10_000) * 1000)
    meta.with_suffix(".sigmf-data").write_bytes(bytes(8) + samples.tobytes() + bytes(4))
    (batch,) = all_of(iq(meta))
    assert abs(int(batch.counts[0, 0]) + 6021) <= 2


def test_without_a_known_start_the_time_of_the_file_stands_in_and_is_named(tmp_path):
    path = tmp_path / "a.cf32"
    path.write_bytes(KINDS["cf32"](tone(10_000)).tobytes())
    os.utime(path, ns=(0, 1_700_000_000_000_000_000))
    front_end = iq(path, datatype="cf32", rate_hz=RATE_HZ)
    assert front_end.clock_fix == (0, 1_700_000_000_000_000_000)
    assert "recording time is unknown" in front_end.status().text
    front_end = iq(path, datatype="cf32", rate_hz=RATE_HZ, clock_start="2026-03-01T00:00:00Z")
    assert front_end.clock_fix == (0, 1_772_323_200 * 10**9)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"datatype": "cu9"}, "sensor.datatype"),
        ({"rate_hz": 0}, "sensor.rate_hz"),
        ({"bands": [[0, 60_000]]}, "sensor.bands"),
        ({"bands": [[5, 1]]}, "sensor.bands"),
        ({"bands": [[1, 2, 3]]}, "sensor.bands"),
        ({"bands": "all"}, "sensor.bands"),
        ({"interval_s": 0.001}, "sensor.interval_s"),
        ({"overlap": 1.0}, "sensor.overlap"),
        ({"centre": 1}, "did you mean centre_hz?"),
    ],
)
def test_wrong_options_are_one_line(tmp_path, options, words):
    path = tmp_path / "a.cs16"
    path.write_bytes(bytes(4 * 10_000))
    with pytest.raises(ConfigError) as caught:
        iq(path, **({"datatype": "cs16", "rate_hz": RATE_HZ} | options))
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_bands_must_match_the_channels(tmp_path):
    (tmp_path / "a.cs16").write_bytes(bytes(4 * 10_000))
    options = {"datatype": "cs16", "rate_hz": RATE_HZ, "bands": [[0, 1e4]], "centre_hz": CENTRE_HZ}
    settings = settings_for("iq_file", {"file": "a.cs16"} | options, tmp_path)
    assert settings.resolution == 0.001
    with pytest.raises(ConfigError, match="sensor.bands: 1 bands for 2 channels"):
        open_front_end(settings, 2, time.monotonic_ns, time.time_ns, False)


def test_halves_of_a_pair_and_wrong_headers_are_one_line(tmp_path):
    cases = [
        (pair(tmp_path, {"core:datatype": "ri16_le"}, name="a"), "ri16_le"),
        (pair(tmp_path, {"core:num_channels": 2}, name="b"), "core:num_channels"),
        (pair(tmp_path, name="c"), "global: must be"),
    ]
    cases[2][0].write_text("{}", encoding="utf-8")
    for path, words in cases:
        with pytest.raises(ConfigError, match=words):
            iq(path)
    cases[2][0].write_text("{", encoding="utf-8")
    with pytest.raises(ConfigError, match="not a JSON text"):
        iq(cases[2][0])
    lonely = pair(tmp_path, name="d")
    lonely.with_suffix(".sigmf-data").unlink()
    with pytest.raises(DeviceError, match="both files"):
        iq(lonely)


def test_a_files_name_may_tell_its_datatype(tmp_path):
    path = tmp_path / "a.cs16"
    path.write_bytes(KINDS["cs16"](tone(10_000)).tobytes())
    assert abs(int(all_of(iq(path, rate_hz=RATE_HZ))[0].counts[0, 0]) + 6021) <= 2
    with pytest.raises(ConfigError, match="sensor.datatype: missing"):
        iq(path.rename(tmp_path / "a.bin"), rate_hz=RATE_HZ)


def test_real_recordings_against_the_folders_reference(recordings):
    """Source: reference.json of the folder (scipy's Welch estimate, 1024 bins, half overlapped)."""
    folder = recordings / "iq"
    reference = json.loads((folder / "reference.json").read_text(encoding="utf-8"))
    assert len(reference) >= 8
    tested = 0
    for entry in reference:
        found = list(folder.rglob(os.path.basename(entry["file"])))
        if not found:
            continue
        welch = next(w for w in entry["welch"] if w["nperseg"] == 1024)
        half = entry["sample_rate"] / 2
        bands = [(max(b["lo_hz"], -half), min(b["hi_hz"], half)) for b in welch["bands"]]
        front_end = iq(
            found[0],
            bands,
            datatype={"ci8": "cs8"}.get(entry["datatype"], entry["datatype"]),
            rate_hz=entry["sample_rate"],
            interval_s=10.0,
        )
        (batch,) = all_of(front_end)
        for count, band in zip(batch.counts[0], welch["bands"], strict=True):
            # half a count of rounding, and the reference's own 1e-6 dB
            assert abs(count / 1000 - band["dbfs"]) < 0.0006, (entry["file"], band)
        clipped = bool(batch.flags[0] & Flag.CLIPPED)
        # floating point has no rail; the folder counts its largest value as one
        expected = entry["clip_fraction"] > 0 and not entry["datatype"].startswith("cf32")
        assert clipped == expected, entry["file"]
        tested += 1
    assert tested >= 8
