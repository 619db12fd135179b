"""What the page of the past says of its figures: bounds, partial averages, alarms, the future."""

from __future__ import annotations

import dataclasses
import html
import re
from pathlib import Path

import numpy as np
import pytest

from dashboard import chart, events, past, span
from dashboard.words import utc_of
from monitor.core.flags import UPPER_BOUND, Flag
from monitor.record.types import EventRow, History, Latest, LatestExposure
from tests.dashboard.fakes import DAY_NS, KEY, NOON_NS, SCOPES, FakeRecord, S, client_over, snapshot


def _get(folder: Path, query: str = "", record: FakeRecord | None = None) -> str:
    answer = client_over(snapshot(), folder, record).get(f"/history{query}")
    assert answer.status_code == 200
    return re.sub(r"\s+", " ", html.unescape(answer.text))


class Judged(FakeRecord):
    """The newest ratios of two limits; the thirty-minute one of the public is the larger."""

    def latest(self) -> Latest | None:
        ends_ns = DAY_NS + 12 * 3600 * S
        found = tuple(
            LatestExposure(i, SCOPES[i], ratio, ratio, ratio, 2.0, 1, 0.0)
            for i, ratio in ((3, 0.1), (5, 0.4), (2, 0.9))
        )
        return Latest(3, "machine", 0, ends_ns, 0, ends_ns, (), found, 0)


class Flagged(FakeRecord):
    """Every average carries a flag."""

    def __init__(self, flag: Flag) -> None:
        super().__init__()
        self.flag = flag

    def history(
        self, start_utc_ns: int, end_utc_ns: int, averaging_s: int, at_most: int
    ) -> History:
        found = super().history(start_utc_ns, end_utc_ns, averaging_s, at_most)
        u_db = np.full(found.utc_ns.size, np.nan) if self.flag & UPPER_BOUND else found.u_db
        flags = np.full(found.utc_ns.size, int(self.flag))
        return dataclasses.replace(found, flags=flags, u_db=u_db)


class Binned(Flagged):
    """As the record reduces a long span: the smallest lower figure beside the largest mean."""

    def history(
        self, start_utc_ns: int, end_utc_ns: int, averaging_s: int, at_most: int
    ) -> History:
        found = super().history(start_utc_ns, end_utc_ns, averaging_s, at_most)
        if end_utc_ns - start_utc_ns < 7200 * S:
            return found
        return dataclasses.replace(found, bin_ns=1800 * S, e_low=found.e_low * 0.01)


def test_it_opens_on_the_limit_that_the_present_shows_largest(tmp_path: Path) -> None:
    page = _get(tmp_path, record=Judged())
    assert "Thirty-minute averages" in page
    assert "The ledge is the limit of 47 CFR 1.1310, general public, whole body, 30 min." in page
    short = _get(tmp_path, "?averaging=360", record=Judged())
    assert "The ledge is the limit of ICNIRP 2020, general public, local, 6 min." in short
    asked = _get(tmp_path, "?scope=1", record=Judged())
    assert "The ledge is the limit of ICNIRP 2020, general public, whole body, 30 min." in asked


def test_the_largest_average_is_called_the_bound_that_it_is(tmp_path: Path) -> None:
    low = _get(tmp_path, "?show=ratio", record=Flagged(Flag.COMPONENT_ONLY))
    assert re.search(r"Largest six-minute average: at least 0\.\d+ of the limit, ending", low)
    high = _get(tmp_path, record=Flagged(Flag.BELOW_RANGE))
    assert re.search(r"Largest six-minute average: below \d+ V/m, ending", high)
    assert re.search(r"Largest six-minute average: \d+ V/m, ending", _get(tmp_path))


def test_a_bound_is_that_of_one_average_and_not_of_a_bin(tmp_path: Path) -> None:
    whole = _get(tmp_path, record=Flagged(Flag.COMPONENT_ONLY))
    binned = _get(tmp_path, record=Binned(Flag.COMPONENT_ONLY))
    (said,) = set(re.findall(r"<p>(Largest [^<]+)", whole))
    assert said in binned


def test_reservations_of_a_span_are_explained(tmp_path: Path) -> None:
    page = _get(tmp_path, record=Flagged(Flag.CLOCK_UNSYNCHRONISED))
    assert "Clock unsynchronised: times may be wrong; connect the box to a time server." in page


