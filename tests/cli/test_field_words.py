"""What fieldsill field says of a figure at an end of its range, and of a file of one axis."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest

from tests.cli.calibrations import FILE, ask
from tests.cli.command import run
from tests.terms import confirmed

AT = ("--frequency", "2GHz")


def soon() -> str:
    return f"{(datetime.now(UTC) + timedelta(days=20)).date()}"


@pytest.mark.parametrize("dbm", ["-30", "-59", "0"])
def test_an_end_of_the_range_hides_no_other_note(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, dbm: str
) -> None:
    out = ask(capsys, tmp_path, *AT, "--dbm", dbm, due=soon()).out
    assert "Note: calibration due soon" in out


def test_a_component_below_its_limit_says_nothing_of_the_whole(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """'this much or more' would call an upper bound a lower one."""
    out = ask(capsys, tmp_path, *AT, "--dbm", "-59").out
    assert "the whole field may be more than this" in out
    assert "this much or more" not in out


def test_averaged_noise_without_bandwidth_says_what_is_missing(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    asked = (*AT, "--dbm", "-30", "--signal", "noise")
    out = ask(capsys, tmp_path, *asked, averages="log").out
    assert "--bandwidth times the averaging_s of the calibration file is 100 or more" in out
    assert "--bandwidth" not in ask(capsys, tmp_path, *AT, "--dbm", "-30", averages="log").out


def test_a_file_of_one_axis_needs_no_axis(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    path = tmp_path / "cal.toml"
    body = FILE.format(
        due="2099-01-15", averages="none", af=30.0, loss=0.0, more="", terms=confirmed()
    )
    path.write_text(body.replace("[detector]\n", '[[detector]]\naxis = "x"\n'))
    asked = ["field", "--calibration", path, *AT, "--dbm", "-30"]
    assert "field strength" in run(capsys, asked).out
    said = run(capsys, [*asked, "--axis", "z"])
    assert said.code == 2
    assert "has no detector of axis z; it has x" in said.one_line
