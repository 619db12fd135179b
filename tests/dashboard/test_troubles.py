"""What the page of the present says while something is wrong with the instrument or the monitor."""

from __future__ import annotations

import html
import re
from pathlib import Path
from typing import Any

import pytest

from dashboard import reservations
from dashboard.models import Doors, Heard, Station, read_live
from dashboard.words import utc_of
from monitor.core.alarms import INSTRUMENT_TEXTS
from monitor.core.flags import WORDS, Flag
from tests.dashboard.fakes import (
    NOON_NS,
    FakeDaemon,
    FakeRecord,
    S,
    alarm,
    app_over,
    client_over,
    snapshot,
)

NO_WIRE = WORDS[Flag.NO_SIGNAL_WIRE]


def _text(markup: str) -> str:
    return re.sub(r"\s+", " ", html.unescape(re.sub(r"<[^>]+>", " ", markup)))


def _heading(markup: str) -> str:
    (found,) = re.findall(r"<h1>(.*?)</h1>", markup, flags=re.DOTALL)
    return html.unescape(found)


def _instrument(key: str, state: str = "unacknowledged") -> dict[str, Any]:
    return alarm(state, key, text=INSTRUMENT_TEXTS[key], level=None, ratio=None)


@pytest.mark.parametrize(
    "change",
    [
        {"alarms": [_instrument("silence")]},
        {"alarms": [_instrument("silence", "acknowledged")]},
        {"last_reading_age_s": 31.0},
    ],
)
def test_a_dead_wire_is_no_valid_reading_with_its_cause(
    change: dict[str, Any], tmp_path: Path
) -> None:
    client = client_over(snapshot(flags=[NO_WIRE], **change), tmp_path)
    markup = client.get("/").text
    assert _heading(markup) == (
        "No valid reading since 11:59 UTC: detector voltage outside its valid window "
        "(open or shorted wire?); this says nothing about the field."
    )
    assert 'class="boards"' in markup
    assert "Sensor: connected (board A, firmware 1.2)." in _text(markup)
    assert "of the limit (" not in _text(markup)
    health = client.get("/health")
    assert health.status_code == 503
    assert health.json
    assert health.json["state"] == "silent"


def test_a_voltage_that_an_overload_gives_too_is_not_called_a_bad_wire_alone(
    tmp_path: Path,
) -> None:
    now = snapshot(flags=[WORDS[Flag.ABOVE_RANGE], NO_WIRE], alarms=[_instrument("silence")])
    heading = _heading(client_over(now, tmp_path).get("/").text)
    assert "(too strong a field, or an open or shorted wire?)" in heading


def test_a_sensor_that_is_gone_is_the_cause_before_an_old_flag(tmp_path: Path) -> None:
    device = {"connected": False, "text": "port gone", "counters": {}}
    now = snapshot(flags=[NO_WIRE], device=device, last_reading_age_s=31.0)
    assert "11:59 UTC: the sensor is not connected;" in _heading(
        client_over(now, tmp_path).get("/").text
    )


def test_a_reading_that_never_was_valid(tmp_path: Path) -> None:
    silence = [_instrument("silence")]
    now = snapshot(alarms=silence, last_reading_age_s=None, last_reading_utc=None, flags=[NO_WIRE])
    heading = _heading(client_over(now, tmp_path).get("/").text)
    assert heading.startswith(f"No valid reading yet: {NO_WIRE}")


@pytest.mark.parametrize("key", ["gaps", "record"])
@pytest.mark.parametrize("ratio", [0.31, 0.72, 1.7])
def test_an_alarm_of_the_instrument_is_named_in_the_heading(
    key: str, ratio: float, tmp_path: Path
) -> None:
    standing = client_over(snapshot(ratio, alarms=[_instrument(key)]), tmp_path).get("/").text
    assert INSTRUMENT_TEXTS[key] in _heading(standing)
    gone = [_instrument(key, "returned_unacknowledged")]
    markup = client_over(snapshot(ratio, alarms=gone), tmp_path).get("/").text
    assert INSTRUMENT_TEXTS[key] not in _heading(markup)
    assert 'class="headline below"' not in standing


