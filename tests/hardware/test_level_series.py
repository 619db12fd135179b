"""Recorded level series: forms, gaps, disorder, pace, and a real one of half a year."""

from __future__ import annotations

import gzip
import time
from decimal import Decimal

import numpy as np
import pytest

from hardware import open_front_end, settings_for
from monitor.core.errors import ConfigError, DeviceError
from monitor.core.flags import Flag
from monitor.core.readings import MISSING

_opened = []


@pytest.fixture(autouse=True)
def _files_are_let_go():
    yield
    while _opened:
        _opened.pop().close()


def series(path, text=None, channels=1, clock_ns=time.monotonic_ns, simulated=False, **options):
    if text is not None:
        path.write_text(text, encoding="utf-8")
    options = {"file": path.name, "resolution": 0.001} | options
    if not {"level_column", "level_columns"} & options.keys():
        options["level_column"] = "dbm"
    settings = settings_for("level_series", options, path.parent)
    _opened.append(open_front_end(settings, channels, clock_ns, time.time_ns, simulated))
    return _opened[-1]


def all_of(front_end):
    batches = []
    while not front_end.status().ended:
        batches.append(front_end.read(0.1))
        assert len(batches) < 10_000
    return batches


def table(batches):
    times = np.concatenate([b.times_ns for b in batches])
    return times, np.concatenate([b.counts for b in batches])


def test_first_row_is_boot_time_zero_and_the_clock_fix(tmp_path):
    text = "time, dbm\n2012-05-01 00:00:00,-40.5\n2012-05-01T02:01:00+02:00,-41\n"
    front_end = series(tmp_path / "a.csv", text)
    times, counts = table(all_of(front_end))
    assert times.tolist() == [0, 60_000_000_000]
    assert counts.tolist() == [[-40500], [-41000]]
    assert front_end.owns_clock
    assert front_end.clock_fix == (0, 1_335_830_400_000_000_000)
    assert front_end.read(0.1).n == 0
    front_end.close()


def test_seconds_volts_several_columns_and_another_separator(tmp_path):
    text = "s;y;n;x\n10;0.5;note;1.25\n10.25;0.6;;1.3\n"
    front_end = series(
        tmp_path / "a.csv",
        text,
        channels=2,
        separator=";",
        time_column="s",
        level_columns=["x", "y"],
        clock_start="2026-03-01T00:00:00Z",
        resolution=0.0001,
    )
    times, counts = table(all_of(front_end))
    assert times.tolist() == [0, 250_000_000]
    assert counts.tolist() == [[12500, 5000], [13000, 6000]]
    assert front_end.clock_fix == (0, 1_772_323_200 * 10**9)


