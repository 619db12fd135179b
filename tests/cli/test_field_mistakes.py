"""fieldsill field: one line for each mistake."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.cli.calibrations import FILE, ask
from tests.cli.command import run


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (
            ["--frequency", "7GHz", "--dbm", "-30"],
            "element[1].table: antenna a1 covers 1 GHz to 6 GHz, not 7 GHz",
        ),
        (["--frequency", "2GHz"], "no figure; give one of --counts"),
        (["--frequency", "2GHz", "--dbm", "-30", "--volts", "1"], "several figures; give one"),
        (["--frequency", "2GHz", "--dbfs", "-30"], "gives volts; give --counts, --dbm or --volts"),
        (["--frequency", "2GHz", "--dbm", "-30W"], "unit 'W' is not known; use dbm"),
        (["--frequency", "2GHz", "--dbm", "nan"], "'nan' is not a number"),
        (["--frequency", "2GHz", "--dbm", "1e999"], "beyond 300"),
        (["--frequency", "2GHz", "--volts", "-1e9"], "beyond 300"),
        (["--frequency", "2GHz", "--counts", "1.5"], "--counts"),
        (["--frequency", "2GHz", "--counts", "99999999999"], "--counts"),
        (["--frequency", "0", "--dbm", "-30"], "not a frequency"),
        (["--dbm", "-30"], "--frequency"),
    ],
)
def test_mistakes(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, arguments: list[str], says: str
) -> None:
    found = ask(capsys, tmp_path, *arguments)
    assert found.code == 2
    assert says in found.one_line
    assert found.out == ""


def test_a_file_that_is_not_there(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    arguments = ["field", "--calibration", tmp_path / "none.toml", "--frequency", "2GHz"]
    found = run(capsys, [*arguments, "--dbm", "-30"])
    assert found.code == 3
    assert "cannot be read" in found.one_line


def test_a_calibration_of_the_future(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = tmp_path / "calibration.toml"
    text = FILE.format(due="2199-12-31", averages="none", af=30, loss=0, more="", terms="")
    path.write_text(text.replace("2020-01-15", "2124-01-15"), encoding="utf-8")
    arguments = ["field", "--calibration", path, "--frequency", "2GHz", "--dbm", "-30"]
    found = run(capsys, arguments)
    assert found.code == 2
    assert "lies in the future" in found.one_line


def test_a_calibration_without_a_budget(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = tmp_path / "calibration.toml"
    text = FILE.format(due="2099-12-31", averages="none", af=30, loss=0, more="", terms="")
    path.write_text(text[: text.index("[[contribution]]")], encoding="utf-8")
    arguments = ["field", "--calibration", path, "--frequency", "2GHz", "--dbm", "-30"]
    found = run(capsys, arguments)
    assert found.code == 2
    assert "contribution: none given; a figure needs its uncertainty" in found.one_line
