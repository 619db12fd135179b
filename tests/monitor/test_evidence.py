"""Which alarms a recording is asked for, and what the record is told of it."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from monitor.core.alarms import AlertRule
from monitor.core.rows import Event
from monitor.evidence import ANSWER_NS, TOGETHER_NS, Evidence, keeper_of
from tests.core.stations import made
from tests.monitor.fakes import Desk, Front

S = 1_000_000_000


class Keeper:
    keeps = True

    def __init__(self, hears=True):
        self.hears, self.asked, self.said = hears, [], []

    def keep(self, request):
        self.asked.append(request)
        return self.hears

    def kept(self):
        said, self.said = self.said, []
        return said


def evidence(keeper, simulated=False):
    return Evidence(
        keeper, Path("watch.iq"), ["a", "b", "c", "d", "e"], ["lower", "upper"],
        simulated=simulated, recorder="fieldsill",
    )  # fmt: skip


def alarm(name, at_ns, raised=True):
    return Event(at_ns, "alarm", name, {"raised": raised})


def test_an_alarm_on_a_level_is_asked_for_once_and_only_when_it_begins() -> None:
    keeper = Keeper()
    own = evidence(keeper, simulated=True)
    own.notice([alarm("a", 5 * S), alarm("b", 5 * S)], 1_764_608_400 * S, 6 * S)
    own.notice([alarm("a", 5 * S + TOGETHER_NS)], None, 6 * S)
    own.notice([alarm("a", 8 * S, raised=False), alarm("silence", 8 * S)], None, 9 * S)
    own.notice([Event(9 * S, "note", "a", {"raised": True})], None, 9 * S)
    (request,) = keeper.asked
    assert request["at_ns"] == 5 * S
    assert request["label"] == "20251201T170005.000Z"
    assert request["why"] == "went over: a; b"
    assert request["names"] == ["lower", "upper"]
    assert request["simulated"] is True
    own.notice([alarm("c", 7 * S)], None, 8 * S)
    assert keeper.asked[1]["label"] == "boot-7000ms"
    assert keeper.asked[1]["utc_offset_ns"] is None


def test_what_was_kept_and_removed_are_events_with_the_alarms() -> None:
    keeper = Keeper()
    own = evidence(keeper)
    own.notice([alarm(name, 5 * S) for name in "abcde"], None, 6 * S)
    assert keeper.asked[0]["why"] == "went over: a; b; c; and 2 more"
    keeper.said = [
        {"removed": {"name": "000001-x", "bytes": 9}},
        {"kept": {"at_ns": 5 * S, "name": "000007-x", "sha256": "ff", "bytes": 8}},
    ]
    gone, kept = own.events(7 * S, 7 * S)
    assert gone == Event(
        7 * S, "evidence", "000001-x", {"removed": True, "bytes": 9, "why": "the budget is full"}
    )
    assert (kept.boot_ns, kept.kind, kept.name) == (7 * S, "evidence", "000007-x")
    assert kept.body == {
        "at_ns": 5 * S, "sha256": "ff", "bytes": 8, "alarms": list("abcde"),
    }  # fmt: skip
    assert own.events(8 * S, 7 * S + 2 * ANSWER_NS) == []


def test_what_is_not_answered_or_not_heard_is_told() -> None:
    silent = evidence(Keeper())
    silent.notice([alarm("a", 5 * S)], None, 6 * S)
    assert silent.events(7 * S, 6 * S + ANSWER_NS) == []
    (lost,) = silent.events(40 * S, 6 * S + ANSWER_NS + 1)
    assert lost.body == {"at_ns": 5 * S, "alarms": ["a"], "why": "no answer within 30 s"}
    deaf = evidence(Keeper(hears=False))
    deaf.notice([alarm("a", 5 * S)], None, 6 * S)
    (lost,) = deaf.events(7 * S, 7 * S)
    assert "cannot be asked" in lost.body["why"]


def test_front_ends_that_keep_nothing_are_left_alone() -> None:
    keeper = Keeper()
    keeper.keeps = False
    assert keeper_of(keeper) is None
    assert keeper_of(object()) is None
    own = evidence(None)
    own.notice([alarm("a", 5 * S)], None, 6 * S)
    assert own.events(7 * S, 7 * S) == []


def test_the_daemon_asks_when_a_level_is_crossed_and_keeps_the_answer(monkeypatch) -> None:
    keeper = Keeper()
    for name in ("keeps", "keep", "kept"):
        monkeypatch.setattr(Front, name, getattr(keeper, name), raising=False)
    rule = AlertRule("half", "", "", "local", 0.5, 0.4, 0.0, 0.0)
    desk = Desk(made(1, ratio_per_e2=1.0, rules=(rule,)))
    desk.feed(np.arange(0, 400.0), [-60_000] * 400)
    assert keeper.asked == []
    desk.feed(np.arange(400, 590.0), [-20_000] * 190)
    (request,) = keeper.asked
    key = desk.here.watches[0].key
    (began,) = [e for e in alarms(desk) if e.name == key]
    assert request["at_ns"] == began.boot_ns
    assert key in request["why"]
    assert request["folder"] == "record.iq"
    assert request["utc_offset_ns"] == desk.clock.utc0_ns
    keeper.said = [{"kept": {"at_ns": began.boot_ns, "name": "000001-x", "sha256": "ff"}}]
    desk.feed(np.arange(590, 602.0), [-20_000] * 12)
    (kept,) = [e for c in desk.writer.commits for e in c.events if e.kind == "evidence"]
    assert kept.body["alarms"] == [key]
    assert kept.body["sha256"] == "ff"


def test_without_a_clock_that_was_set_no_time_of_day_is_given(monkeypatch) -> None:
    keeper = Keeper()
    for name in ("keeps", "keep", "kept"):
        monkeypatch.setattr(Front, name, getattr(keeper, name), raising=False)
    rule = AlertRule("half", "", "", "local", 0.5, 0.4, 0.0, 0.0)
    desk = Desk(made(1, ratio_per_e2=1.0, rules=(rule,)), error_ns=None)
    desk.feed(np.arange(0, 400.0), [-20_000] * 400)
    assert [request["utc_offset_ns"] for request in keeper.asked] == [None]


def alarms(desk):
    return [e for c in desk.writer.commits for e in c.events if e.kind == "alarm"]
