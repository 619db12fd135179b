"""What calibration show and compare say where a figure is none, or a remedy was taken already."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest

from tests.cli.command import run

BOARD = Path(__file__).parents[2] / "hardware" / "examples" / "detector-board-calibration.toml"


def test_the_band_is_asked_for_only_where_it_was_not_given(
    capsys: pytest.CaptureFixture[str],
) -> None:
    asked = ["calibration", "show", BOARD]
    bare = run(capsys, asked).out
    assert "part of U: give the band of the site file with --band)" in bare
    assert "part of U)" in run(capsys, [*asked, "--band", "800MHz:2GHz"]).out
    assert "degrees   of variance" in bare


def test_a_file_dated_in_the_future_is_noted(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    day = datetime.now(UTC).date() + timedelta(days=3)
    path = tmp_path / "ahead.toml"
    text = BOARD.read_text()
    old = next(line for line in text.splitlines() if line.startswith("date = "))
    due = next(line for line in text.splitlines() if line.startswith("due = "))
    new = text.replace(old, f"date = {day}", 1).replace(due, f"due = {day + timedelta(days=9)}", 1)
    path.write_text(new)
    shown = run(capsys, ["calibration", "show", path])
    assert "Note: calibration.date lies in the future by this machine's clock" in shown.out
    document = run(capsys, ["calibration", "show", path, "--json"]).document
    assert document["in_the_future"] == "calibration.date"
    assert "in the future" not in run(capsys, ["calibration", "show", BOARD]).out


def test_no_difference_of_a_detector_is_no_line(capsys: pytest.CaptureFixture[str]) -> None:
    assert "the same count reads" not in run(capsys, ["calibration", "compare", BOARD, BOARD]).out


def test_compare_takes_the_band_that_a_drift_covers_or_asks_for_one(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    later = tmp_path / "later.toml"
    found = '\n[as_found]\ndate = 2024-09-10\nprevious = "roof-0"\n'
    later.write_text(BOARD.read_text() + found + 'table = [["800MHz", 0.1], ["2GHz", -0.5]]\n')
    asked = ["calibration", "compare", BOARD, later]
    lines = run(capsys, asked).out
    assert "Response over 800 MHz to 2 GHz, B less A" in lines
    assert "as far as [as_found] of B has a table; another band with --band" in lines
    assert run(capsys, [*asked, "--json"]).document["band_by_as_found"] is True
    beyond = run(capsys, [*asked, "--band", "750MHz:2GHz"])
    assert beyond.code == 2
    assert "name a band that it covers with --band" in beyond.one_line
    inside = run(capsys, [*asked, "--band", "900MHz:1GHz"]).out
    assert "as far as [as_found]" not in inside
    far = BOARD.read_text() + found + 'table = [["10GHz", 0.1], ["20GHz", -0.5]]\n'
    later.write_text(far)
    assert "name one with --band" in run(capsys, asked).one_line
