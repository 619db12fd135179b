"""Reference checks on site: what is read while a level is applied, kept, and set on a chart."""

from __future__ import annotations

import json
import sqlite3
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from monitor.core.errors import ConfigError
from monitor.core.flags import Flag
from monitor.core.readings import Batch
from monitor.core.rows import BlockRows, Event
from monitor.record.reader import Record
from monitor.record.types import ClockFix, Commit
from monitor.refchecks import KIND, checks_of, event_of, mean_of
from monitor.times import text_of
from tests.cli.command import Answer, run
from tests.record.making import CHANNELS, UTC0, S, raw, writer_of

REQUEST = {
    "do": KIND, "channel": "east", "at": "port", "applied_dbm": -30.0, "mean_dbm": -29.9,
    "lowest_dbm": -30.0, "highest_dbm": -29.8, "valid_s": 60.0, "from_utc": "", "to_utc": "",
    "count_table": "a" * 64, "note": "generator 3",
}  # fmt: skip


def blocks(
    first_s: int, dbm: list[float], *, covered_s: int = 10, flags: int = 0, channel: int = 0
) -> BlockRows:
    """One channel's blocks of ten seconds at these levels; the other channels are at -60 dBm."""
    n = len(dbm)
    start = np.repeat(first_s * S + 10 * S * np.arange(n), 3)
    level = np.full((n, 3), -60.0)
    level[:, channel] = dbm
    power = 1e-3 * 10 ** (level.ravel() / 10)
    covered = np.full(3 * n, covered_s * S)
    return BlockRows(
        start, np.tile(np.arange(3), n), power * covered, covered, covered, power * 0.99,
        power * 1.01, covered // S, np.full(3 * n, flags),
    )  # fmt: skip


def fill(
    path: Path, rows: BlockRows, *, table: str = "a" * 64, boot: str = "one",
    fixes: tuple[ClockFix, ...] = (ClockFix(0, UTC0, "test", 0),),
) -> None:  # fmt: skip
    """A run of the daemon's: its start, one reading at the end, and blocks."""
    writer = writer_of(path)
    number = writer.begin_boot(boot, "machine")
    at = int(rows.start_ns.min())
    hashes = {f"counts {name}": table for _, name, _, _ in CHANNELS}
    writer.commit(
        number,
        Commit(
            raw=last_reading(int(rows.start_ns.max()) + 9 * S), blocks=rows,
            events=(Event(at, "start", "daemon", hashes),),
            clock_fixes=fixes,
        ),
    )  # fmt: skip
    writer.close()


def last_reading(at_ns: int) -> Batch:
    """One reading at that time."""
    return replace(raw(at_ns / S, 1), times_ns=np.array([at_ns]), now_ns=at_ns)


@pytest.fixture
def record(tmp_path: Path) -> Path:
    path = tmp_path / "record.db"
    fill(path, blocks(0, [-50.0] * 6 + [-30.2, -30.2, -30.2, -30.0, -30.2, -30.4]))
    return path


def applied(capsys: pytest.CaptureFixture[str], record: Path, *more: object) -> Answer:
    asked = ["calibration", "applied", "--record", record, "--channel", "east", *more]
    return run(capsys, asked)


def test_power_is_averaged_over_the_newest_minute(
    capsys: pytest.CaptureFixture[str], record: Path
) -> None:
    found = applied(capsys, record, "--level", "-30 dBm", "--note", "generator 3", "--json")
    assert found.code == 0, found.err
    levels = np.array([-30.2, -30.2, -30.2, -30.0, -30.2, -30.4])
    mean_dbm = 10 * np.log10(np.mean(10 ** (levels / 10)))
    document = found.document
    assert document["mean_dbm"] == pytest.approx(mean_dbm, abs=1e-9)
    assert document["difference_db"] == pytest.approx(mean_dbm + 30, abs=1e-9)
    assert (document["from_utc"], document["to_utc"]) == (
        text_of(UTC0 + 60 * S), text_of(UTC0 + 120 * S),
    )  # fmt: skip
    assert (document["valid_s"], document["kept_by"]) == (60.0, "command")
    with Record.open(record) as held:
        (check,) = checks_of(held)
        (event,) = [event for event in held.events() if event.kind == KIND]
    assert check.difference_db == pytest.approx(mean_dbm + 30)
    assert (check.channel, check.at, check.note) == ("east", "port", "generator 3")
    assert check.count_table == "a" * 64
    assert event.boot_ns == 120 * S


