"""The daemon's promises, each with its surroundings played by hand."""

from __future__ import annotations

import numpy as np
import pytest

from monitor.alarm_desk import AlarmDesk
from monitor.core import pipeline
from monitor.core.alarms import AlertRule
from monitor.core.errors import ConfigError
from monitor.core.flags import Flag
from monitor.core.gather import stack
from monitor.core.readings import MISSING, Batch
from monitor.core.resume import resume
from monitor.core.rows import Event
from monitor.record.types import EventRow
from tests.core.stations import made
from tests.monitor.fakes import Desk

LEVEL = AlertRule("half", "", "", "local", 0.5, 0.4, 0.0, 0.0)
OVER, UNDER = -20_000, -60_000  # at 1e5 V2/m2 per W and ratio 1e0 per V2/m2: 1.0 and 0.0001


def station(*rules: AlertRule):
    return made(1, ratio_per_e2=1.0, rules=rules)


def test_an_alarm_of_an_earlier_boot_returns_when_the_field_is_below() -> None:
    rows = [EventRow(None, 1, 0, "alarm", key, {"raised": True}) for key in ("silence", "record")]
    here = station(LEVEL)
    rows += [EventRow(None, 1, 0, "alarm", here.watches[0].key, {"raised": True})]
    desk = Desk(here, desk=AlarmDesk.from_events(rows, boot=2))
    assert set(desk.states().values()) == {"unacknowledged"}
    desk.feed(range(600), [UNDER] * 600)
    assert set(desk.states().values()) == {"returned_unacknowledged"}
    returned = [e for c in desk.writer.commits for e in c.events if e.kind == "alarm"]
    assert sorted(e.name for e in returned) == sorted(row.name for row in rows)


def test_many_short_pauses_are_an_alarm_though_none_is_long_enough_for_silence() -> None:
    """22 of every 50 s: 44 % of the time is valid, no pause reaches the 30 s of silence."""
    times = [t for t in range(1500) if t % 50 < 22]
    desk = Desk(station(LEVEL))
    desk.feed(times, [UNDER] * len(times))
    assert desk.states() == {"gaps": "unacknowledged"}
    desk.feed(range(1500, 2000), [UNDER] * 500)
    assert desk.states() == {"gaps": "returned_unacknowledged"}


def test_a_valid_share_that_flaps_does_not_hold_an_alarm_back() -> None:
    """0.6 of the limit against a level of 0.5 with 60 s of delay, valid share about 0.75."""
    rule = AlertRule("late", "", "", "local", 0.5, 0.4, 60.0, 0.0)
    rng = np.random.default_rng(1)
    times = [t for t in range(3600) if rng.random() < 0.5 or t % 4 == 0]
    level = round(10_000 * np.log10(0.6e-5 / 1e-3))
    desk = Desk(made(1, ratio_per_e2=1.0, rules=(rule,)))
    here = desk.here
    desk.feed(times, [level] * len(times))
    assert desk.states().get(here.watches[0].key) == "unacknowledged"


def test_an_open_wire_ages_the_last_reading_and_is_silence() -> None:
    desk = Desk(station(LEVEL))
    desk.feed(range(100), [UNDER] * 100)
    desk.feed(range(100, 200), [MISSING] * 100)
    assert desk.now()["last_reading_age_s"] == pytest.approx(100, abs=11)
    assert desk.states()["silence"] == "unacknowledged"


def test_silence_does_not_wait_for_a_reading_that_holds_long() -> None:
    desk = Desk(made(1, hold_s=600.0))
    desk.feed(range(10), [UNDER] * 10)
    desk.idle(45)
    assert desk.states() == {"silence": "unacknowledged"}


@pytest.mark.parametrize(
    ("surroundings", "flag"),
    [
        ({"temperature_c": None}, Flag.TEMPERATURE_UNKNOWN),
        ({"temperature_c": 99.0}, Flag.OUT_OF_TEMPERATURE),
        ({"error_ns": None}, Flag.CLOCK_UNSYNCHRONISED),
    ],
)
def test_what_is_not_known_forbids_conformity(surroundings: dict, flag: Flag) -> None:
    desk = Desk(station(), **surroundings)
    desk.feed(range(2000), [UNDER] * 2000)
    assert {e["verdict"] for e in desk.now()["exposures"]} == {"undecided"}
    assert all(c.raw.flags[0] & flag for c in desk.writer.commits if c.raw is not None)
    plain = Desk(station())
    plain.feed(range(2000), [UNDER] * 2000)
    assert {e["verdict"] for e in plain.now()["exposures"]} == {"conforms"}


def test_a_record_that_cannot_be_written_is_an_alarm_and_nothing_is_lost() -> None:
    desk = Desk(station())
    desk.feed(range(100), [UNDER] * 100)
    desk.writer.error = "disk full"
    desk.feed(range(100, 200), [UNDER] * 100)
    assert desk.states() == {"record": "unacknowledged"}
    assert desk.now()["record_error"] == "disk full"
    desk.writer.error = ""
    desk.feed(range(200, 300), [UNDER] * 100)
    assert desk.states() == {"record": "returned_unacknowledged"}
    times = np.concatenate([c.raw.times_ns for c in desk.writer.commits if c.raw is not None])
    np.testing.assert_array_equal(times, np.arange(times.size) * 1_000_000_000)
    assert times.size > 280


