"""fieldsill averages: published averaging examples, pandas, formats of time, and mistakes."""

from __future__ import annotations

import math
from collections.abc import Iterable
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from tests.cli.command import Answer, run


def write(folder: Path, rows: Iterable[tuple[object, object]]) -> Path:
    path = folder / "series.csv"
    body = "".join(f"{time},{e}\n" for time, e in rows)
    path.write_text("time,e_v_per_m\n" + body, encoding="utf-8")
    return path


def steps(*spans: tuple[float, int]) -> list[tuple[int, float]]:
    """One reading a second of sqrt(value), so that the mean of E squared is that of value."""
    values = [math.sqrt(value) for value, seconds in spans for _ in range(seconds)]
    return list(enumerate(values))


@pytest.mark.parametrize(
    ("spans", "window_s", "expected", "tol"),
    [
        # Average-power examples of OET-65 Supplement B, SSB (duty 0.2) and RTTY, 1500 W
        # (examples E03, E05, E06): 10 min on, 10 off, 10 on within 30 min; 6 min on in 6.
        ([(300, 600), (0, 600), (300, 600)], 1800, 200, 1.5),
        ([(300, 360)], 360, 300, 1e-9),
        ([(1500, 600), (0, 600), (1500, 600)], 1800, 1000, 5),
        # Regulations for Hazardous Chemical Agents 2020, annexure 3 para 95 (example E09).
        ([(600, 300), (0, 600)], 900, 200, 1e-9),
        # Derived (examples E17, E18): 0 and 10 V/m for half the time each is 50 V2/m2; four
        # times the limit for 90 s of 360 s is once the limit.
        ([(0, 180), (100, 180)], 360, 50, 1e-9),
        ([(0, 400), (4, 90), (0, 400)], 360, 1.0, 1e-9),
    ],
)
def test_published_averages(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, spans: list[tuple[float, int]],
    window_s: int, expected: float, tol: float,
) -> None:  # fmt: skip
    path = write(tmp_path, steps(*spans))
    arguments = ["averages", path, "--averaging", window_s, "--every", 10, "--hold", 1, "--json"]
    rows = run(capsys, arguments).document["averages"]
    whole = [row["e_rms_v_per_m"] ** 2 for row in rows if row["valid_share"] == 1]
    assert max(whole) == pytest.approx(expected, abs=tol)