def test_what_is_not_known_is_null(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """A boot whose UTC nothing told, and no note: the rule for every document, absent is null."""
    path = tmp_path / "record.db"
    fill(path, blocks(0, [-30.0] * 6), fixes=())
    document = applied(capsys, path, "--level", "-30dBm", "--json").document
    assert [document[key] for key in ("from_utc", "to_utc", "note")] == [None] * 3
    assert document["channel"] == "east"


def test_a_time_can_be_named(capsys: pytest.CaptureFixture[str], record: Path) -> None:
    span = ["--from", text_of(UTC0), "--to", text_of(UTC0 + 60 * S)]
    found = applied(capsys, record, "--level", "-50dBm", *span, "--at", "input")
    assert "-50.00 dBm applied at the chain's input, -50.00 dBm read" in found.out
    assert "difference +0.00 dB: kept" in found.out
    assert "not steady" not in found.out
    across = ["--from", text_of(UTC0), "--to", text_of(UTC0 + 120 * S)]
    assert "not steady" in applied(capsys, record, "--level", "-50dBm", *across).out


@pytest.mark.parametrize(
    ("more", "line"),
    [
        (["--level", "-30"], "write a level in dBm"),
        ([], "give --channel and --level, or --strike"),
        (["--level", "-30dBm", "--strike", "1"], "--strike goes with --note alone"),
        (["--level", "300dBm"], "write a level in dBm"),
        (["--level", "-30dBm", "--channel", "west"], "the record has east, north, up"),
        (["--level", "-30dBm", "--last", "400s"], "only 120 s of 400 s have readings"),
        (["--level", "-30dBm", "--from", "2031-01-01"], "--from and --to go together"),
        (["--level", "-30dBm", "--from", "2031-01-01", "--to", "2031-01-02"], "no block"),
        (["--level", "-30dBm", "--from", "2031-01-02", "--to", "2031-01-01"], "must be before"),
    ],
)
def test_what_cannot_be_compared_is_refused_and_nothing_is_kept(
    capsys: pytest.CaptureFixture[str], record: Path, more: list[str], line: str
) -> None:
    found = applied(capsys, record, *more)
    assert found.code == 2
    assert line in found.one_line
    with Record.open(record) as held:
        assert checks_of(held) == []


@pytest.mark.parametrize("flag", [Flag.BELOW_RANGE, Flag.ABOVE_RANGE, Flag.CLIPPED])
def test_a_level_outside_the_range_is_no_check(tmp_path: Path, flag: Flag) -> None:
    fill(tmp_path / "record.db", blocks(0, [-30.0] * 6, flags=int(flag)))
    with (
        Record.open(tmp_path / "record.db") as held,
        pytest.raises(ConfigError, match="apply a level within the range"),
    ):
        mean_of(held, "east", None, 60 * S)


def test_the_daemon_takes_only_what_can_be_kept() -> None:
    event = event_of(REQUEST, ["east"], 7)
    assert (event.boot_ns, event.kind, event.name) == (7, KIND, "east")
    assert event.body["difference_db"] == pytest.approx(0.1)
    assert event.body["text"] == "-30.00 dBm applied, read +0.10 dB otherwise; generator 3"
    wrong = [
        {"channel": "west"}, {"at": "nowhere"}, {"applied_dbm": "-30"}, {"mean_dbm": None},
        {"valid_s": True}, {"highest_dbm": float("inf")}, {"note": 3},
    ]  # fmt: skip
    for one in wrong:
        with pytest.raises(ConfigError):
            event_of(REQUEST | one, ["east"], 7)


def kept(path: Path, differences_db: list[float], *, table: str = "a" * 64) -> None:
    """Checks an hour apart."""
    writer = writer_of(path)
    boot = writer.begin_boot("one", "machine")
    with Record.open(path) as held:
        before = len(checks_of(held))
    for i, off_db in enumerate(differences_db, before):
        more = {
            "mean_dbm": -30.0 + off_db, "count_table": table,
            "from_utc": text_of(UTC0 + 3600 * S * i),
            "to_utc": text_of(UTC0 + (3600 * i + 60) * S),
        }  # fmt: skip
        writer.commit(boot, Commit(events=(event_of(REQUEST | more, ["east"], i * S),)))
    writer.close()


HAND = [0.10, 0.30, 0.20, 0.40, 0.20, 0.00, 0.20, 0.20]
"""Centre 0.20, sigma 0.139264: worked by hand in tests/core/test_control_chart.py."""


def charted(capsys: pytest.CaptureFixture[str], path: Path, *more: object) -> Answer:
    return run(capsys, ["calibration", "chart", "--record", path, *more])


def test_the_chart_has_lines_signs_and_words(
    capsys: pytest.CaptureFixture[str], record: Path
) -> None:
    kept(record, [*HAND, 0.5])
    found = charted(capsys, record)
    assert found.code == 0
    lines = found.out.splitlines()
    assert lines[0] == "SIMULATED: these figures are invented"
    assert "east, level applied at the detector's port" in lines[1]
    assert "  centre +0.200, sigma 0.139" in lines
    assert "  warning beyond -0.079 and +0.479" in lines
    assert "  action beyond -0.218 and +0.618" in lines
    assert lines[-1].endswith("WARNING, above")
    centre, low, high = "       o       ", "    !   :", ":   !"
    assert lines[-2] == f"     8 2023-11-15T05:14:20Z   +0.200  {low}{centre}{high}      within"
    assert lines[-1].split("Z")[1] == "   +0.500      !   :       |       :o  !      WARNING, above"
    kept(record, [-0.3])
    found = charted(capsys, record)
    assert found.code == 1
    assert any(line.endswith("ACTION, below") for line in found.out.splitlines())
    assert "The last check calls for action" in found.out
    (chart,) = charted(capsys, record, "--json").document["charts"]
    assert chart["centre_db"] == pytest.approx(0.2)
    assert chart["sigma_db"] == pytest.approx(0.139264, abs=5e-7)
    assert (chart["last"], chart["action"]) == ("beyond an action line", True)
    assert charted(capsys, record, "--channel", "north").code == 0
    kept(record, [0.2])
    assert charted(capsys, record).code == 0


def test_another_detector_table_is_another_chart(
    capsys: pytest.CaptureFixture[str], record: Path
) -> None:
    kept(record, [*HAND, 5.0])
    kept(record, [0.0, 0.1], table="b" * 64)
    (chart,) = charted(capsys, record, "--json").document["charts"]
    assert (len(chart["checks"]), chart["checks_on_other_tables"]) == (2, 9)
    assert chart["centre_db"] is None
    found = charted(capsys, record)
    assert found.code == 0
    assert "2 of the 8 checks that make the lines" in found.out
    assert "9 earlier checks rest on other detector tables" in found.out


def test_the_least_sigma_is_said_and_can_be_given(
    capsys: pytest.CaptureFixture[str], record: Path
) -> None:
    kept(record, [0.1] * 8 + [0.3])
    assert charted(capsys, record).code == 1  # 0.2 dB are four times the least of 0.05 dB
    assert "sigma 0.050, the least allowed" in charted(capsys, record).out
    assert charted(capsys, record, "--repeatability", "0.1").code == 0
    assert charted(capsys, record, "--repeatability", "0").code == 1


def test_without_checks_there_is_a_word(capsys: pytest.CaptureFixture[str], record: Path) -> None:
    assert "no reference check yet" in charted(capsys, record).out


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (["--channel", "nowhere"], "channel 'nowhere': the record has east, north, up"),
        (["--repeatability", "nan"], "'nan' is not a number"),
    ],
)
def test_what_a_chart_cannot_be_asked(
    capsys: pytest.CaptureFixture[str], record: Path, options: list[str], words: str
) -> None:
    kept(record, HAND)
    found = charted(capsys, record, *options)
    assert (found.code, found.out) == (2, "")
    assert words in found.err


@pytest.mark.parametrize(
    "more",
    [{"applied_dbm": "loud"}, {"mean_dbm": float("nan")}, {"to_utc": "at noon"}, {"at": None}],
)
def test_a_check_in_the_record_that_is_none_is_one_line(
    capsys: pytest.CaptureFixture[str], record: Path, more: dict[str, object]
) -> None:
    body = {**event_of(REQUEST, ["east"], 5 * S).body, **more}
    body = {key: value for key, value in body.items() if value is not None}
    db = sqlite3.connect(record)
    values = (KIND, "east", json.dumps(body))
    db.execute(
        "INSERT INTO events (boot, boot_ns, kind, name, body) VALUES (1, 5, ?, ?, ?)", values
    )
    db.commit()
    db.close()
    found = charted(capsys, record)
    assert found.code == 3
    assert "a reference check in it cannot be read" in found.err
    assert found.err.count("\n") == 1
