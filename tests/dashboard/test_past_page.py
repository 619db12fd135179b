"""The page of the past: any calendar span, gaps as gaps, levels and limits drawn."""

from __future__ import annotations

import json
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from dashboard import past, span
from dashboard.words import utc_of
from monitor.core.flags import Flag
from monitor.record.types import History
from tests.dashboard.fakes import DAY_NS, NOON_NS, FakeRecord, S, client_over, snapshot

MINUTE = 60 * S
DAY = span.day(utc_of(DAY_NS))


def _get(folder: Path, query: str = "", record: FakeRecord | None = None) -> str:
    answer = client_over(snapshot(), folder, record).get(f"/history{query}")
    assert answer.status_code == 200
    return re.sub(r"\s+", " ", answer.text)


def test_the_latest_day_of_the_record_is_shown_first(tmp_path: Path) -> None:
    page = _get(tmp_path)
    assert "Six-minute averages, Saturday 1 March 2025, UTC" in page
    assert 'name="from" value="2025-03-01"' in page


def test_the_summary_names_the_largest_average_and_when(tmp_path: Path) -> None:
    minutes = np.arange(501, 530)
    ratio = 0.2 + 0.15 * np.sin(minutes / 97.0) + 0.4
    at = utc_of(DAY_NS + int(minutes[np.argmax(ratio)]) * MINUTE)
    page = _get(tmp_path, "?show=ratio&averaging=1800")
    said = f"0.49 of the limit (49 %), ending 2025-03-01 {at:%H:%M} UTC."
    assert f"Largest thirty-minute average: {said}" in page
    assert "Expanded uncertainty of E there: 2.6 dB." in page


def test_gaps_are_drawn_counted_and_named(tmp_path: Path) -> None:
    page = _get(tmp_path)
    assert 'fill="url(#hatch)"' in page
    assert "no measurement" in page
    assert "Measured for 89 % of the span so far; 1 gap, 75 min in all" in page
    assert "2025-03-01 03:10 to 2025-03-01 04:25 UTC" in page


def test_the_rest_of_today_is_no_gap() -> None:
    assert past.gaps_until([(NOON_NS, NOON_NS + 3600 * S)], NOON_NS) == []
    assert past.gaps_until([(NOON_NS - MINUTE, NOON_NS + 3600 * S)], NOON_NS) == []
    long = (NOON_NS - 60 * MINUTE, NOON_NS + 3600 * S)
    assert past.gaps_until([long], NOON_NS) == [(NOON_NS - 60 * MINUTE, NOON_NS)]
    assert past.gaps_until([(DAY_NS, DAY_NS + S)], NOON_NS) == [(DAY_NS, DAY_NS + S)]


def test_a_span_without_data_says_that_it_says_nothing(tmp_path: Path) -> None:
    page = _get(tmp_path, "?from=2025-02-01&to=2025-02-28")
    assert "No six-minute average in this span: no measurement, which says nothing" in page
    assert "100 %" not in page


def test_an_empty_record_is_a_page(tmp_path: Path) -> None:
    assert "no measurement" in _get(tmp_path, record=FakeRecord(empty=True))


def test_limit_and_alert_levels_are_drawn_with_their_names(tmp_path: Path) -> None:
    page = _get(tmp_path, "?show=ratio&averaging=1800&scope=1")
    assert ">limit</text>" in page
    assert ">alert 0.5</text>" in page
    assert "Alert 0.5 of the limit: half of the limit." in page
    in_e = _get(tmp_path, "?averaging=1800&scope=1")
    assert ">limit 40.0 V/m</text>" in in_e
    assert ">alert 28.3 V/m</text>" in in_e


def test_a_limit_that_depends_on_the_mixture_is_not_drawn_in_field_strength() -> None:
    history = FakeRecord().history(DAY_NS, NOON_NS, 1800, 100)
    assert past.equivalent_limit(history, 1) == pytest.approx(40.0)
    low, mean, high = history.ratios[1]
    mean[::2] *= 1.3
    assert past.equivalent_limit(history, 1) is None
    assert past.equivalent_limit(history, 99) is None


def test_the_table_has_every_hour_with_its_largest_average() -> None:
    history = FakeRecord().history(DAY_NS, NOON_NS, 1800, 1440)
    rows = past.rows(past.series_of(history, 1, NOON_NS), DAY, NOON_NS)
    assert len(rows) == 12
    for hour, row in enumerate(rows):
        inside = (history.utc_ns > DAY_NS + hour * 60 * MINUTE) & (
            history.utc_ns <= DAY_NS + (hour + 1) * 60 * MINUTE
        )
        assert row.most == pytest.approx(history.ratios[1][1][inside].max())
    assert rows[3].valid_share == pytest.approx(10 / 60)
    assert rows[4].valid_share == pytest.approx(35 / 60)
    assert sum(row.gap_s for row in rows) == pytest.approx(75 * 60)


