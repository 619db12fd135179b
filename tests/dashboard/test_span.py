"""Spans of the calendar: read, named, moved."""

from __future__ import annotations

from datetime import UTC, date, datetime, timedelta

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dashboard import span
from dashboard.span import Span
from monitor.core.errors import ConfigError

TODAY = date(2025, 3, 1)


def _utc(*parts: int) -> datetime:
    return datetime(*parts, tzinfo=UTC)  # type: ignore[misc]


def test_a_bare_last_date_is_included() -> None:
    found = span.read("2025-03-01", "2025-03-07", TODAY)
    assert (found.start, found.end) == (_utc(2025, 3, 1), _utc(2025, 3, 8))
    assert found.query == {"from": "2025-03-01", "to": "2025-03-07"}
    assert found.end_ns - found.start_ns == 7 * 86_400 * 10**9


def test_times_are_utc_unless_they_say() -> None:
    found = span.read("2025-03-01T07:30", "2025-03-01T10:00+01:00", TODAY)
    assert (found.start, found.end) == (_utc(2025, 3, 1, 7, 30), _utc(2025, 3, 1, 9))


def test_nothing_asked_for_is_the_fallback_day_and_one_date_is_its_day() -> None:
    assert span.read("", "", TODAY) == span.day(_utc(2025, 3, 1, 5))
    assert span.read("2024-02-29", "", TODAY) == span.day(_utc(2024, 2, 29))
    assert span.read("", "2024-02-29", TODAY) == span.day(_utc(2024, 2, 29))


@pytest.mark.parametrize(
    ("start", "end", "said"),
    [
        ("2025-13-01", "", "from: '2025-13-01' is not a date"),
        ("2025-03-01", "soon", "to: 'soon' is not a date"),
        ("2025-03-07", "2025-03-01", "to: lies before from"),
        ("1066-10-14", "", "outside the years"),
        ("9999-12-31", "", "outside the years"),
        ("0001-01-01T00:00+14:00", "", "is not a date"),
    ],
)
def test_wrong_dates_are_one_clear_line(start: str, end: str, said: str) -> None:
    with pytest.raises(ConfigError, match="^[^\n]*$") as caught:
        span.read(start, end, TODAY)
    assert said in str(caught.value)


def test_neighbours() -> None:
    march = span.month(_utc(2025, 3, 15))
    assert march.moved(-1) == span.month(_utc(2025, 2, 1))
    assert march.moved(1).words == "April 2025, UTC"
    week = span.week(_utc(2025, 3, 1))
    assert (week.start.weekday(), week.end - week.start) == (0, timedelta(days=7))
    assert week.moved(-1).end == week.start
    assert span.year(_utc(2024, 7, 1)).seconds == 366 * 86_400


def test_words_name_the_day() -> None:
    assert span.day(_utc(2025, 3, 1)).words == "Saturday 1 March 2025, UTC"
    assert span.read("2025-03-01", "2025-03-02", TODAY).words == (
        "2025-03-01 to 2025-03-02, both days included, UTC"
    )


@given(
    st.integers(0, 7 * 10**9).map(lambda s: _utc(1971, 1, 2) + timedelta(seconds=s)),
    st.integers(1, 10**9),
)
def test_a_link_reads_back_as_the_same_span(start: datetime, seconds: int) -> None:
    wanted = Span(start, min(start + timedelta(seconds=seconds), _utc(2199, 1, 1)))
    assert span.read(wanted.query["from"], wanted.query["to"], TODAY) == wanted
