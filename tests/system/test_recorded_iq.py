"""Every recorded I/Q file through fieldsill measure: counts, blocks, windows, flags, verdict."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from monitor.core.exposure import Verdict
from monitor.core.flags import Flag
from monitor.record.reader import Record
from tests.system.commands import fieldsill, recordings

SITE = """
[site]
name = "Recorded"
simulated = false
occupancy = "public"
field_region = "far"
[record]
path = "record.db"
[sensor]
kind = "iq_file"
file = "{file}"
datatype = "{datatype}"
rate_hz = {rate}
centre_hz = {centre}
interval_s = {seconds}
hold_s = {seconds}
bands = [[{low}, {high}]]
clock_start = "2026-01-01T00:00:00Z"
calibration = "calibration.toml"
[[band]]
name = "all"
low = {band_low}
high = {band_high}
[[channel]]
name = "all"
band = "all"
[limits]
sets = ["icnirp-2020"]
"""
CALIBRATION = """
[calibration]
id = "test"
date = 2026-01-01
due = 2099-01-01
laboratory = "none"
certificate = "none"
valid_temperature_c = [0, 40]
[detector]
kind = "scale"
quantity = "dbfs"
resolution = 0.001
dbfs_to_dbm = -60.0
range_dbm = [-140, 0]
averages = "power"
[[element]]
type = "antenna"
serial = "none"
certificate = "none"
table = [["500MHz", 30.0], ["3GHz", 30.0]]
[[contribution]]
name = "all of it"
value = 2.0
distribution = "expanded"
k = 2
shared = true
kind = "antenna"
"""


def files() -> list[dict]:
    """The folder's reference figures, one entry a file; empty where there is no folder."""
    try:
        folder = recordings()
    except pytest.skip.Exception:
        return []
    return json.loads((folder / "iq" / "reference.json").read_text())


@pytest.mark.skipif(not files(), reason="FIELDSILL_RECORDINGS is not set: no real recordings here")
@pytest.mark.parametrize("reference", files(), ids=lambda entry: entry["file"])
def test_the_recorded_level_is_the_reference_and_clipping_is_flagged(
    reference: dict, tmp_path: Path
) -> None:
    """Band power of reference.json (Welch, 1024) within 0.1 dB, in the record of the main job."""
    band = reference["welch"][0]["bands"][0]
    seconds = reference["n"] / reference["sample_rate"]
    centre = reference["centre_hz"] or 1.6e9  # one file does not say: any does for a level
    text = SITE.format(
        file=recordings() / "iq" / reference["file"],
        datatype=reference["datatype"],
        rate=reference["sample_rate"],
        centre=centre,
        seconds=seconds,
        low=band["lo_hz"],
        high=band["hi_hz"],
        band_low=centre + band["lo_hz"],
        band_high=centre + band["hi_hz"],
    )
    (tmp_path / "site.toml").write_text(text)
    (tmp_path / "calibration.toml").write_text(CALIBRATION)
    done = fieldsill("measure", "--exit", "--site", tmp_path / "site.toml")
    assert done.returncode == 0, done.stderr
    with Record.open(tmp_path / "record.db") as record:
        boot = record.boots()[0].boot
        blocks = record.blocks(boot)
        fields, exposures = record.fields(boot), record.exposures(boot)
        (raw,) = record.raw_batches(boot)
    assert raw.counts[0, 0] / 1000 == pytest.approx(band["dbfs"], abs=0.1)
    covered_s = blocks.covered_ns.sum() / 1e9
    assert covered_s == pytest.approx(seconds, abs=1e-6)
    mean_dbm = 10 * np.log10(blocks.energy_w_ns.sum() / blocks.covered_ns.sum() / 1e-3)
    assert mean_dbm == pytest.approx(band["dbfs"] - 60, abs=0.1)
    clipped = reference["datatype"] != "cf32" and reference["clip_fraction"] > 0
    assert bool(np.all(blocks.flags & Flag.CLIPPED)) == clipped
    e2 = 50 * 10 ** (30.0 / 10) * 1e-3 * 10 ** (mean_dbm / 10)
    np.testing.assert_allclose(fields.e2_mean, e2, rtol=0.001)
    assert exposures.verdict.size > 0
    assert not np.any(exposures.verdict == Verdict.CONFORMS)  # one axis, seconds of data
