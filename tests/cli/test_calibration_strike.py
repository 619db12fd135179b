"""A reference check that was a mistake: struck out by its number, kept, and off the chart."""

from __future__ import annotations

from pathlib import Path

import pytest

from monitor.record.reader import Record
from monitor.refchecks import checks_of
from tests.cli.command import run
from tests.cli.test_calibration_checks import HAND, blocks, charted, fill, kept


@pytest.fixture
def record(tmp_path: Path) -> Path:
    path = tmp_path / "record.db"
    fill(path, blocks(0, [-30.0] * 6))
    return path


def test_a_check_that_was_a_mistake_is_struck_and_stays(
    capsys: pytest.CaptureFixture[str], record: Path
) -> None:
    """A level typed wrong, -20 for -30 dBm: the ninth check reads 10 dB otherwise."""
    kept(record, [*HAND, -10.0])
    assert charted(capsys, record).code == 1
    strike = ["calibration", "applied", "--record", record, "--strike"]
    found = run(capsys, [*strike, "9", "--note", "typed -20"])
    assert found.code == 0, found.err
    assert found.out == "east: check 9, which read -10.00 dB otherwise, is struck; typed -20\n"
    after = charted(capsys, record)
    assert after.code == 0
    assert "  centre +0.200, sigma 0.139" in after.out.splitlines()
    assert after.out.splitlines()[-1].endswith("-10.000  struck: typed -20")
    (chart,) = charted(capsys, record, "--json").document["charts"]
    assert [check["number"] for check in chart["checks"]] == list(range(1, 9))
    ((struck),) = chart["struck"]
    assert (struck["number"], struck["why"]) == (9, "typed -20")
    with Record.open(record) as held:
        assert len(checks_of(held)) == 9  # nothing is taken out
    assert "is struck already" in run(capsys, [*strike, "9"]).one_line
    assert "the record has 1 to 9" in run(capsys, [*strike, "10"]).one_line


def test_a_chart_whose_checks_are_all_struck_has_none(
    capsys: pytest.CaptureFixture[str], record: Path
) -> None:
    kept(record, [0.3])
    run(capsys, ["calibration", "applied", "--record", record, "--strike", "1"])
    found = charted(capsys, record)
    assert found.code == 0
    assert "  0 of the 8 checks that make the lines" in found.out.splitlines()
