"""What a request to keep a reference check cannot hold."""

from __future__ import annotations

import pytest

from monitor import refstrikes
from monitor.core.errors import ConfigError
from monitor.refchecks import event_of
from monitor.refnotes import Expected, compared
from tests.cli.test_calibration_checks import REQUEST


@pytest.mark.parametrize("value", [1e300, -1e300, 10**400])
def test_a_level_beyond_any_is_not_kept(value: float) -> None:
    """The difference of two such would be no number, and its event could not be written."""
    with pytest.raises(ConfigError, match="applied_dbm: .* is not a number, or beyond 1e"):
        event_of({**REQUEST, "applied_dbm": value}, ["east"], 0)


@pytest.mark.parametrize("key", ["from_utc", "to_utc"])
def test_a_check_without_a_time_of_the_calendar_is_not_kept(key: str) -> None:
    with pytest.raises(ConfigError, match=f"{key}: 'at noon' is not an RFC 3339 time"):
        event_of({**REQUEST, key: "at noon"}, ["east"], 0)


EXPECTED = Expected((-60.0, 5.0), -70.0, 3.0, 1.2)


@pytest.mark.parametrize(
    ("applied_dbm", "mean_dbm", "at", "words"),
    [
        (-30.0, -29.0, "port", []),
        (-30.0, -33.5, "input", []),
        (-20.0, -30.0, "port", ["-10.00 dB is beyond the expanded uncertainty", "wrong level"]),
        (-30.0, -30.0, "input", ["+3.00 dB, the loss of 3.00 dB counted, is beyond"]),
        (10.0, 10.0, "port", ["is outside its range, -60.0 to 5.0 dBm"]),
        (-55.0, -55.0, "port", ["less than 20 dB above the noise of -70.0 dBm: noise counts"]),
        (-50.0, -50.0, "port", []),
    ],
)
def test_what_tells_of_a_slip_is_said(
    applied_dbm: float, mean_dbm: float, at: str, words: list[str]
) -> None:
    """By hand: at the input 3 dB are lost before the port; U is 1.2 dB."""
    said = "; ".join(compared(EXPECTED, mean_dbm, at, applied_dbm))
    assert all(word in said for word in words)
    assert bool(said) is bool(words)


STRIKE = {"channel": "east", "number": 2, "difference_db": -10.0, "to_utc": "", "note": ""}


@pytest.mark.parametrize(
    "more", [{"number": 0}, {"number": True}, {"number": "2"}, {"difference_db": None},
             {"difference_db": float("nan")}, {"channel": "west"}, {"note": 3}],
)  # fmt: skip
def test_a_strike_that_names_no_check_is_not_kept(more: dict[str, object]) -> None:
    event = refstrikes.event_of(STRIKE, ["east"], 7)
    assert (event.kind, event.body["number"]) == ("reference check struck", 2)
    with pytest.raises(ConfigError):
        refstrikes.event_of({**STRIKE, **more}, ["east"], 7)