def test_equals_pandas_with_gaps(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """rolling('360s').mean() of E squared, forward-filled to one second with limit = hold."""
    draw = np.random.default_rng(5)
    seconds = np.unique(draw.choice(4000, 900, replace=False))
    seconds = seconds[(seconds < 1500) | (seconds > 2400)]
    e = draw.uniform(0, 10, seconds.size)
    hold = 7
    path = write(tmp_path, zip(seconds, (repr(float(v)) for v in e)))
    rows = run(capsys, ["averages", path, "--every", "1", "--hold", hold, "--json"]).document
    index = pd.to_datetime(np.arange(seconds[0], seconds[-1] + hold), unit="s")
    series = pd.Series(e**2, pd.to_datetime(seconds, unit="s")).reindex(index)
    filled = series.ffill(limit=hold - 1)
    rolling = filled.rolling("360s", min_periods=1)
    expected = dict(zip(range(seconds[0] + 1, seconds[-1] + hold + 1), rolling.mean()))
    count = dict(zip(range(seconds[0] + 1, seconds[-1] + hold + 1), rolling.count()))
    assert len(rows["averages"]) > 3000
    assert any(row["e_rms_v_per_m"] is None for row in rows["averages"])
    for row in rows["averages"]:
        end = row["end"]
        assert row["valid_share"] == pytest.approx(count[end] / 360, abs=1e-12)
        if row["e_rms_v_per_m"] is None:
            assert count[end] == 0
        else:
            assert row["e_rms_v_per_m"] ** 2 == pytest.approx(expected[end], rel=1e-9)


def test_a_one_in_ten_source_is_not_averaged_in_db(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """On for a tenth of the time, 40 dB down else: power mean -10 dB of the peak, dB mean -36."""
    path = write(tmp_path, ((i, 10 if i % 10 == 0 else 0.1) for i in range(720)))
    (row,) = [r for r in run(capsys, ["averages", path, "--json"]).document["averages"]
              if r["end"] == 600]  # fmt: skip
    peak_db = 20 * math.log10(row["e_rms_v_per_m"] / 10)
    assert peak_db == pytest.approx(-10.0, abs=0.01)
    assert row["e_max_v_per_m"] == 10
    out = run(capsys, ["averages", path]).out
    assert "averaging dB would read up to 95.0% of E (26.00 dB) too low" in out
    assert "averaging V/m would read up to 65.5% of E (9.26 dB) too low" in out
    assert "(-95.0%, -26.00 dB)" in out


def test_a_reading_of_zero_has_no_db(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = write(tmp_path, ((i, i % 2) for i in range(720)))
    out = run(capsys, ["averages", path]).out
    assert "undefined (a reading of 0 has no dB)" in out
    assert "averaging V/m would read up to 29.3%" in out


def ends(answer: Answer) -> list[object]:
    return [row["end"] for row in answer.document["averages"]]


def test_ends_are_in_the_files_own_unit(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    arguments = ["--every", "90", "--json"]
    path = write(tmp_path, ((i * 60 + 0.5, 1) for i in range(6)))
    assert ends(run(capsys, ["averages", path, *arguments]))[:3] == [90.5, 180.5, 270.5]
    path = write(tmp_path, ((1_700_000_000 + i * 60, 1) for i in range(6)))
    assert ends(run(capsys, ["averages", path, *arguments]))[0] == 1_700_000_090
    path = write(tmp_path, ((f"2031-05-01T07:{i:02}:00.25+02:00", 1) for i in range(6)))
    first, second = ends(run(capsys, ["averages", path, *arguments]))[:2]
    assert (first, second) == ("2031-05-01T05:01:30.25Z", "2031-05-01T05:03:00.25Z")


def test_hold_is_three_median_intervals(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = write(tmp_path, [(0, 3), (10, 3), (20, 3), (400, 3)])
    found = run(capsys, ["averages", path, "--averaging", "400", "--every", "400", "--json"])
    assert found.document["hold_s"] == 30
    assert found.document["averages"][0]["valid_share"] == pytest.approx(50 / 400)


def test_where_nothing_is_valid_there_is_no_figure(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    path = write(tmp_path, [(0, 3), (1, ""), (2000, 3)])
    rows = run(capsys, ["averages", path, "--hold", "5", "--json"]).document["averages"]
    assert rows[0]["valid_share"] == pytest.approx(1 / 360)
    empty = next(row for row in rows if row["end"] == 1200)
    assert empty == {
        "end": 1200, "e_rms_v_per_m": None, "valid_share": 0.0, "e_max_v_per_m": None
    }  # fmt: skip
    assert " - " in run(capsys, ["averages", path, "--hold", "5"]).out


def test_more_columns_and_any_order_are_read(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    path = tmp_path / "series.csv"
    path.write_text("\ufeffnote,e_v_per_m,time\na,2,0\nb,2,60\n\n", encoding="utf-8")
    rows = run(capsys, ["averages", path, "--json"]).document["averages"]
    assert rows[0]["e_rms_v_per_m"] == 2


@pytest.mark.parametrize(
    ("body", "says"),
    [
        ("", ":1: no column 'time'"),
        ("time,e\n1,2\n", ":1: no column 'e_v_per_m'"),
        ("time,e_v_per_m\n", "holds no reading"),
        ("time,e_v_per_m\n1,2\n1,3\n", ":3: time 1 is not after the line before"),
        ("time,e_v_per_m\n2,2\n1,3\n", ":3: time 1 is not after"),
        ("time,e_v_per_m\n1,2\n2,-3\n", ":3: e_v_per_m -3"),
        ("time,e_v_per_m\n1,2\n2,nan\n", ":3: e_v_per_m 'nan' is not a number"),
        ("time,e_v_per_m\n1,2\n2,inf\n", ":3: e_v_per_m 'inf' is not a number"),
        ("time,e_v_per_m\n1,2\n2,loud\n", ":3: e_v_per_m 'loud' is not a number"),
        ("time,e_v_per_m\n1,2\nnan,3\n", ":3: 'nan' is neither seconds nor"),
        ("time,e_v_per_m\n1,2\nnoon,3\n", ":3: 'noon' is neither seconds nor"),
        ("time,e_v_per_m\n1,2\n3\n", ":3: too few columns"),
        ("time,e_v_per_m\n2031-05-01T07:12:00,2\n", ":2: '2031-05-01T07:12:00' is neither"),
        (
            "time,e_v_per_m\n2031-13-01T07:12:00Z,2\n",
            ":2: '2031-13-01T07:12:00Z' is not a time: month must",
        ),
        ("time,e_v_per_m\n9999-12-31T07:12:00Z,1\n", "'9999-12-31T07:12:00Z' is too far away"),
        ("time,e_v_per_m\n0001-01-01T00:00:00Z,1\n", "'0001-01-01T00:00:00Z' is too far away"),
        ("time,e_v_per_m\n1,2\n9000000001,2\n", ":3: '9000000001' is out of range"),
        ("time,e_v_per_m\n0,1e200\n1,2\n", ":2: e_v_per_m 1e200 is not within 0 to 1e+09 V/m"),
        ("time,e_v_per_m\n1,2\n2,1_0\n", ":3: e_v_per_m '1_0' is not a number"),
        ("time,e_v_per_m\n1,2\n2_0,1\n", ":3: '2_0' is neither seconds nor"),
        ("time,e_v_per_m\n2031-05-01T07:12:00Z,2\n5,2\n", ":3: '5' is not an RFC 3339 time"),
        ("time,e_v_per_m\n1,2\n", "--hold"),
        ("time,e_v_per_m\n1,2\n2000000000,2\n", "too many steps"),
    ],
)
def test_mistakes_name_file_and_line(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, body: str, says: str
) -> None:
    path = tmp_path / "series.csv"
    path.write_text(body, encoding="utf-8")
    found = run(capsys, ["averages", path])
    assert found.code == 2
    assert found.out == ""
    assert f"{path}" in found.one_line
    assert says in found.one_line


@pytest.mark.parametrize(
    ("more", "code", "says"),
    [
        (["--averaging", "0"], 2, "not a duration"),
        (["--averaging", "-360"], 2, "not a duration"),
        (["--averaging", "1e19"], 2, "'1e19': too long"),
        (["--every", "1e300h"], 2, "too long"),
        (["--hold", "2e8"], 2, "too long"),
        (["--every", "soon"], 2, "not a number"),
        (["--hold", "1e-12"], 2, "nanosecond"),
        (["--record", "x.db"], 2, "leave FILE out"),
        (["--from", "2031-05-01"], 2, "leave FILE out"),
    ],
)
def test_mistaken_options(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, more: list[str], code: int, says: str
) -> None:
    path = write(tmp_path, [(0, 1), (1, 1)])
    found = run(capsys, ["averages", path, *more])
    assert (found.code, found.out) == (code, "")
    assert says in found.one_line


def test_files_that_are_not_there(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    missing = run(capsys, ["averages", tmp_path / "none.csv"])
    assert missing.code == 3
    assert "none.csv" in missing.one_line
    no_record = run(capsys, ["averages", "--record", tmp_path / "none.db"])
    assert no_record.code == 3
    assert "none.db" in no_record.one_line
    wrong = run(capsys, ["averages", "--record", tmp_path / "none.db", "--from", "yesterday"])
    assert (wrong.code, "--from" in wrong.one_line) == (2, True)
