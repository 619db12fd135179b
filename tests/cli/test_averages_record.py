"""fieldsill averages --record: the windows that a record holds, its spans, and its mark."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from monitor.core.flags import Flag
from monitor.core.rows import FieldRows
from monitor.record.types import ClockFix, Commit
from tests.cli.command import run
from tests.record.making import writer_of

S = 1_000_000_000
UTC_S = 1_919_000_000
FIRST = "2030-10-23T15:38:20Z"  # UTC_S + 300 s


def fields(flag: int) -> FieldRows:
    """Ends 60 s to 600 s after the start, 360 s windows; the fourth has no valid part."""
    n = 10
    end = 60 * S * np.arange(1, n + 1)
    e2 = np.arange(1.0, n + 1) ** 2
    e2[3] = np.nan
    return FieldRows(
        end, np.full(n, 360), np.nan_to_num(e2) / 4, e2, e2 * 4, e2 * 9, np.full(n, 2.5),
        np.full(n, 1.96), np.where(np.isnan(e2), 0.0, 0.9), np.ones(n), np.full(n, flag),
        np.zeros(n),
    )  # fmt: skip


@pytest.fixture
def record(tmp_path: Path) -> Path:
    path = tmp_path / "record.db"
    writer = writer_of(path, simulated=True)
    boot = writer.begin_boot("made-up", "machine")
    fix = ClockFix(0, UTC_S * S, "made up", 1)
    writer.commit(
        boot, Commit(None, None, None, fields(int(Flag.CLIPPED)), None, clock_fixes=(fix,))
    )
    writer.close()
    return path


def test_every_window_with_its_three_figures(
    capsys: pytest.CaptureFixture[str], record: Path
) -> None:
    found = run(capsys, ["averages", "--record", record, "--json"])
    rows = found.document["averages"]
    assert found.code == 0
    assert found.document["simulated"] is True
    assert len(rows) == 10
    assert rows[4] == {
        "end": FIRST,
        "e_rms_v_per_m": pytest.approx(5.0),
        "valid_share": pytest.approx(0.9),
        "e_max_v_per_m": pytest.approx(15.0),
        "e_low_v_per_m": pytest.approx(2.5),
        "e_high_v_per_m": pytest.approx(10.0),
        "below_v_per_m": None,
        "at_least_v_per_m": pytest.approx(2.5 / 10**0.125),  # with U of 2.5 dB
        "expanded_uncertainty_db": pytest.approx(2.5),
        "widened_by_drift_db": 0.0,
        "flags": ["converter clipped"],
    }
    assert rows[3]["e_rms_v_per_m"] is None


def test_a_span_takes_the_windows_that_end_in_it(
    capsys: pytest.CaptureFixture[str], record: Path
) -> None:
    """Ends in (from, to]: a window that ends with the begin of the span lies before it."""
    to = "2030-10-23T17:40:20+02:00"
    rows = run(capsys, ["averages", "--record", record, "--from", FIRST, "--to", to, "--json"])
    assert [row["e_rms_v_per_m"] for row in rows.document["averages"]] == [6.0, 7.0]
    day = run(capsys, ["averages", "--record", record, "--from", "2030-10-24", "--json"])
    assert day.document["averages"] == []


def test_for_people(capsys: pytest.CaptureFixture[str], record: Path) -> None:
    out = run(capsys, ["averages", "--record", record]).out
    assert out.startswith("SIMULATED")
    assert "converter clipped" in out
    other = run(capsys, ["averages", "--record", record, "--averaging", "30min"]).out
    assert "no window of 1800 s" in other


@pytest.mark.parametrize(
    ("more", "says"),
    [
        (["--from", "2031-01-01", "--to", "2030-01-01"], "--from must be before --to"),
        (["--averaging", "360.5"], "whole seconds"),
        (["--averaging", "1e19"], "'1e19': too long"),
        (["--to", "9999-01-01"], "--to: '9999-01-01T00:00:00Z' is too far away"),
        (["--from", "0001-01-01T00:00:00Z"], "--from: '0001-01-01T00:00:00Z' is too far away"),
        (["--to", "tomorrow"], "--to: 'tomorrow' is not an RFC 3339 time"),
    ],
)
def test_mistakes_are_one_line(
    capsys: pytest.CaptureFixture[str], record: Path, more: list[str], says: str
) -> None:
    found = run(capsys, ["averages", "--record", record, *more])
    assert (found.code, found.out) == (2, "")
    assert says in found.one_line


@pytest.mark.parametrize(
    ("more", "bounded"),
    [(Flag(0), True), (Flag.COMPONENT_ONLY, True), (Flag.LOG_AVERAGED, False)],
)
def test_below_the_detection_limit_it_says_below_and_no_mean(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, more: Flag, bounded: bool
) -> None:
    """Averaged logs of bursts read 6 to 19 dB low: what they are below of bounds no field."""
    path = tmp_path / "weak.db"
    writer = writer_of(path, simulated=True)
    boot = writer.begin_boot("made-up", "machine")
    fix = ClockFix(0, UTC_S * S, "made up", 1)
    rows = fields(int(Flag.BELOW_RANGE | more))
    writer.commit(boot, Commit(None, None, None, rows, None, clock_fixes=(fix,)))
    writer.close()
    row = run(capsys, ["averages", "--record", path, "--json"]).document["averages"][4]
    assert row["e_rms_v_per_m"] is None
    assert row["below_v_per_m"] == (pytest.approx(10.0) if bounded else None)
    assert row["at_least_v_per_m"] is None
    assert row["expanded_uncertainty_db"] is None
    assert ("<10" in run(capsys, ["averages", "--record", path]).out) is bounded


def test_a_lower_bound_has_no_highest_figure(
    capsys: pytest.CaptureFixture[str], record: Path
) -> None:
    """By hand: low 2.5 / 10^(2.5 / 20) with U, rounded down, high 10, largest 15 V/m;
    a clipped converter hides how much more it was."""
    out = run(capsys, ["averages", "--record", record]).out
    row = next(line for line in out.splitlines() if FIRST in line)
    assert row.split()[1:5] == ["2.5", ">=1.874", "-", "15"]


@pytest.mark.parametrize("option", ["--every", "--hold"])
def test_options_of_a_file_are_not_passed_over(
    capsys: pytest.CaptureFixture[str], record: Path, option: str
) -> None:
    found = run(capsys, ["averages", "--record", record, option, "600"])
    assert found.code == 2
    assert "--every and --hold go with a FILE" in found.one_line
