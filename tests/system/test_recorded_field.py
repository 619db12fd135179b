"""A probe that prints V/m, calibrated as a whole: a recorded series through fieldsill run."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from monitor.record.reader import Record
from tests.system.commands import fieldsill

SITE = """
[site]
name = "Probe, recorded"
place = "Harrowgate Mill, Tern Hollow"
simulated = false
occupancy = "public"
field_region = "far"
[record]
path = "probe.db"
[sensor]
kind = "level_series"
file = "series.csv"
time_column = "time"
level_columns = ["x", "y", "z"]
resolution = 0.01
clock_start = "2026-03-01T00:00:00Z"
pace = "full"
hold_s = 10
calibration = "calibration.toml"
[[band]]
name = "all"
low = "900MHz"
high = "900.1MHz"
outside = "survey"
[limits]
sets = ["icnirp-2020"]
[pages]
port = 0
"""
CALIBRATION = """
[calibration]
id = "probe"
date = 2026-01-01
due = 2099-01-01
laboratory = "none"
certificate = "none"
valid_temperature_c = [0, 40]
[detector]
kind = "probe"
quantity = "v_per_m"
resolution = 0.01
linearity = [[0.5, 0.5], [100, 120]]
averages = "none"
[[element]]
type = "probe"
serial = "p1"
certificate = "none"
table = [["100MHz", 1.0], ["3GHz", 1.0]]
[[contribution]]
name = "all of it"
value = 2.0
distribution = "expanded"
k = 2
shared = true
"""


@pytest.mark.timeout(120)
def test_a_series_of_field_strengths_becomes_its_root_mean_square(tmp_path: Path) -> None:
    """By hand: dB straight from 0.5 to 100 V/m, then 1 dB; mean of squares over six minutes."""
    channels = "".join(f'[[channel]]\nname = "{a}"\naxis = "{a}"\nband = "all"\n' for a in "xyz")
    (tmp_path / "site.toml").write_text(SITE + channels)
    (tmp_path / "calibration.toml").write_text(CALIBRATION)
    e = np.array([[2.0, 3.0, 6.0], [4.0, 1.0, 8.0]])
    rows = [f"{10 * i}," + ",".join(f"{v:.2f}" for v in e[i % 2]) for i in range(72)]
    (tmp_path / "series.csv").write_text("\n".join(["time,x,y,z", *rows]) + "\n")
    done = fieldsill("run", "--exit", "--site", tmp_path / "site.toml")
    assert done.returncode == 0, done.stderr
    with Record.open(tmp_path / "probe.db") as record:
        boot = record.boots()[0].boot
        fields = record.fields(boot)
    slope = math.log(120 / 0.5) / math.log(100 / 0.5)
    true = 0.5 * (e / 0.5) ** slope * 10 ** (1 / 20)
    wanted = math.sqrt(float((true**2).sum(axis=1).mean()))
    at = (fields.averaging_s == 360) & (fields.end_ns == 720 * 10**9)
    assert at.any()
    assert np.sqrt(fields.e2_mean[at]) == pytest.approx(wanted, rel=1e-6)