def test_a_part_without_an_average_is_never_called_measured() -> None:
    history = FakeRecord().history(DAY_NS, NOON_NS, 1800, 1440)
    empty = span.day(utc_of(DAY_NS - 86_400 * S))
    rows = past.rows(past.series_of(history, 1, NOON_NS), empty, NOON_NS)
    assert {(row.most, row.valid_share) for row in rows} == {(None, 0.0)}


@pytest.mark.parametrize(
    ("query", "count"),
    [("?from=2025-03-01&to=2025-03-31", 5), ("?from=2020-01-01&to=2025-12-31", 36)],
)
def test_long_spans_have_few_rows(query: str, count: int, tmp_path: Path) -> None:
    page = _get(tmp_path, query)
    assert 1 <= page.count('<th scope="row">') <= count


def test_neighbours_and_lengths_are_links_and_keep_what_is_shown(tmp_path: Path) -> None:
    page = _get(tmp_path, "?from=2025-02-28&to=2025-02-28&show=ratio&averaging=1800")
    before = "from=2025-02-27&amp;to=2025-02-27&amp;averaging=1800&amp;show=ratio"
    assert f'rel="prev" href="/history?{before}' in page
    assert re.search(r'rel="next" href="/history\?from=2025-03-01&amp;to=2025-03-01', page)
    assert re.search(r'href="/history\?from=2025-02-24&amp;to=2025-03-02[^"]*">week', page)
    assert 'rel="next"' not in _get(tmp_path, "?from=2025-03-01&to=2025-03-01")


def test_events_are_told_in_words_and_escaped(tmp_path: Path) -> None:
    page = _get(tmp_path)
    assert "2025-03-01 01:00 UTC" in page
    said = "half: ICNIRP 2020, general public, whole body, 30 min</b>: went over, at 0.52"
    assert said in page
    assert "&lt;over&gt; a level" in page


@pytest.mark.parametrize(
    "query",
    [
        "?from=2025-13-01", "?from=x&to=y", "?from=2025-03-02&to=2025-03-01", "?averaging=7",
        "?show=db", "?scale=cubic", "?scope=-1",
        "?scope=99", "?limit=none", "?scope=" + "9" * 5000, "?from=%00", "?from=99999-01-01",
    ],
)  # fmt: skip
def test_wrong_questions_are_one_line_with_a_remedy(query: str, tmp_path: Path) -> None:
    client = client_over(snapshot(), tmp_path)
    answer = client.get(f"/history{query}")
    assert answer.status_code == 400
    (line,) = re.findall(r'<p class="wrong">([^<]+)</p>', answer.text)
    assert "\n" not in line
    problem = client.get(f"/api/history{query}")
    assert problem.status_code == 400
    assert problem.mimetype == "application/problem+json"
    assert problem.json
    assert problem.json["status"] == 400


def test_no_record_yet_is_said(tmp_path: Path) -> None:
    answer = client_over(snapshot(), tmp_path, there=False).get("/history")
    assert answer.status_code == 503
    assert "no record yet" in answer.text


def test_the_record_is_closed_in_any_case(tmp_path: Path) -> None:
    record = FakeRecord()
    client = client_over(None, tmp_path, record)
    for path in ("/", "/history", "/history?from=x", "/api/history"):
        client.get(path)
    assert record.closed == 4


def test_history_as_json(tmp_path: Path) -> None:
    client = client_over(snapshot(), tmp_path)
    text = client.get("/api/history?averaging=1800").text
    found = json.loads(text, parse_constant=pytest.fail)
    n = len(found["end_utc"])
    assert n == 720 - 74
    assert (found["from_utc"], found["to_utc"]) == ("2025-03-01T00:00:00Z", "2025-03-02T00:00:00Z")
    assert len(found["e_mean_v_per_m"]) == len(found["exposure_ratios"][0]["mean"]) == n
    assert found["exposure_ratios"][0]["set"] == "icnirp-2020"
    assert found["gaps"] == [
        {"start_utc": "2025-03-01T03:10:00Z", "end_utc": "2025-03-01T04:25:00Z"}
    ]
    assert client.get("/api/history?at_most=0").status_code == 400


def test_a_lower_bound_in_the_table_is_marked_as_one(tmp_path: Path) -> None:
    """A figure of one axis, or above the range, must not read like a whole one (our choice)."""
    mark, said = "†", "the field may have been higher"
    plain = _get(tmp_path)
    assert mark not in plain
    assert said not in plain

    class Component(FakeRecord):
        def history(self, *asked: int) -> History:
            found = super().history(*asked)
            bits = found.flags | int(Flag.COMPONENT_ONLY)
            return replace(found, flags=bits)

    page = _get(tmp_path, record=Component())
    assert f"</b>{mark}" in page
    assert said in page
