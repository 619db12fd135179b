"""The alarms of the box and what people have done about them."""

from __future__ import annotations

import threading
from collections.abc import Iterable, Mapping
from dataclasses import replace

from monitor.core.alarms import Alarm, after
from monitor.core.errors import ConfigError
from monitor.core.readings import NS_PER_S
from monitor.core.rows import Event
from monitor.record.types import EventRow

KINDS = ("alarm", "confirmed", "muted")
LONGEST_MUTE_S = 24 * 3600


class AlarmDesk:
    """All alarms by key; every change is an event first, so that the record can restore it."""

    def __init__(self, alarms: Mapping[str, Alarm] | None = None) -> None:
        self._alarms = dict(alarms or {})
        self._lock = threading.Lock()

    @classmethod
    def from_events(cls, rows: Iterable[EventRow], boot: int) -> AlarmDesk:
        """The desk as the record's events leave it; mutes end with their boot."""
        desk = cls()
        for row in rows:
            if row.kind in KINDS:
                here = row.boot == boot
                desk.apply(Event(row.boot_ns if here else 0, row.kind, row.name, row.body))
                if not here:
                    desk._alarms[row.name] = replace(desk._alarms[row.name], muted_until_ns=None)
        return desk

    def apply(self, event: Event) -> None:
        """Follow an event; other kinds than alarms are passed over."""
        if event.kind in KINDS:
            with self._lock:
                alarm = self._alarms.get(event.name, Alarm(event.name))
                self._alarms[event.name] = after(alarm, event)

    def alarms(self) -> dict[str, Alarm]:
        """A copy, for readers in other threads."""
        with self._lock:
            return dict(self._alarms)

    def raised(self) -> frozenset[str]:
        """Keys of the alarms that stand."""
        return frozenset(key for key, alarm in self._alarms.items() if alarm.raised)

    def request(self, wanted: Mapping[str, object], now_ns: int) -> Event:
        """The event of what a person asks for on a page; ConfigError where it cannot be done."""
        key, do = text_of(wanted, "key", 1000), wanted.get("do")
        if key not in self._alarms:
            raise ConfigError(f"no alarm {key!r}; reload the page")
        who = text_of(wanted, "by", 200, "")
        now_ns = max(now_ns, self._alarms[key].since_ns)  # events are kept in the order of time
        if do == "acknowledge":
            return Event(now_ns, "confirmed", key, {"by": who})
        if do == "unshelve":
            return Event(now_ns, "muted", key, {"by": who, "until_ns": None})
        seconds = wanted.get("for_s", 1800)
        if (
            not isinstance(seconds, (int, float))
            or isinstance(seconds, bool)
            or not 0 < seconds <= LONGEST_MUTE_S
        ):
            raise ConfigError(f"for_s: {seconds!r} is not between 0 and {LONGEST_MUTE_S} s")
        until = now_ns + round(seconds * NS_PER_S)
        return Event(now_ns, "muted", key, {"by": who, "until_ns": until})


def text_of(
    request: Mapping[str, object], key: str, longest: int, default: str | None = None
) -> str:
    """A text of a request, cut to its longest; ConfigError where it is none or cannot be stored."""
    value = request.get(key, default)
    if not isinstance(value, str) or (default is None and not value.strip()):
        raise ConfigError(f"{key}: {value!r} is not a text; write it")
    try:
        value.encode("utf-8")
    except UnicodeEncodeError as error:
        raise ConfigError(f"{key}: holds what is no character; write it anew") from error
    return value.strip()[:longest]
