"""184 days of a real level series through fieldsill run, against the data folder's reference."""

from __future__ import annotations

import csv
import gzip
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest

from monitor.record.reader import Record
from tests.system.commands import fieldsill, filled, recordings

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"


def site_in(folder: Path, series: Path) -> Path:
    text = (EXAMPLES / "level-series-site.toml").read_text()
    site = folder / "site.toml"
    calibration = "level-series-calibration"
    values = {"levels.csv.gz": str(series), calibration: str(EXAMPLES / calibration)}
    site.write_text(filled(text, values) + "\n[pages]\nport = 0\n")
    return site


@pytest.mark.timeout(300)
def test_six_minute_means_of_power_equal_the_reference(tmp_path: Path) -> None:
    """reference_cml_6min.csv.gz: mean of power, rounded to 0.0001 dB; gaps stay gaps."""
    level = recordings() / "level"
    site = site_in(tmp_path, level / "cml_rsl_1min_2012-05_2012-10.csv.gz")
    done = fieldsill("run", "--exit", "--site", site, timeout_s=280)
    assert done.returncode == 0, done.stderr
    with gzip.open(level / "reference_cml_6min.csv.gz", "rt") as file:
        reference = {utc_s(row["time"]): row for row in csv.DictReader(file)}
    with Record.open(tmp_path / "link.db") as record:
        boot = record.boots()[0]
        rows = record.windows(boot.boot)
    assert boot.utc_offset_ns is not None
    ends = (rows.end_ns + boot.utc_offset_ns) // 1_000_000_000
    keep = (rows.averaging_s == 360) & (rows.end_ns % 60_000_000_000 == 0)
    found = dict(zip((ends[keep] - 360).tolist(), np.flatnonzero(keep).tolist()))
    compared, worst_of_db = 0, 0.0
    for start, row in reference.items():
        n = int(float(row["n"] or 0))
        if n == 0:
            assert start not in found or rows.covered_ns[found[start]] == 0
            continue
        at = found[start]
        assert rows.covered_ns[at] == n * 60_000_000_000
        mean_dbm = 10 * np.log10(rows.energy_w_ns[at] / rows.covered_ns[at] / 1e-3)
        assert mean_dbm == pytest.approx(float(row["mean_power_dbm"]), abs=6e-5)
        worst_of_db = max(worst_of_db, mean_dbm - float(row["mean_of_db_dbm"]))
        compared += 1
    assert compared > 40_000
    assert worst_of_db == pytest.approx(12.99, abs=0.01)  # what a mean of dB would hide


def utc_s(text: str) -> int:
    return round(datetime.fromisoformat(text).replace(tzinfo=UTC).timestamp())
