"""The calibration in force in a record, now and at a time, shown and compared with a file."""

from __future__ import annotations

import hashlib
from pathlib import Path

import pytest

from monitor.core.rows import Event
from monitor.record.types import ClockFix, Commit
from monitor.times import text_of
from tests.cli.command import Answer, run
from tests.record.making import UTC0, S, writer_of

BOARD = Path(__file__).parents[2] / "hardware" / "examples" / "detector-board-calibration.toml"
OLD = BOARD.read_text()
NEW = OLD.replace('["900MHz", 44.2]', '["900MHz", 44.9]').replace("roof-1, autumn", "roof-1, later")


@pytest.fixture
def record(tmp_path: Path) -> Path:
    """Begun on OLD; from the hour on NEW; a second boot, without a clock, on OLD again."""
    path = tmp_path / "record.db"
    writer = writer_of(path)
    fix = ClockFix(0, UTC0, "test", 0)
    for boot_id, text, at_s in (("one", OLD, 0), ("one", NEW, 3600), ("two", OLD, 5)):
        boot = writer.begin_boot(boot_id, "machine")
        digest = writer.put_document("calibration", text.encode())
        event = Event(at_s * S, "start", "daemon", {"calibration": digest})
        fixes = (fix,) if boot_id == "one" else ()
        writer.commit(boot, Commit(events=(event,), clock_fixes=fixes))
    writer.close()
    return path


def ask(capsys: pytest.CaptureFixture[str], *arguments: object) -> Answer:
    return run(capsys, ["calibration", *arguments])


@pytest.mark.parametrize(("at_s", "text"), [(None, OLD), (3599, OLD), (3600, NEW), (10**6, NEW)])
def test_the_calibration_in_force_is_shown(
    capsys: pytest.CaptureFixture[str], record: Path, at_s: int | None, text: str
) -> None:
    at = [] if at_s is None else ["--at", text_of(UTC0 + at_s * S)]
    found = ask(capsys, "show", "--record", record, "--json", *at)
    assert found.code == 0, found.err
    assert found.document["identity"] == hashlib.sha256(text.encode()).hexdigest()
    assert "in record.db" in found.document["file"]


def test_it_is_compared_with_a_file(capsys: pytest.CaptureFixture[str], record: Path) -> None:
    at = ["--at", text_of(UTC0 + 4000 * S)]
    document = ask(capsys, "compare", "--record", record, *at, BOARD, "--json").document
    assert document["a"]["identity"] == hashlib.sha256(NEW.encode()).hexdigest()
    assert not document["same"]
    assert document["largest_response_db"] == pytest.approx(-0.7)
    same = ask(capsys, "compare", "--record", record, BOARD)
    assert "The same to the byte." in same.out


@pytest.mark.parametrize(
    "arguments",
    [
        ["show"], ["show", BOARD, "--record", "R"], ["show", BOARD, "--at", "2031-01-01"],
        ["compare", BOARD], ["compare", BOARD, BOARD, "--record", "R"],
        ["show", "--record", "R", "--at", "2001-01-01"], ["compare"],
    ],
)  # fmt: skip
def test_what_does_not_fit_together_is_refused(
    capsys: pytest.CaptureFixture[str], record: Path, arguments: list[object]
) -> None:
    found = ask(capsys, *(record if word == "R" else word for word in arguments))
    assert found.code == 2
    assert "calibration" in found.one_line or "--at" in found.one_line
