"""A restarting daemon finds every alarm as it was, however much happened since."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from monitor.core.alarms import Alarm, after
from monitor.core.rows import Event
from monitor.record.reader import Record
from monitor.record.types import Commit, EventRow
from tests.record.making import writer_of


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """Where the test's record goes."""
    return tmp_path / "site.db"


def test_the_few_events_restore_every_alarm(path: Path) -> None:
    """The desk after all events equals the desk after alarm_events(), however they were mixed."""
    rng = np.random.default_rng(2)
    writer = writer_of(path)
    events: list[Event] = []
    for i in range(3000):
        kind = str(rng.choice(["alarm", "confirmed", "muted", "note"], p=[0.08, 0.04, 0.02, 0.86]))
        until = None if rng.random() < 0.3 else 10 * i
        bodies: dict[str, dict[str, object]] = {
            "alarm": {"raised": bool(rng.random() < 0.5), "level": float(i)},
            "muted": {"until_ns": until},
        }
        events.append(Event(i, kind, f"alarm {rng.integers(40)}", bodies.get(kind, {})))
    boot = writer.begin_boot("b", "machine")
    writer.commit(boot, Commit(events=tuple(events)))
    with Record.open(path) as record:
        assert record.alarm_events()[0].utc_ns is None
        few = record.alarm_events()
    whole: dict[str, Alarm] = {}
    restored: dict[str, Alarm] = {}
    for alarms, source in ((whole, events), (restored, [_event(row) for row in few])):
        for event in source:
            if event.kind != "note":
                alarm = alarms.get(event.name, Alarm(event.name))
                alarms[event.name] = after(alarm, event)
    assert restored == whole
    assert len(whole) == 40
    assert len(few) <= 4 * 40
    assert {alarm.state(3000) for alarm in whole.values()} >= {"acknowledged", "shelved"}


def _event(row: EventRow) -> Event:
    return Event(row.boot_ns, row.kind, row.name, row.body)


def test_an_alarm_is_found_behind_any_number_of_other_events(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    first = Event(1, "alarm", "roof", {"raised": True})
    notes = tuple(Event(i, "note", "n", {}) for i in range(20_000))
    writer.commit(boot, Commit(events=(first, *notes)))
    with Record.open(path) as record:
        assert [(e.kind, e.name, e.body) for e in record.alarm_events()] == [
            ("alarm", "roof", {"raised": True})
        ]


def test_a_boot_is_found_by_its_name(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    with Record.open(path) as record:
        assert record.boot_number("b", "machine") == boot
        assert record.boot_number("b", "series") is None