def test_a_monitor_that_no_longer_answers_says_for_how_long_and_what_is_kept(
    tmp_path: Path,
) -> None:
    daemon = FakeDaemon(snapshot())
    client = app_over(daemon, FakeRecord(), tmp_path).test_client()
    assert "Last valid reading 11:59:57 UTC." in _text(client.get("/").text)
    daemon.now = None
    markup = client.get("/").text
    # Not back to 07:12, the last in the record: the page had told of 11:59:57 already.
    assert _heading(markup) == (
        "No measurement since 11:59:57 UTC; this says nothing about the field."
    )
    assert (
        "The monitor has not answered for 0 s; last reading recorded 07:12:00 UTC, 4 h 48 min ago "
        "(a few seconds more may be lost)."
    ) in _text(markup)
    (small,) = re.findall(r'<p class="drawn small">([^<]+)</p>', markup)
    assert "no daemon listens" in small
    assert "daemon" not in _text(markup.replace(small, ""))


def test_how_long_it_has_not_answered_is_counted_from_its_last_answer(tmp_path: Path) -> None:
    record = tmp_path / "r.db"
    record.touch()
    daemon, at = FakeDaemon(snapshot()), [NOON_NS]
    doors = Doors(daemon.ask, lambda _: FakeRecord(), lambda: at[0])
    station, heard = Station(record, tmp_path / "r.sock"), Heard()
    assert read_live(station, doors, heard).unheard_s is None
    daemon.now, at[0] = None, NOON_NS + 84 * S
    live = read_live(station, doors, heard)
    assert live.unheard_s == 84
    assert live.since == utc_of(NOON_NS - 3 * S)
    assert read_live(station, doors).unheard_s is None


def test_without_an_answer_ever_the_record_alone_speaks(tmp_path: Path) -> None:
    text = _text(client_over(None, tmp_path).get("/").text)
    assert "The monitor does not answer; last reading recorded 07:12:00 UTC" in text


@pytest.mark.parametrize("flag", list(Flag))
def test_every_reservation_says_what_it_means_and_what_to_do(flag: Flag) -> None:
    said = reservations.sentence(WORDS[flag])
    assert said.lower().startswith(WORDS[flag].lower() + ": ")
    assert said.endswith(".")
    assert ";" in said


def test_reservations_are_explained_on_both_pages(tmp_path: Path) -> None:
    text = _text(client_over(snapshot(flags=["clock unsynchronised"]), tmp_path).get("/").text)
    said = "Clock unsynchronised: times may be wrong; connect the box to a time server."
    assert said in text


def test_counters_are_folded_and_in_plain_words(tmp_path: Path) -> None:
    device = {"connected": True, "text": "", "counters": {"bad_checksum": 2, "partial": 0}}
    markup = client_over(snapshot(device=device), tmp_path).get("/").text
    (folded,) = re.findall(r"<details.*?</details>", markup, flags=re.DOTALL)
    assert (
        _text(folded).split()
        == ("Line counters Lines damaged on the way 2 None so far lines cut short").split()
    )


def test_an_alarm_links_to_its_day_and_limit_in_the_history(tmp_path: Path) -> None:
    key = "half | icnirp-2020 general_public whole_body 1800 s"
    client = client_over(snapshot(0.72, alarms=[alarm("unacknowledged", key)]), tmp_path)
    (address,) = re.findall(r'href="([^"]+)">in the history', client.get("/").text)
    page = client.get(html.unescape(address))
    assert page.status_code == 200
    text = _text(page.text)
    assert "Thirty-minute averages, Saturday 1 March 2025" in text
    assert "The ledge is the limit of ICNIRP 2020, general public, whole body, 30 min." in text


def test_confirming_and_muting_are_explained_where_they_can_be_done(tmp_path: Path) -> None:
    now = snapshot(0.72, alarms=[alarm("unacknowledged")])
    here = _text(client_over(now, tmp_path).get("/").text)
    assert "Confirm: you have seen the alarm." in here
    assert "Mute: the alarm asks for nobody during that time." in here
    away = _text(client_over(now, tmp_path, loopback=False).get("/").text)
    assert "Mute:" not in away


def test_an_address_without_a_page_is_told_in_own_words(tmp_path: Path) -> None:
    answer = client_over(snapshot(), tmp_path).get("/nowhere")
    assert answer.status_code == 404
    assert "There is no page at this address." in _text(answer.text)


@pytest.mark.parametrize("path", ["/?scope=", "/part?scope=", "/api/history?at_most="])
def test_a_number_too_long_to_be_meant_is_a_wrong_question(path: str, tmp_path: Path) -> None:
    assert client_over(snapshot(), tmp_path).get(path + "7" * 5000).status_code == 400