def test_alarms_are_marked_on_the_curve_by_the_number_of_their_line(tmp_path: Path) -> None:
    page = _get(tmp_path)
    assert page.count('class="pennant"') == 2  # one in each of the two drawings
    assert len(re.findall(r'class="pennant-text"[^>]*>1</text>', page)) == 2
    assert '<span class="number">1</span> <span class="when">2025-03-01 01:00 UTC' in page
    assert "A numbered pennant: an alarm began, named under What happened. Limits" in page


def test_pennants_stand_at_their_time_and_numbers_keep_off_each_other() -> None:
    frame, day = chart.Frame(1080, 400), span.day(utc_of(DAY_NS))
    began = [(DAY_NS + 6 * 3600 * S, 1), (DAY_NS + 6 * 3600 * S + 60 * S, 2), (NOON_NS, 3)]
    placed = chart.pennants(began, day, frame)
    assert [number for _, number in placed] == ["1", "", "3"]
    assert placed[2][0] == frame.left + (frame.x1 - frame.left) / 2


def test_alarms_that_end_are_not_numbered() -> None:
    found = [
        EventRow(DAY_NS, 3, 0, "alarm", KEY, {"raised": raised, "exposure_ratio": 0.5})
        for raised in (True, False, True)
    ]
    assert [line.number for line in events.numbered(found)] == [1, 0, 2]


def test_the_band_says_that_it_leaves_the_uncertainty_out(tmp_path: Path) -> None:
    assert "It does not include the expanded uncertainty (up to 2.6 dB)" in _get(tmp_path)
    in_ratio = _get(tmp_path, "?show=ratio")
    assert "It does not include the expanded uncertainty (of E up to 2.6 dB)" in in_ratio


def test_half_of_a_limit_in_field_strength_is_explained(tmp_path: Path) -> None:
    said = "half of a limit is 0.71 of it in V/m"
    assert said in _get(tmp_path)
    assert said not in _get(tmp_path, "?show=ratio")


def test_averages_of_too_little_valid_time_are_marked_in_the_table(tmp_path: Path) -> None:
    page = _get(tmp_path, "?from=2025-03-01T04:00Z&to=2025-03-01T05:00Z")
    assert re.search(r"<td><b>\d+</b>\*|\d\*</td>", page)
    assert "* Less than 75 % of the time of this average is valid" in page
    whole = _get(tmp_path, "?from=2025-03-01T06:00Z&to=2025-03-01T07:00Z")
    assert "* Less than" not in whole


def test_what_lies_ahead_is_not_called_unmeasured(tmp_path: Path) -> None:
    page = _get(tmp_path, "?from=2025-04-01&to=2025-04-02")
    assert "This span lies ahead: there is no six-minute average of it yet." in page
    assert "no measurement" not in page.replace("Hatched: no measurement", "")


def test_a_point_is_below_only_where_all_of_its_averages_are() -> None:
    """A point of an hour has the flags of any of its averages, and the U of those that have one."""
    none = FakeRecord().history(DAY_NS, DAY_NS + 3600 * S, 360, 1000)
    u_db = np.where(np.arange(none.utc_ns.size) % 2, 2.6, np.nan)
    flags = np.full(none.utc_ns.size, int(Flag.BELOW_RANGE))
    mixed = dataclasses.replace(none, flags=flags, u_db=u_db, bin_ns=1800 * S)
    assert past.series_of(mixed, None, NOON_NS).below.tolist() == np.isnan(u_db).tolist()
    assert not past.series_of(none, None, NOON_NS).below.any()


@pytest.mark.parametrize(
    ("name", "body", "what", "text"),
    [
        ("000007-x_y", {"bytes": 4_900_000, "covers": True}, "Recording kept",
         "000007-x_y, 4.9 MB, of the samples when an alarm began"),
        ("000007-x", {"bytes": 4_900_000, "covers": False}, "Recording kept",
         "000007-x, 4.9 MB, of the samples when an alarm began; the moment itself was no longer "
         "there"),
        ("000001-x", {"removed": True, "bytes": 4_900_000, "why": "the budget is full"},
         "Recording removed", "000001-x, 4.9 MB; the budget is full"),
        ("", {"why": "no samples came"}, "Recording", "not kept: no samples came"),
        ("000007-x", {"bytes": "many"}, "Recording kept",
         "000007-x, of the samples when an alarm began"),
    ],
)  # fmt: skip
def test_what_became_of_recordings_in_words(name, body, what, text) -> None:
    line = events.line(EventRow(DAY_NS, 3, 0, "evidence", name, body))
    assert (line.what, line.text) == (what, text)