def test_gaps_disorder_and_what_is_no_number_are_counted(tmp_path):
    text = "time,dbm\n0,-1\n1,\n2,nan\n2,-9\n1.5,-9\nx,-9\n\n3\n3,oops\n9,-4\n"
    front_end = series(tmp_path / "a.csv", text)
    times, counts = table(all_of(front_end))
    assert (times // 10**9).tolist() == [0, 1, 2, 3, 9]
    assert counts[:, 0].tolist() == [-1000, MISSING, MISSING, MISSING, -4000]
    counters = front_end.status().counters
    assert counters["out_of_order"] == 2
    assert counters["malformed"] == 3
    assert counters["missing"] == 3
    assert counters["readings"] == 5


def test_disorder_across_the_pieces_of_a_long_file(tmp_path):
    rows = [f"{i},{-i % 100}" for i in range(70_000)]
    rows.insert(40_000, "17,-5")
    front_end = series(tmp_path / "a.csv", "time,dbm\n" + "\n".join(rows) + "\n")
    batches = all_of(front_end)
    times, counts = table(batches)
    assert (times == np.arange(70_000) * 10**9).all()
    assert (counts[:, 0] == -np.arange(70_000) % 100 * 1000).all()
    assert front_end.status().counters["out_of_order"] == 1
    assert max(b.n for b in batches) == 3600
    assert all(b.now_ns == b.times_ns[-1] for b in batches)


def minutes(count, first=0):
    return [f"2030-01-{1 + i // 1440:02}T{i // 60 % 24:02}:{i % 60:02}:00Z,-{i % 50}"
            for i in range(first, first + count)]  # fmt: skip


@pytest.mark.parametrize("at", [0, 500, 998])
@pytest.mark.parametrize("stray", ["2031-01-01T00:00:00Z,-7", "2029-01-01T00:00:00Z,-7"])
def test_one_stray_stamp_costs_one_row(at, stray, tmp_path):
    """A year late or a year early, first, in the middle or near the end: the rest stays."""
    rows = minutes(1000)
    front_end = series(tmp_path / "a.csv", "\n".join(["time,dbm", *rows[:at], stray, *rows[at:]]))
    times, counts = table(all_of(front_end))
    # A stamp that is early and stands first cannot be told from a gap of a year.
    lost = 0 if at == 0 and stray.startswith("2029") else 1
    assert times.size == 1001 - lost
    assert front_end.status().counters["out_of_order"] == lost
    if lost:
        assert (times == np.arange(1000) * 60 * 10**9).all()
        assert counts[:, 0].tolist() == [-1000 * (i % 50) for i in range(1000)]
        assert front_end.clock_fix == (0, 1_893_456_000 * 10**9)


def test_a_stray_stamp_across_the_pieces_of_a_long_file(tmp_path):
    rows = [f"{i},{-i % 100}" for i in range(70_000)]
    rows.insert(30_000, "99999999,-5")
    front_end = series(tmp_path / "a.csv", "time,dbm\n" + "\n".join(rows) + "\n")
    times, counts = table(all_of(front_end))
    assert (times == np.arange(70_000) * 10**9).all()
    assert (counts[:, 0] == -np.arange(70_000) % 100 * 1000).all()


def test_many_rows_out_of_order_are_an_error_that_names_them(tmp_path):
    """A series in two halves, the wrong way round; a share of 1 % passes, more does not."""
    rows = minutes(200, first=300) + minutes(300)
    path = tmp_path / "a.csv"
    with pytest.raises(ConfigError) as caught:
        series(path, "\n".join(["time,dbm", *rows]))
    assert "200 of 500 times are not after the one before, first at lines 2, 3, 4;" in str(
        caught.value
    )
    assert str(path) in str(caught.value)
    few = [*minutes(500), *minutes(5)]
    assert table(all_of(series(path, "\n".join(["time,dbm", *few]))))[0].size == 500
    with pytest.raises(ConfigError, match="6 of 506 times"):
        series(path, "\n".join(["time,dbm", *few, minutes(6)[5]]))


def test_rows_written_after_the_opening_stay_in_order(tmp_path):
    path = tmp_path / "a.csv"
    front_end = series(path, "time,dbm\n0,-1\n1,-2\n2,-3\n")
    with path.open("a") as file:
        file.write("1,-9\n3,-4\n")
    assert (table(all_of(front_end))[0] // 10**9).tolist() == [0, 1, 2, 3]
    assert front_end.status().counters["out_of_order"] == 1


def test_the_overload_word_is_no_level_and_above_range(tmp_path):
    text = "time,dbm\n0,-1\n1, OL\n2,-3\n3,over\n"
    front_end = series(tmp_path / "a.csv", text, overload="OL", simulated=True)
    (batch,) = all_of(front_end)
    assert batch.counts[:, 0].tolist() == [-1000, MISSING, -3000, MISSING]
    plain, over = int(Flag.SIMULATED), int(Flag.SIMULATED | Flag.ABOVE_RANGE)
    assert batch.flags.tolist() == [plain, over, plain, plain]
    counters = front_end.status().counters
    assert (counters["overload"], counters["malformed"]) == (1, 1)


def test_real_pace_gives_rows_when_they_are_due(tmp_path):
    now = [1000]
    front_end = series(
        tmp_path / "a.csv", "time,dbm\n0,1\n1,2\n2,3\n9,4\n", clock_ns=lambda: now[0], pace="real"
    )
    assert front_end.read(0.0).n == 1
    now[0] += 500_000_000
    waiting = front_end.read(0.0)
    assert (waiting.n, waiting.now_ns) == (0, 500_000_000)
    now[0] += 2_000_000_000
    batch = front_end.read(0.0)
    assert batch.counts[:, 0].tolist() == [2000, 3000]
    assert not front_end.status().ended
    now[0] += 90_000_000_000
    assert front_end.read(0.0).times_ns.tolist() == [9_000_000_000]
    assert front_end.status().ended


def test_simulated_series_are_marked(tmp_path):
    front_end = series(tmp_path / "a.csv", "time,dbm\n0,1\n", simulated=True)
    assert all_of(front_end)[0].flags.tolist() == [Flag.SIMULATED]


def test_a_packed_file_that_breaks_off_ends_and_says_so(tmp_path):
    rows = "\n".join(f"{i},{i * 7919 % 1000}" for i in range(60_000))
    packed = gzip.compress(f"time,dbm\n{rows}\n".encode())
    path = tmp_path / "a.csv.gz"
    path.write_bytes(packed[: len(packed) // 2])
    front_end = series(path)
    times, _ = table(all_of(front_end))
    assert 10_000 < times.size < 60_000
    assert "cannot be read further" in front_end.status().text


@pytest.mark.parametrize(
    ("text", "options", "words"),
    [
        ("time,rsl\n0,1\n", {}, "sensor.level_column: {} has no column 'dbm'; it has time, rsl"),
        ("t,dbm\n0,1\n", {}, "sensor.time_column: {} has no column 'time'"),
        ("", {}, "sensor.time_column: {} has no column 'time'; it has none"),
        ("time,dbm\n", {}, "sensor.time_column: {} has no row with a time"),
        ("time,dbm\nyesterday,1\n", {}, "sensor.time_column: {} has no row with a time"),
        ("time,dbm\n0,1\n", {"level_columns": ["dbm"], "level_column": "dbm"}, "either"),
        ("time,dbm\n0,1\n", {"level_columns": ["dbm", "time"]}, "2 columns for 1 channels"),
        ("time,dbm\n0,1\n", {"pace": "slow"}, "sensor.pace: 'slow' is not one of full, real"),
        ("time,dbm\n0,1\n", {"resolution": -1}, "sensor.resolution"),
        ("time,dbm\n0,1\n", {"separator": "::"}, "sensor.separator"),
        ("time,dbm\n0,1\n", {"clock_start": "noon"}, "sensor.clock_start"),
    ],
)
def test_wrong_options_and_files_are_one_line(text, options, words, tmp_path):
    path = tmp_path / "a.csv"
    with pytest.raises(ConfigError) as caught:
        series(path, text, **options)
    assert words.format(path) in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_missing_file_is_one_line(tmp_path):
    with pytest.raises(DeviceError) as caught:
        series(tmp_path / "none.csv")
    assert (
        str(caught.value)
        == f"sensor.file: {tmp_path / 'none.csv'} does not exist; correct the path"
    )
    assert caught.value.exit_code == 3


def test_half_a_year_of_a_real_link(recordings):
    """Source: the file's text by decimal arithmetic and a plain loop."""
    path = recordings / "level" / "cml_rsl_1min_2012-05_2012-10.csv.gz"
    begun = time.process_time()
    front_end = series(path, level_column="rsl")
    times, counts = table(all_of(front_end))
    taken_s = time.process_time() - begun
    with gzip.open(path, "rt") as file:
        rows = [row.rstrip("\n").split(",") for row in file][1:]
    expected = [
        MISSING if v.strip() in ("", "nan") else int((Decimal(v) * 1000).to_integral_value())
        for _, v in rows
    ]
    stamps = np.array([stamp.replace(" ", "T") for stamp, _ in rows], "datetime64[s]")
    assert counts[:, 0].tolist() == expected
    assert (times == (stamps - stamps[0]).astype(np.int64) * 10**9).all()
    assert front_end.clock_fix == (0, 1_335_830_400 * 10**9)
    assert taken_s < 5.0
