"""No peak is averaged away, no gap is bridged, whatever the span."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from monitor.core.rows import BlockRows
from monitor.record.coverage import MOST_GAPS
from monitor.record.reader import Record
from monitor.record.types import Commit
from monitor.record.writer import Writer
from tests.record.making import (
    MINUTE,
    UTC0,
    S,
    blocks,
    exposure_rows,
    field_rows,
    fix,
    heard,
    writer_of,
)

HOUR = 60 * MINUTE
DAY = 24 * HOUR


@pytest.fixture
def writer(tmp_path: Path) -> Writer:
    """A writer whose boot 1 began at UTC0."""
    made = writer_of(tmp_path / "site.db")
    made.commit(made.begin_boot("b", "rehearsal"), fix())
    return made


def _minutes(first: int, last: int) -> np.ndarray:
    return MINUTE * np.arange(first, last)


def _put(writer: Writer, ends: np.ndarray, e2: np.ndarray, boot: int = 1) -> None:
    rows = exposure_rows(ends, e2 / 100)
    known = heard(ends[~np.isnan(e2)])
    writer.commit(boot, Commit(blocks=known, fields=field_rows(ends, e2), exposures=rows))


def test_every_window_where_they_fit(writer: Writer) -> None:
    ends = _minutes(1, 101)
    e2 = np.arange(100.0) + 1
    _put(writer, ends, e2)
    with Record.open(writer.path) as record:
        found = record.history(UTC0, UTC0 + 100 * MINUTE, 360, 1000)
        other = record.history(UTC0, UTC0 + 100 * MINUTE, 1800, 1000)
    assert found.bin_ns == 0
    assert found.utc_ns.tolist() == (UTC0 + ends).tolist()
    assert np.array_equal(found.e_mean**2, np.sqrt(e2) ** 2)
    assert np.allclose(found.e_max**2, 3 * e2, rtol=1e-15)
    assert np.array_equal(found.ratios[1][1], e2 / 100)
    assert list(found.ratios) == [1]
    assert [set(column.tolist()) for column in found.ratio_u[1]] == [{1.5}, {0.0}]
    assert np.array_equal(found.base_u_db, found.u_db)  # nothing adds in these rows
    assert not found.added_e2.any()
    assert found.gaps == []
    assert other.utc_ns.size == 0
    assert other.gaps == []  # a gap is one whatever the averaging time


@pytest.mark.parametrize("at_most", [1, 20, 40, 399])
def test_a_reduction_keeps_the_largest_and_the_smallest(writer: Writer, at_most: int) -> None:
    """Against a plain loop over the same equal bins."""
    ends = _minutes(1, 401)
    e2 = np.random.default_rng(at_most).lognormal(0, 2, 400)
    e2[::13] = np.nan
    _put(writer, ends, e2)
    with Record.open(writer.path) as record:
        found = record.history(UTC0, UTC0 + 400 * MINUTE, 360, at_most)
    assert 0 < found.utc_ns.size <= at_most
    first = int(ends[0]) - 1
    width = -(-(int(ends[-1]) - first) // at_most)
    bins = (ends - first - 1) // width
    assert found.bin_ns == width
    for i, number in enumerate(np.unique(bins)):
        inside = e2[bins == number]
        known = inside[~np.isnan(inside)]
        top, low = (known.max(), known.min()) if known.size else (np.nan, np.nan)
        lows = np.nan_to_num(inside).min() / 2
        assert found.e_mean[i] == pytest.approx(np.sqrt(top), nan_ok=True)
        assert found.e_low[i] == pytest.approx(np.sqrt(lows))
        assert found.ratios[1][0][i] == pytest.approx(low / 200, nan_ok=True)
        assert found.ratios[1][2][i] == pytest.approx(top / 50, nan_ok=True)
        assert found.utc_ns[i] == UTC0 + ends[bins == number].max()


def test_a_peak_of_one_minute_survives_ten_years(writer: Writer) -> None:
    rng = np.random.default_rng(5)
    for day in range(0, 3650, 73):
        ends = DAY * day + _minutes(1, 121)
        e2 = rng.random(120)
        if day == 730:
            e2[77] = 1e4
        _put(writer, ends, e2)
    with Record.open(writer.path) as record:
        found = record.history(UTC0, UTC0 + 3650 * DAY, 360, 40)
    assert found.bin_ns > 80 * DAY
    assert found.utc_ns.size <= 40
    assert found.e_mean.max() == 100.0
    assert found.ratios[1][1].max() == 100.0
    peak = int(found.utc_ns[found.e_mean.argmax()]) - UTC0
    assert 730 * DAY <= peak <= 730 * DAY + found.bin_ns
    assert len(found.gaps) == 50
    assert found.gaps[3] == (UTC0 + 219 * DAY + 2 * HOUR, UTC0 + 292 * DAY)


@pytest.mark.parametrize(("at_most", "unit"), [(40, DAY), (40 * 24, HOUR), (10**9, 0)])
def test_every_source_tells_the_same(writer: Writer, at_most: int, unit: int) -> None:
    """From windows, hours and days alike: the largest, the smallest and where it is silent."""
    e2 = np.random.default_rng(8).lognormal(0, 1, 40 * 1440)
    e2[5 * 1440 + 100 : 9 * 1440 + 7] = np.nan
    ends = _minutes(1, 40 * 1440 + 1)
    _put(writer, ends, e2)
    with Record.open(writer.path) as record:
        found = record.history(UTC0, UTC0 + 40 * DAY, 360, at_most)
    assert found.bin_ns == unit
    assert np.nanmax(found.e_mean) == np.sqrt(np.nanmax(e2))
    assert np.nanmin(found.ratios[1][0]) == np.nanmin(e2) / 200
    assert found.valid_share.min() == 0.0
    assert found.gaps == [
        (UTC0 + 5 * DAY + 100 * MINUTE, UTC0 + 9 * DAY + 7 * MINUTE),
    ]
    assert np.all(np.diff(found.utc_ns) > 0)


def test_gaps_are_missing_minutes_and_minutes_without_a_valid_part(writer: Writer) -> None:
    e2 = np.ones(100)
    e2[20:30] = np.nan  # ends at minutes 21 to 30
    ends = _minutes(1, 101)
    keep = np.r_[0:50, 60:100]  # ends at minutes 51 to 60 are not there
    _put(writer, ends[keep], e2[keep])
    with Record.open(writer.path) as record:
        found = record.history(UTC0 - 10 * MINUTE, UTC0 + 110 * MINUTE, 360, 1000)
        inside = record.history(UTC0 + 22 * MINUTE, UTC0 + 28 * MINUTE, 360, 1000)
    minutes = [((a - UTC0) // MINUTE, (b - UTC0) // MINUTE) for a, b in found.gaps]
    assert minutes == [(-10, 0), (20, 30), (50, 60), (100, 110)]
    assert inside.gaps == [(UTC0 + 22 * MINUTE, UTC0 + 28 * MINUTE)]


def test_the_minute_that_is_not_over_is_no_gap(writer: Writer) -> None:
    _put(writer, _minutes(1, 11), np.ones(10))
    with Record.open(writer.path) as record:
        assert record.history(UTC0, UTC0 + 10 * MINUTE + 59 * S, 360, 100).gaps == []
        late = record.history(UTC0, UTC0 + 11 * MINUTE + S, 360, 100).gaps
    assert late == [(UTC0 + 10 * MINUTE, UTC0 + 11 * MINUTE + S)]


def test_boots_are_put_in_the_order_of_utc_and_the_time_between_is_a_gap(writer: Writer) -> None:
    _put(writer, _minutes(1, 11), np.full(10, 4.0))
    earlier = writer.begin_boot("earlier", "rehearsal")
    writer.commit(earlier, fix(HOUR, UTC0 - HOUR))
    _put(writer, HOUR + _minutes(1, 6), np.full(5, 1.0), earlier)
    unknown = writer.begin_boot("no clock", "rehearsal")
    _put(writer, _minutes(1, 6), np.full(5, 1e9), unknown)
    with Record.open(writer.path) as record:
        found = record.history(UTC0 - HOUR, UTC0 + 10 * MINUTE, 360, 100)
    assert found.e_mean.tolist() == [1.0] * 5 + [2.0] * 10
    assert np.all(np.diff(found.utc_ns) > 0)
    assert found.gaps == [(UTC0 - 55 * MINUTE, UTC0)]


def test_a_later_fix_moves_the_past(writer: Writer) -> None:
    _put(writer, _minutes(1, 11), np.ones(10))
    writer.commit(1, fix(0, UTC0 + DAY))
    writer.commit(1, fix(10 * MINUTE, UTC0 + DAY + 10 * MINUTE))
    with Record.open(writer.path) as record:
        assert record.history(UTC0, UTC0 + HOUR, 360, 100).utc_ns.size == 0
        assert record.history(UTC0 + DAY, UTC0 + DAY + HOUR, 360, 100).utc_ns.size == 10


def test_hours_are_the_same_however_the_commits_are_cut(tmp_path: Path) -> None:
    e2 = np.random.default_rng(1).random(600)
    ends = _minutes(1, 601)
    found = []
    for size in (600, 7):
        writer = writer_of(tmp_path / f"{size}.db")
        writer.commit(writer.begin_boot("b", "rehearsal"), fix())
        for at in range(0, 600, size):
            _put(writer, ends[at : at + size], e2[at : at + size])
        with Record.open(writer.path) as record:
            found.append(
                record._all("SELECT * FROM field_spans")  # noqa: SLF001
                + record._all("SELECT * FROM exposure_spans")  # noqa: SLF001
                + record._all("SELECT * FROM measured_hours")  # noqa: SLF001
            )
        writer.close()
    assert found[0] == found[1]
    assert len(found[0]) == 32  # ten hours and a day of a field and a ratio, ten hours measured


@pytest.mark.parametrize("bad", [(5, 5, 10), (6, 5, 10), (0, 5, 0)])
def test_an_impossible_span_is_refused(writer: Writer, bad: tuple[int, int, int]) -> None:
    with Record.open(writer.path) as record, pytest.raises(ValueError, match="start < end"):
        record.history(bad[0], bad[1], 360, bad[2])


def test_gaps_and_measured_time_do_not_hang_on_the_averaging_time(writer: Writer) -> None:
    """Five minutes heard of every thirty: each half hour has valid parts, five sixths have none."""
    ends = _minutes(1, 12 * 60 + 1)
    on = ends[(ends // MINUTE - 1) % 30 < 5]
    known = heard(on)
    for averaging_s in (360, 1800):
        fields = field_rows(ends, np.ones(ends.size), averaging_s=averaging_s)
        writer.commit(1, Commit(blocks=known, fields=fields))
    with Record.open(writer.path) as record:
        for averaging_s in (360, 1800):
            found = record.history(UTC0, UTC0 + 12 * HOUR, averaging_s, 5000)
            assert len(found.gaps) == 24
            assert found.gaps[0] == (UTC0 + 5 * MINUTE, UTC0 + 30 * MINUTE)
            assert sum(end - start for start, end in found.gaps) == 10 * HOUR
            assert found.measured_share == pytest.approx(1 / 6, abs=1e-12)
        year = record.history(UTC0, UTC0 + 3650 * DAY, 1800, 40)
    assert len(year.gaps) == 24
    assert year.measured_share == pytest.approx(1 / 6, abs=1e-12)
    assert found.coverage.measured_s(UTC0 + HOUR, UTC0 + HOUR + 2 * MINUTE) == 120.0
    assert found.coverage.measured_s(UTC0 + HOUR, UTC0 + 2 * HOUR) == 600.0
    assert found.coverage.measured_s(UTC0 + 6 * MINUTE, UTC0 + 20 * MINUTE) == 0.0


def test_valid_time_is_that_of_the_poorest_channel_and_counted_once(writer: Writer) -> None:
    """Against the plain sum over the blocks, whatever is committed again."""
    rng = np.random.default_rng(3)
    rows = blocks(0, 720, seed=3)
    keep = np.repeat(rng.random(720) < 0.7, 3)
    rows = BlockRows(*(getattr(rows, name)[keep] for name in BlockRows.__slots__))
    half = rows.start_ns.size // 6 * 3
    parts = [
        BlockRows(*(getattr(rows, name)[at] for name in BlockRows.__slots__))
        for at in (slice(half, None), slice(0, half + 30), slice(None))
    ]
    for part in parts:
        writer.commit(1, Commit(blocks=part))
    expected = rows.covered_ns.reshape(-1, 3).min(axis=1)
    last_ns = int(rows.start_ns[-1]) + 10 * S
    with Record.open(writer.path) as record:
        found = record.history(UTC0, UTC0 + last_ns, 360, 100)
        stored = record._all("SELECT sum(measured_ns) FROM measured_hours")  # noqa: SLF001
    assert stored == [(int(expected.sum()),)]
    assert found.coverage.measured_s(UTC0, UTC0 + last_ns) == pytest.approx(expected.sum() / 1e9)
    assert found.measured_share == pytest.approx(expected.sum() / last_ns)


def test_a_quiet_station_that_lives_is_not_taken_for_measured(writer: Writer) -> None:
    """The hourly clock fix tells that the box was there, and that nothing came."""
    _put(writer, _minutes(1, 61), np.ones(60))
    with Record.open(writer.path) as record:
        assert record.history(UTC0, UTC0 + DAY, 360, 100).measured_share == pytest.approx(1)
    writer.commit(1, fix(2 * HOUR, UTC0 + 2 * HOUR))
    with Record.open(writer.path) as record:
        found = record.history(UTC0, UTC0 + DAY, 360, 100)
    assert found.measured_share == pytest.approx(1 / 2)
    assert found.coverage.until_ns == UTC0 + 2 * HOUR


def test_only_the_longest_gaps_are_listed_where_there_are_too_many(writer: Writer) -> None:
    every_third = _minutes(1, 9001)[::3]
    keep = (every_third < 600 * MINUTE) | (every_third > 700 * MINUTE)
    writer.commit(1, Commit(blocks=heard(every_third[keep])))
    with Record.open(writer.path) as record:
        found = record.history(UTC0, UTC0 + 9000 * MINUTE, 360, 100)
    assert len(found.gaps) == MOST_GAPS
    assert max(end - start for start, end in found.gaps) > 100 * MINUTE
    assert found.gaps == sorted(found.gaps)
    assert found.coverage.share(UTC0, UTC0 + 9000 * MINUTE) == pytest.approx(
        keep.sum() / 9000, abs=1e-9
    )
