"""Figures and states in words."""

from __future__ import annotations

import math
from datetime import UTC, datetime

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dashboard import words


@pytest.mark.parametrize(
    ("ratio", "text"),
    [
        (0.31, "0.31 of the limit (31 %)"),
        (0.00042, "0.00042 of the limit (0.042 %)"),
        (0.0, "0 of the limit (0 %)"),
        (3e-7, "less than 0.00001 of the limit (less than 0.001 %)"),
        (1.0, "1.00 of the limit (100 %)"),
        (1.18, "1.2 of the limit (120 %)"),
        (12.3, "12 of the limit (1200 %)"),
        (0.99996, "0.99996 of the limit (99.996 %)"),
        (None, "no figure"),
        (math.nan, "no figure"),
    ],
)
def test_a_ratio_in_words(ratio: float | None, text: str) -> None:
    assert words.of_limit(ratio) == text


@given(st.floats(1e-5, 1e3).filter(lambda r: r != 1.0 and abs(r - 1) > 1e-8))
def test_rounding_never_carries_a_ratio_across_the_limit(ratio: float) -> None:
    assert (float(words.ratio_figure(ratio)) < 1) == (ratio < 1)
    shown = float(words.percent(ratio).removesuffix(" %"))
    assert (shown < 100) == (ratio < 1)


@given(st.floats(0, 1))
def test_a_share_is_never_overstated(part: float) -> None:
    shown = int(words.share(part).removesuffix(" %"))
    assert shown / 100 <= part + 1e-9
    assert part - shown / 100 < 0.01 + 1e-9


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [
        (0.8249, 2, "0.82"),
        (61.4, 3, "61.4"),
        (1234.5, 2, "1200"),
        (9.96, 2, "10"),
        (0.0999, 2, "0.10"),
        (-0.5, 2, "-0.50"),
    ],  # fmt: skip
)
def test_significant_digits(value: float, digits: int, text: str) -> None:
    assert words.figure(value, digits) == text


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (3.9, "3 s"),
        (119, "119 s"),
        (120, "2 min"),
        (1800, "30 min"),
        (11_520, "3 h 12 min"),
        (400_000, "4 days"),
    ],  # fmt: skip
)
def test_ages_are_rounded_down(seconds: float, text: str) -> None:
    assert words.duration(seconds) == text


def test_verdicts_in_words() -> None:
    assert words.verdict("conforms", []) == "conforms"
    assert words.verdict("exceeds", ["what stands behind it"]) == "exceeds"
    assert words.verdict("undecided", ["gaps", "U"]) == "cannot be decided: gaps; U"


def test_alarm_states_in_words() -> None:
    assert words.alarm_state("unacknowledged", is_level=True) == "over, not yet confirmed"
    assert words.alarm_state("acknowledged", is_level=True) == "over, confirmed"
    assert words.alarm_state("shelved", is_level=True, muted_until="14:30 UTC") == (
        "muted until 14:30 UTC"
    )
    assert words.alarm_state("unacknowledged", is_level=False) == "present, not yet confirmed"


def test_an_alarms_key_in_words() -> None:
    key = "half | icnirp-2020 general_public whole_body 1800 s"
    assert words.alarm_text(key) == "half: ICNIRP 2020, general public, whole body, 30 min"
    assert words.alarm_text("silence") == "no valid reading"
    assert words.alarm_text("a | b") == "a | b"


def test_moments_carry_their_date_on_another_day() -> None:
    when = datetime(2025, 3, 1, 7, 12, tzinfo=UTC)
    assert words.moment(when, datetime(2025, 3, 1, 23, tzinfo=UTC)) == "07:12 UTC"
    assert words.moment(when, datetime(2025, 3, 2, tzinfo=UTC)) == "2025-03-01 07:12 UTC"
    assert words.moment(None) == "an unknown time"


def test_times_out_and_back() -> None:
    assert words.rfc3339(1_740_830_400_123_456_789) == "2025-03-01T12:00:00.123456Z"
    assert words.parse_utc("2025-03-01T13:00:00+01:00") == datetime(2025, 3, 1, 12, tzinfo=UTC)
    assert words.parse_utc("yesterday") is None
