"""fieldsill explain over a budget line in another unit, of few degrees of freedom."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from tests.cli.command import run
from tests.system.commands import fieldsill, filled

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
LINE = """
[[contribution]]
name = "temperature"
value = 15
sensitivity = -0.04
degrees_of_freedom = 4
distribution = "rectangular"
shared = false
kind = "detector"
"""


@pytest.fixture
def record(tmp_path: Path) -> Path:
    """The record of an hour of levels, invented, one a minute."""
    levels = [f"2025-03-01T10:{minute:02d}:00Z,{-50 - minute % 7}" for minute in range(60)]
    (tmp_path / "levels.csv").write_text("\n".join(["time,rsl", *levels]) + "\n")
    calibration = (EXAMPLES / "level-series-calibration.toml").read_text() + LINE
    (tmp_path / "level-series-calibration.toml").write_text(calibration)
    site = (EXAMPLES / "level-series-site.toml").read_text()
    values = {"levels.csv.gz": "levels.csv", "simulated = false": "simulated = true"}
    (tmp_path / "site.toml").write_text(filled(site, values) + "\n[pages]\nport = 0\n")
    done = fieldsill("run", "--exit", "--site", tmp_path / "site.toml")
    assert done.returncode == 0, done.stderr
    return tmp_path / "link.db"


def test_its_effect_in_db_is_told(capsys: pytest.CaptureFixture[str], record: Path) -> None:
    """By hand: 15 times 0.04 dB, over the root of three (GUM 4.3.7, 5.1.3)."""
    told = run(capsys, ["explain", "--record", record, "--json"]).document
    assert told["recomputed"]["equal"] is True
    lines = {line["name"]: line for line in told["uncertainty"]}
    line = lines["temperature"]
    assert line["u_db"] == pytest.approx(0.6 / math.sqrt(3))
    assert (line["value"], line["sensitivity"], line["degrees_of_freedom"]) == (15, -0.04, 4)
    assert lines["receiver's level"]["degrees_of_freedom"] is None  # without end
    u_db = math.sqrt(sum(line["u_db"] ** 2 for line in lines.values()))
    field = told["field"]
    assert field["instrument_expanded_db"] == pytest.approx(field["k"] * u_db, rel=1e-6)
    out = run(capsys, ["explain", "--record", record]).out
    (row,) = [row for row in out.splitlines() if row.startswith("  temperature ")]
    assert row.endswith("; -0.04 dB per unit of its value; 4 degrees of freedom")
    (row,) = [row for row in out.splitlines() if row.startswith("  receiver's level ")]
    assert row.endswith("shared by level")
