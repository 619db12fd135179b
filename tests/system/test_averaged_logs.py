"""A level series of averaged logs through fieldsill measure, explain and check."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest

from monitor.core.exposure import Verdict
from monitor.core.flags import Flag
from monitor.record.reader import Record
from tests.system.commands import fieldsill, filled
from tests.system.test_recorded_iq import CALIBRATION

SITE = """
[site]
name = "Recorded"
simulated = false
occupancy = "public"
field_region = "far"
[record]
path = "record.db"
[sensor]
kind = "level_series"
file = "levels.csv"
level_columns = ["x", "y", "z"]
resolution = 0.001
hold_s = 3
averages = "log"
averaging_s = 1e-3
calibration = "calibration.toml"
[[band]]
name = "downlink"
low = "791MHz"
high = "821MHz"
outside = "survey"
signal = "SIGNAL"
signal_bandwidth = "5MHz"
[[channel]]
name = "x"
axis = "x"
band = "downlink"
[[channel]]
name = "y"
axis = "y"
band = "downlink"
[[channel]]
name = "z"
axis = "z"
band = "downlink"
[limits]
sets = ["icnirp-2020"]
"""
VALUES = 200
SECONDS = 480


def recorded(folder: Path, signal: str, duty: float) -> tuple[Path, float]:
    """A site whose levels are means of the logs of noise that is on for that share of the time.

    Beside it the true mean power of one axis, dBm.
    """
    mean_dbm = np.where(np.arange(VALUES) < duty * VALUES, -30.0, -60.0)
    mean_w = 10 ** (mean_dbm / 10 - 3)
    power_w = np.random.default_rng(7).exponential(mean_w, size=(SECONDS, 3, VALUES))
    levels = (10 * np.log10(power_w) + 30).mean(axis=2)
    rows = [f"{i}," + ",".join(f"{db:.3f}" for db in row) for i, row in enumerate(levels)]
    (folder / "levels.csv").write_text("\n".join(["time,x,y,z", *rows]) + "\n")
    values = {'quantity = "dbfs"': 'quantity = "dbm"', "dbfs_to_dbm = -60.0\n": "",
              'averages = "power"': 'averages = "none"'}  # fmt: skip
    (folder / "calibration.toml").write_text(filled(CALIBRATION, values))
    site = folder / "site.toml"
    site.write_text(SITE.replace("SIGNAL", signal))
    return site, 10 * math.log10(float(mean_w.mean())) + 30


@pytest.mark.parametrize(
    ("signal", "duty", "low_db", "flag"),
    [("noise", 1.0, 0.0, Flag.CORRECTED_LOG), ("bursts", 0.5, 14.5, Flag.LOG_AVERAGED)],
)
def test_noise_reads_the_truth_and_bursts_are_a_lower_bound(
    tmp_path: Path, signal: str, duty: float, low_db: float, flag: Flag
) -> None:
    """Within 0.1 dB; bursts 14.5 dB low (platform facts, 2.2: 50 %, noise-like, floor -30 dB)."""
    site, truth_dbm = recorded(tmp_path, signal, duty)
    done = fieldsill("measure", "--exit", "--site", site)
    assert done.returncode == 0, done.stderr
    with Record.open(tmp_path / "record.db") as record:
        boot = record.boots()[0].boot
        windows, fields = record.windows(boot), record.fields(boot)
        exposures = record.exposures(boot)
    at = np.flatnonzero((windows.averaging_s == 360) & (windows.end_ns == windows.end_ns.max()))
    mean_dbm = 10 * np.log10(windows.energy_w_ns[at] / windows.covered_ns[at]) + 30
    assert mean_dbm.tolist() == pytest.approx([truth_dbm - low_db] * 3, abs=0.1)
    both = int(Flag.CORRECTED_LOG | Flag.LOG_AVERAGED)
    assert set((fields.flags & both).tolist()) == {int(flag)}
    if signal == "bursts":
        assert int(Verdict.CONFORMS) not in set(exposures.verdict.tolist())
    explained = fieldsill("explain", "--record", tmp_path / "record.db", "--json")
    assert explained.returncode == 0, explained.stderr
    told = json.loads(explained.stdout)["recomputed"]
    assert (told["equal"], told["count_tables_of_another_version"]) == (True, [])


def test_check_says_that_bursts_are_a_lower_bound(tmp_path: Path) -> None:
    site, _ = recorded(tmp_path, "bursts", 0.5)
    done = fieldsill("check", "--site", site)
    assert done.returncode == 0, done.stderr
    assert "downlink: averaged logs of bursts read 6 to 19 dB low: lower bounds" in done.stdout
