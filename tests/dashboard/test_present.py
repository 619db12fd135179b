"""The page of the present, state by state."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import pytest

from dashboard.words import CAUTIONS
from tests.dashboard.fakes import (
    FakeDaemon,
    FakeRecord,
    alarm,
    app_over,
    client_over,
    controlled,
    edited,
    snapshot,
)

GONE = {"connected": False, "text": "port gone", "temperature_c": None, "counters": {"bad": 0}}


def _text(markup: str) -> str:
    """What a reader without pictures and style meets."""
    plain = re.sub(r"<(script|noscript|style)\b.*?</\1>", " ", markup, flags=re.DOTALL)
    plain = re.sub(r"<[^>]+>", " ", plain)
    plain = plain.replace("&#39;", "'").replace("&lt;", "<").replace("&nbsp;", " ")
    return re.sub(r"\s+", " ", plain)


def _page(now: dict[str, Any] | None, folder: Path, path: str = "/", **more: Any) -> str:
    answer = client_over(now, folder, **more).get(path)
    assert answer.status_code == 200
    return _text(answer.text)


def _heading(page: str) -> str:
    return page.split("Alarms")[0]


def test_below_the_alert_level(tmp_path: Path) -> None:
    page = _page(snapshot(), tmp_path)
    assert "Below the alert levels at the monitor's antenna Reading 3 s old." in page
    assert "0.31 of the limit (31 %) conforms" in page
    assert "ICNIRP 2020, general public, whole body, 30 min" in page
    assert "22 V/m" in page
    assert "2.6 dB (k 1.96)" in page
    assert "98 %" in page
    assert "Bad checksums 2" in page.replace("bad", "Bad")
    assert "None so far lost frames" in page
    assert "21.4 °C" in page
    assert "5.02 V" in page


def test_public_occupancy_speaks_of_nothing_left_or_taken(tmp_path: Path) -> None:
    page = _page(snapshot(), tmp_path)
    assert not re.search(r"\b(left|spent|taken)\b", page)
    assert "level 0.31" in page


def test_controlled_occupancy_fills_the_recess_and_says_what_is_left(tmp_path: Path) -> None:
    now = edited(controlled(0.31), verified=True, verdict="conforms")
    markup = client_over(now, tmp_path).get("/").text
    page = _text(markup)
    assert "taken 0.31" in page
    assert "left 0.48" in page  # 1 - 0.31 * 1.04 * 10^(2 / 10), rounded down
    assert 'fill="url(#strata)"' in markup
    assert "ICNIRP 2020, occupational, whole body, 30 min The ledge is the limit." in page


def test_over_an_alert_level_with_what_a_person_may_do(tmp_path: Path) -> None:
    page = _page(snapshot(0.72, alarms=[alarm("unacknowledged")]), tmp_path)
    assert "Over an alert level at the monitor's antenna since 11:30 UTC" in _heading(page)
    assert "over, not yet confirmed (since 11:30 UTC)" in page
    assert "Confirm" in page
    assert "Mute for" in page


def test_over_a_level_before_the_alarm_is_raised_is_never_called_below(tmp_path: Path) -> None:
    heading = _heading(_page(snapshot(0.55), tmp_path))
    assert "Over an alert level" in heading
    assert "no alarm is raised yet" in heading
    assert "Below" not in heading


def test_gaps_that_leave_the_level_open_are_said_in_the_heading(tmp_path: Path) -> None:
    assert "gaps leave it open" in _heading(_page(snapshot(0.49), tmp_path))


def test_an_average_of_little_data_is_said_in_the_heading(tmp_path: Path) -> None:
    thin = snapshot(0.1)
    for one in thin["fields"]:
        one["valid_share"] = 0.05
    heading = _heading(_page(thin, tmp_path))
    assert "Only 90 s of 30 min are valid; at least 0.061 of the limit" in heading
    assert "gaps leave the rest open" in heading
    assert "Below" not in heading
    assert "Only 5 % of the six-minute average is valid." in heading


def test_no_valid_average_is_not_below(tmp_path: Path) -> None:
    empty = snapshot()
    for one in empty["exposures"]:
        one.update(ratio_mean=None, ratio_high=None, ratio_low=0.0, verdict="undecided")
    page = _page(empty, tmp_path)
    assert "No average yet; this says nothing about the field." in page
    assert "Below the alert" not in page
    assert "no measurement" in page


def test_confirmed_returned_and_muted_alarms_in_plain_words(tmp_path: Path) -> None:
    found = [
        alarm("acknowledged", "a"),
        alarm("returned_unacknowledged", "b"),
        alarm("shelved", "c", muted_until_utc="2025-03-01T14:30:00Z"),
        alarm("normal", "d", text="never shown"),
    ]
    page = _page(snapshot(0.72, alarms=found), tmp_path)
    assert "over, confirmed" in page
    assert "was over, back below now, not yet confirmed" in page
    assert "muted until 14:30 UTC" in page
    assert "never shown" not in page


def test_above_the_limit(tmp_path: Path) -> None:
    page = _page(snapshot(1.7), tmp_path)
    assert "Above the limit at the monitor's antenna: 1.7 of it" in _heading(page)
    assert "whole body, 30 min: exceeds" in _heading(page)
    assert "1.7 of the limit (170 %) exceeds" in page


def test_at_the_limit_but_not_decided_says_both(tmp_path: Path) -> None:
    heading = _heading(_page(snapshot(1.1), tmp_path))
    assert "At or above the limit at the monitor's antenna: 1.1 of it" in heading
    assert "cannot be decided" in heading


def test_why_nothing_can_be_decided_is_told_once(tmp_path: Path) -> None:
    one = snapshot(0.8)
    assert "(80 %) cannot be decided: the interval holds the limit" in _page(one, tmp_path)
    one["exposures"][0]["reasons"].append("calibration overdue")
    page = _page(one, tmp_path)
    assert "cannot be decided: the interval holds the limit; calibration overdue" in page
    assert "the limit lies between" not in page


@pytest.mark.parametrize(
    "change", [{"last_reading_age_s": 132.0}, {"last_reading_age_s": 7.0, "device": GONE}]
)
def test_a_silent_instrument_shows_no_figure(change: dict[str, Any], tmp_path: Path) -> None:
    silence = alarm("unacknowledged", "silence", text="no reading", level=None)
    markup = client_over(snapshot(alarms=[silence], **change), tmp_path).get("/").text
    page = _text(markup)
    assert "No valid reading since 11:59 UTC" in page
    assert "this says nothing about the field" in page
    assert "present, not yet confirmed" in page
    assert "of the limit (" not in page
    assert "Below" not in page
    assert 'class="boards"' in markup


def test_a_series_that_has_ended_says_so(tmp_path: Path) -> None:
    ended = {"connected": False, "ended": True, "text": "end of file", "counters": {}}
    page = _page(snapshot(last_reading_age_s=40.0, device=ended), tmp_path)
    assert "The recorded series ended at 11:59 UTC; this says nothing about the field since" in page
    assert "of the limit (" not in page


def test_a_dead_daemon_says_since_when_nothing_is_measured(tmp_path: Path) -> None:
    markup = client_over(None, tmp_path).get("/").text
    page = _text(markup)
    assert "No measurement since 07:12:00 UTC; this says nothing about the field." in page
    assert "of the limit (" not in page
    assert 'class="boards"' in markup
    assert "None stands" not in page


def test_a_daemon_that_never_wrote_and_no_record_at_all(tmp_path: Path) -> None:
    page = _page(None, tmp_path, record=FakeRecord(empty=True))
    assert "No measurement; this says nothing about the field." in page
    nothing = _page(None, tmp_path / "elsewhere", there=False)
    assert "No measurement and no record yet" in nothing
    assert "fieldsill rehearse" in nothing


def test_before_the_first_reading(tmp_path: Path) -> None:
    page = _page(snapshot(last_reading_age_s=None, last_reading_utc=None), tmp_path)
    assert "No reading yet; this says nothing about the field." in page


@pytest.mark.parametrize("path", ["/", "/part", "/history"])
def test_invented_data_are_marked_on_every_page(path: str, tmp_path: Path) -> None:
    record = FakeRecord(simulated=True)
    marked = client_over(snapshot(simulated=True), tmp_path, record).get(path).text
    assert ">invented data</text>" in marked
    assert "rehearsal" not in marked
    if path != "/part":
        assert "Nothing on this page was measured" in marked
        assert "<title>[invented data]" in marked
    real = client_over(snapshot(), tmp_path).get(path).text
    assert "invented" not in real


def test_invented_data_stay_marked_when_the_daemon_is_dead(tmp_path: Path) -> None:
    page = _page(None, tmp_path, record=FakeRecord(simulated=True))
    assert "Invented data." in page


def test_the_progress_through_a_past_is_told(tmp_path: Path) -> None:
    page = _page(snapshot(progress={"done_s": 30_000.0, "total_s": 86_400.0}), tmp_path)
    assert "Working through the past: 8 h 20 min of 24 h 0 min done" in page


def test_reservations_and_an_unwritten_record_are_in_the_heading(tmp_path: Path) -> None:
    changes = {"flags": ["fewer than three axes"], "record_error": "disk full"}
    heading = _heading(_page(snapshot(**changes), tmp_path))
    assert "fewer than three axes" in heading
    assert "The record is not written: disk full" in heading


def test_limits_from_memory_say_so(tmp_path: Path) -> None:
    exceeding = snapshot(9.0)
    page = _page(exceeding, tmp_path)
    assert "limit values from memory, not confirmed" in page


def test_a_person_may_choose_which_limit_is_drawn(tmp_path: Path) -> None:
    page = _page(snapshot(), tmp_path, "/?scope=5")
    assert "47 CFR 1.1310, general public, whole body, 30 min The ledge" in page
    unknown = client_over(snapshot(), tmp_path).get("/?scope=99")
    assert unknown.status_code == 400
    assert "there is no limit number 99" in _text(unknown.text)
    assert client_over(snapshot(), tmp_path).get("/?scope=x").status_code == 400


@pytest.mark.parametrize("path", ["/", "/history", "/nowhere"])
@pytest.mark.parametrize("now", [snapshot(), None])
def test_cautions_stand_on_every_page_and_no_word_of_safety(
    path: str, now: dict[str, Any] | None, tmp_path: Path
) -> None:
    page = _text(client_over(now, tmp_path).get(path).text)
    assert all(caution in page for caution in CAUTIONS)
    assert not re.search(r"\b(safe|safely|clear|all clear|harmless)\b", page, re.IGNORECASE)


def test_it_renews_itself_with_and_without_script(tmp_path: Path) -> None:
    markup = client_over(snapshot(), tmp_path).get("/?scope=5").text
    assert '<noscript><meta http-equiv="refresh" content="10"></noscript>' in markup
    assert 'data-part-url="/part?scope=5"' in markup
    assert "Drawn Saturday 1 March 2025, 12:00:00 UTC" in markup
    part = client_over(snapshot(), tmp_path).get("/part?scope=5").text
    whole = {i for i in re.findall(r'id="([a-z]+)" data-part', markup)}
    assert whole == {"head", "alarms", "figure", "field", "limits", "instrument"}
    assert whole == set(re.findall(r'id="([a-z]+)" data-part', part))


def test_an_unknown_answer_of_the_daemon_is_no_measurement(tmp_path: Path) -> None:
    daemon = FakeDaemon(snapshot())
    app = app_over(daemon, FakeRecord(), tmp_path)
    daemon.now = "nonsense"  # type: ignore[assignment]
    assert "No measurement since 07:12:00 UTC" in _text(app.test_client().get("/").text)


def test_text_from_outside_cannot_become_markup(tmp_path: Path) -> None:
    bad = snapshot(
        alarms=[alarm("unacknowledged", text="<img src=x>")],
        site={"name": "<b>x", "place": "", "occupancy": "public"},
        device={"connected": True, "text": "<script>1</script>", "counters": {"<i>": 1}},
    )
    markup = client_over(bad, tmp_path).get("/").text
    assert not re.search(r"<(img|b>x|script>|i>)", markup)