@pytest.mark.parametrize(
    "request_",
    [
        {"do": "note", "text": "\ud800"},
        {"do": "note", "text": None},
        {"do": "note", "text": {"a": "b"}},
        {"do": "note", "text": " "},
        {"do": "note", "text": "x", "by": "\udfff"},
        {"do": "acknowledge", "key": "none such"},
        {"do": "acknowledge"},
        {"do": "shelve", "key": "silence", "for_s": True},
        {"do": "shelve", "key": "silence", "for_s": 1e9},
        {"do": ["now"]},
        {},
    ],
)
def test_odd_requests_are_refused(request_: dict) -> None:
    desk = Desk(station())
    desk.idle(60)
    with pytest.raises(ConfigError):
        desk.daemon.answer(request_)


def test_an_alarm_is_muted_for_its_time_and_confirmed() -> None:
    desk = Desk(station())
    desk.idle(60)
    desk.daemon.answer({"do": "shelve", "key": "silence", "for_s": 100})
    assert desk.states() == {"silence": "shelved"}
    desk.idle(200)
    assert desk.states() == {"silence": "unacknowledged"}
    desk.daemon.answer({"do": "acknowledge", "key": "silence", "by": "somebody"})
    assert desk.states() == {"silence": "acknowledged"}
    desk.idle(220)
    kinds = [(e.kind, e.name) for c in desk.writer.commits for e in c.events]
    assert kinds.count(("muted", "silence")) == 1
    assert kinds.count(("confirmed", "silence")) == 1


def test_a_desk_restored_from_events_stands_as_before() -> None:
    rows = [
        EventRow(None, 1, 5, "alarm", "a", {"raised": True, "level": 0.5, "exposure_ratio": 0.6}),
        EventRow(None, 1, 6, "confirmed", "a", {}),
        EventRow(None, 1, 7, "alarm", "b", {"raised": True}),
        EventRow(None, 1, 8, "muted", "b", {"until_ns": 99}),
        EventRow(None, 1, 9, "note", "c", {}),
    ]
    same, new = AlarmDesk.from_events(rows, boot=1), AlarmDesk.from_events(rows, boot=2)
    assert {k: a.state(50) for k, a in same.alarms().items()} == {
        "a": "acknowledged",
        "b": "shelved",
    }
    assert new.alarms()["b"].state(50) == "unacknowledged"
    assert same.raised() == new.raised() == {"a", "b"}
    same.apply(Event(60, "alarm", "a", {"raised": False}))
    assert same.alarms()["a"].state(61) == "normal"


def test_an_overload_is_an_alarm_at_once_and_nothing_returns_meanwhile() -> None:
    """24 s in each 100 s at the rail, which reads as a gap: the valid share of 0.76 is enough."""
    here = made(1, ratio_per_e2=1.0, rules=(LEVEL,))
    desk = Desk(here)
    desk.feed(range(400), [OVER] * 400)
    key = here.watches[0].key
    assert desk.states() == {key: "unacknowledged"}
    times = np.arange(400, 2000)
    rail = times % 100 < 24
    for first in range(0, times.size, 10):
        part = slice(first, first + 10)
        counts = np.where(rail[part], MISSING, UNDER).astype(np.int32)[:, None]
        flags = np.where(rail[part], int(Flag.ABOVE_RANGE), 0).astype(np.int32)
        now = int(times[part][-1]) * 1_000_000_000
        batch = Batch(times[part].astype(np.int64) * 1_000_000_000, counts, flags, now)
        desk.front.batches.append(batch)
        desk.daemon.turn()
    assert desk.states() == {key: "unacknowledged", "overload": "unacknowledged"}
    desk.feed(range(2000, 2800), [UNDER] * 800)
    assert set(desk.states().values()) == {"returned_unacknowledged"}


def test_restarts_do_not_put_the_gaps_alarm_off() -> None:
    """One axis is dead and the daemon is started again every five minutes."""
    here = made(2, ratio_per_e2=1.0)
    kept, rows, raised = [], [], frozenset[str]()
    state = pipeline.start(here, 0)
    events = []
    for run in range(8):
        for first in range(run * 300, run * 300 + 300, 10):
            times = np.arange(first, first + 10, dtype=np.int64) * 1_000_000_000
            counts = np.tile(np.array([UNDER, MISSING], np.int32), (10, 1))
            batch = Batch(times, counts, np.zeros(10, np.int32), int(times[-1]))
            state, out = pipeline.step(state, batch, here)
            kept.append(batch)
            rows += out.blocks
            events += [event.name for event in out.events]
        blocks = stack(rows)
        assert blocks is not None
        state, missing = resume(here, blocks, kept, 0, raised)
        rows += missing.blocks
    assert "gaps" in events


def test_a_confirmation_comes_after_what_it_confirms() -> None:
    desk = Desk(made(1, hold_s=600.0))
    desk.feed(range(2), [UNDER] * 2)
    desk.idle(45)
    desk.daemon.answer({"do": "acknowledge", "key": "silence"})
    desk.idle(60)
    events = [e for c in desk.writer.commits for e in c.events if e.name == "silence"]
    assert [e.kind for e in events] == ["alarm", "confirmed"]
