"""What two calibration files say of the drift between them."""

from __future__ import annotations

import math
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest

from tests.cli.command import run

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
BOARD = EXAMPLES / "detector-board-calibration.toml"


@pytest.mark.parametrize(("previous", "is_a"), [("roof-1, autumn", True), ("roof-0", False)])
def test_compare_prints_the_drift(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, previous: str, is_a: bool
) -> None:
    later = tmp_path / "later.toml"
    found = f'\n[as_found]\ndate = 2024-09-10\nprevious = "{previous}"\n'
    later.write_text(BOARD.read_text() + found + 'table = [["700MHz", 0.1], ["2.7GHz", -0.5]]\n')
    asked = ["calibration", "compare", BOARD, later, "--band", "700MHz:2.7GHz"]
    drift = run(capsys, [*asked, "--json"]).document["drift"]
    assert (drift["drift_db"], drift["is_a"]) == (0.5, is_a)
    assert drift["u_db"] == pytest.approx(0.5 / math.sqrt(3))
    lines = run(capsys, asked).out
    assert "Drift: as found on 2024-09-10 the chain read up to 0.5 dB otherwise than" in lines
    assert ("which is not A" in lines) is not is_a
    assert "a rectangular line of 0.5 dB more, u = 0.289 dB" in lines
    assert "Drift" not in run(capsys, ["calibration", "compare", BOARD, BOARD]).out


@pytest.mark.parametrize(("days", "soon"), [(20, True), (61, False)])
def test_show_and_field_announce_a_due_date(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, days: int, soon: bool
) -> None:
    due = datetime.now(UTC).date() + timedelta(days=days)
    path = tmp_path / "soon.toml"
    path.write_text(BOARD.read_text().replace("due = 2027-09-14", f"due = {due}"))
    shown = run(capsys, ["calibration", "show", path, "--json"]).document
    assert shown["due_in_days"] == days  # to the end of the due day
    assert not shown["overdue"]
    assert (
        "due soon: calibration, in 20 days" in run(capsys, ["calibration", "show", path]).out
    ) is soon
    asked = ["field", "--calibration", path, "--frequency", "900MHz", "--counts", "2000", "--json"]
    assert ("calibration due soon" in run(capsys, asked).document["flags"]) is soon
