"""A calibration file with a few values in it, and what fieldsill field says of it."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from tests.cli.command import Answer, run
from tests.terms import confirmed

FILE = """
[calibration]
id = "board 7"
date = 2020-01-15
due = {due}
laboratory = "none"
certificate = "K 4711"
valid_temperature_c = [-10, 50]

[detector]
kind = "log"
bits = 12
volts_per_count = 0.001
valid_v = [0.3, 2.2]
curve = [[-60, 2.0], [-30, 1.34], [0, 0.68]]
range_dbm = [-58, -2]
averages = "{averages}"

[[element]]
type = "antenna"
serial = "a1"
certificate = "K 1"
table = [["1GHz", {af}], ["6GHz", {af}]]

[[element]]
type = "cable"
serial = "c1"
certificate = "K 2"
table = [["1GHz", {loss}], ["6GHz", {loss}]]
{more}
[[contribution]]
name = "antenna"
value = 1.0
distribution = "expanded"
k = 2
shared = true
kind = "antenna"

[[contribution]]
name = "mismatch"
value = 0.245
distribution = "u_shaped"
shared = false
kind = "mismatch"
{terms}"""


def ask(
    capsys: pytest.CaptureFixture[str], folder: Path, *arguments: object, **values: object
) -> Answer:
    """The answer for a calibration file with those values in it."""
    said = {"due": "2099-12-31", "averages": "none", "af": 30.0, "loss": 0.0, "more": ""}
    said["terms"] = confirmed()
    path = folder / "calibration.toml"
    path.write_text(FILE.format(**said | values), encoding="utf-8")
    return run(capsys, ["field", "--calibration", path, *arguments])


def figures(
    capsys: pytest.CaptureFixture[str], folder: Path, *arguments: object, **values: object
) -> Any:
    """The JSON of a question that is answered."""
    found = ask(capsys, folder, *arguments, "--json", **values)
    assert found.code == 0, found.err
    return found.document
