"""Columns of text: times in every form that is allowed, figures, counts; against datetime."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta, timezone

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hardware.columns import NO_TIME, counts, floats, is_stamp, times_ns
from monitor.core.numerals import figure
from monitor.core.readings import MISSING

EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
moments = st.datetimes(datetime(1901, 1, 2), datetime(2199, 12, 30))  # noqa: DTZ001
offsets = st.integers(-14 * 60, 14 * 60).map(lambda m: timezone(timedelta(minutes=m)))


@given(st.lists(st.tuples(moments, offsets), min_size=1, max_size=20))
def test_rfc_3339_equals_datetime(pairs):
    """Source: Python's datetime module."""
    whens = [when.replace(tzinfo=offset) for when, offset in pairs]
    expected = [(when - EPOCH) // timedelta(microseconds=1) * 1000 for when in whens]
    assert times_ns([when.isoformat() for when in whens], stamps=True).tolist() == expected


def test_forms_of_the_same_time():
    forms = [
        "2012-05-01 00:01:00",
        "2012-05-01T00:01:00Z",
        "2012-05-01t00:01:00z",
        " 2012-05-01 02:01:00+02:00",
        "2012-04-30T18:31:00-05:30",
        "2012-05-01 00:01:00.000000000",
    ]
    assert set(times_ns(forms, stamps=True).tolist()) == {1_335_830_460_000_000_000}
    assert all(is_stamp(form) for form in forms)


@pytest.mark.parametrize(
    "text",
    ["", "now", "NaT", "2012-05", "2012-05-01", "2012-02-30 00:00:00", "2012-05-01 25:00:00",
     "9999-01-01 00:00:00", "01.05.2012 00:00:00", "12"],
)  # fmt: skip
def test_what_is_no_time_stays_none_and_spares_its_neighbours(text):
    times = times_ns(["2012-05-01 00:00:00", text, "2012-05-01 00:00:01"], stamps=True)
    assert times.tolist() == [1_335_830_400_000_000_000, NO_TIME, 1_335_830_401_000_000_000]


def test_seconds():
    texts = ["0", "1.5", "-2.25", "", "x", "1e300", "1700000000"]
    good = [0, 1_500_000_000, -2_250_000_000, NO_TIME, NO_TIME, NO_TIME, 1_700_000_000 * 10**9]
    assert times_ns(texts, stamps=False).tolist() == good


def test_figures_and_what_is_none():
    values, wrong = floats(["-40.565", "", " ", "nan", "NaN", "x"])
    assert values[0] == -40.565
    assert np.isnan(values[1:]).all()
    assert wrong == 1


@pytest.mark.parametrize("text", ["1_0", "inf", "-Infinity", "0x1", "1e", "\u0661", "1 2", "e5"])
def test_what_only_a_programme_would_take_for_a_number(text):
    values, wrong = floats(["2", text, ".5e1"])
    assert (values[0], values[2], wrong) == (2.0, 5.0, 1)
    assert np.isnan(values[1])


@given(st.lists(st.text("0123456789+-.eEnaA \t_", max_size=6), max_size=6))
def test_a_column_is_read_as_its_texts_are_one_by_one(texts):
    values, wrong = floats(texts)
    single = [figure(text) for text in texts]
    assert wrong == single.count(None)
    np.testing.assert_array_equal(values, [np.nan if v is None else v for v in single])


def test_counts_are_the_nearest_and_missing_has_no_number():
    values = np.array([-40.565, 0.0004, 0.0006, np.nan, np.inf, -1e300, 3e6])
    assert counts(values, 0.001).tolist() == [-40565, 0, 1, MISSING, MISSING, MISSING, MISSING]
    assert counts(values, 0.001).dtype == np.int32
