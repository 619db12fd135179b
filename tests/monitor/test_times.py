"""RFC 3339 in and out, against Python's datetime; what is no time or too far is one line."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta, timezone

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.times import is_stamp, text_of, utc_ns_of

EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
moments = st.datetimes(datetime(1686, 1, 1), datetime(2254, 12, 30))  # noqa: DTZ001
offsets = st.integers(-14 * 60, 14 * 60).map(lambda m: timezone(timedelta(minutes=m)))


@given(moments, offsets)
def test_reading_equals_datetime(when: datetime, offset: timezone) -> None:
    """Source: Python's datetime module."""
    when = when.replace(tzinfo=offset)
    assert utc_ns_of(when.isoformat()) == (when - EPOCH) // timedelta(microseconds=1) * 1000
    assert is_stamp(when.isoformat())


@given(st.integers(-9_000_000_000 * 10**9, 9_000_000_000 * 10**9))
def test_there_and_back_to_the_nanosecond(utc_ns: int) -> None:
    assert utc_ns_of(text_of(utc_ns)) == utc_ns
    assert utc_ns_of(text_of(utc_ns, 3)) == utc_ns // 10**6 * 10**6


@pytest.mark.parametrize(
    ("digits", "text"),
    [
        (None, "2030-10-23T15:33:20.0625Z"),
        (0, "2030-10-23T15:33:20Z"),
        (3, "2030-10-23T15:33:20.062Z"),
        (6, "2030-10-23T15:33:20.062500Z"),
    ],
)
def test_as_many_digits_as_are_wanted(digits: int | None, text: str) -> None:
    assert text_of(1_919_000_000_062_500_000, digits) == text
    assert text_of(0) == "1970-01-01T00:00:00Z"


@pytest.mark.parametrize(
    "text",
    ["", "noon", "2031-05-01", "2031-05-01T07:12:00", "2031-02-30T00:00:00Z",
     "2031-05-01T25:00:00Z", "9999-01-01T00:00:00Z", "0001-01-01T00:00:00Z",
     "0001-01-01T00:00:00+14:00"],
)  # fmt: skip
def test_what_is_no_time_or_too_far_is_one_line(text: str) -> None:
    with pytest.raises(ValueError, match="time") as caught:
        utc_ns_of(text)
    assert repr(text) in str(caught.value)
    assert "\n" not in str(caught.value)
