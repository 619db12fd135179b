"""Recordings of what was on the air when an alarm began: asked for, and told to the record.

The front end keeps and writes them; nothing here waits or touches a disk.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Protocol, cast

from monitor.config import Site
from monitor.core.readings import NS_PER_S
from monitor.core.rows import Event
from monitor.core.station import Station
from monitor.times import text_of

KIND = "evidence"
TOGETHER_NS = NS_PER_S // 2
"""Alarms so close to one that a recording was asked for lie in it (our choice: half its length)."""
ANSWER_NS = 30 * NS_PER_S
MOST_NAMED = 3


class Keeper(Protocol):
    """What a front end that can keep its samples offers besides; keeps: whether it is to."""

    keeps: bool

    def keep(self, request: Mapping[str, object]) -> bool:
        """Ask for a recording: the fields of a request are in Evidence. False: not heard."""

    def kept(self) -> list[Mapping[str, object]]:
        """Since the last call: {"kept": body} and {"removed": body}."""


def keeper_of(front: object) -> Keeper | None:
    """The front end as a keeper; None where it is none or is to keep nothing."""
    return cast(Keeper, front) if getattr(front, "keeps", False) else None


@dataclass(slots=True)
class _Asked:
    at_ns: int
    asked_ns: int
    alarms: list[str] = field(default_factory=list)


class Evidence:
    """Which alarms are worth a recording, and the events that say what became of it.

    watched: keys of the alarms on a level. names: the band of each channel.
    """

    def __init__(
        self, keeper: Keeper | None, folder: Path, watched: Iterable[str], names: Sequence[str],
        *, simulated: bool, recorder: str,
    ) -> None:  # fmt: skip
        self._keeper, self._folder, self._watched = keeper, folder, frozenset(watched)
        self._names, self._simulated, self._recorder = list(names), simulated, recorder
        self._asked: list[_Asked] = []
        self._failed: list[tuple[_Asked, str]] = []

    def notice(self, events: Sequence[Event], utc_offset_ns: int | None, now_ns: int) -> None:
        """Ask for a recording where an alarm on a level began. now_ns: boot time."""
        if self._keeper is None:
            return
        begun: list[_Asked] = []
        for event in events:
            if event.kind != "alarm" or event.name not in self._watched:
                continue
            if event.body.get("raised"):
                self._gather(event, begun, now_ns)
        for asked in begun:
            if self._keeper.keep(self._request(asked, utc_offset_ns)):
                self._asked.append(asked)
            else:
                self._failed.append((asked, "the receiver's process cannot be asked"))

    def _gather(self, event: Event, begun: list[_Asked], now_ns: int) -> None:
        for asked in (*self._asked, *begun):
            if abs(event.boot_ns - asked.at_ns) <= TOGETHER_NS:
                asked.alarms.append(event.name)
                return
        begun.append(_Asked(event.boot_ns, now_ns, [event.name]))

    def _request(self, asked: _Asked, utc_offset_ns: int | None) -> dict[str, object]:
        utc_ns = None if utc_offset_ns is None else asked.at_ns + utc_offset_ns
        label = (
            f"boot-{asked.at_ns // 1_000_000}ms"
            if utc_ns is None
            else text_of(utc_ns, 3).replace("-", "").replace(":", "")
        )
        more = len(asked.alarms) - MOST_NAMED
        why = "; ".join(asked.alarms[:MOST_NAMED]) + (f"; and {more} more" if more > 0 else "")
        return {
            "at_ns": asked.at_ns, "folder": str(self._folder), "label": label,
            "names": self._names, "why": f"went over: {why}", "utc_offset_ns": utc_offset_ns,
            "simulated": self._simulated, "recorder": self._recorder,
        }  # fmt: skip

    def events(self, front_ns: int, now_ns: int) -> list[Event]:
        """What became of recordings since the last call. front_ns: the time events are given."""
        if self._keeper is None:
            return []
        found = []
        for said in self._keeper.kept():
            kept, removed = said.get("kept"), said.get("removed")
            if isinstance(kept, Mapping):
                found.append(self._kept(kept, front_ns))
            elif isinstance(removed, Mapping):
                body = {"removed": True, "bytes": removed["bytes"], "why": "the budget is full"}
                found.append(Event(front_ns, KIND, str(removed["name"]), body))
        for asked in [one for one in self._asked if now_ns - one.asked_ns > ANSWER_NS]:
            self._asked.remove(asked)
            self._failed.append((asked, f"no answer within {ANSWER_NS // NS_PER_S} s"))
        failed, self._failed = self._failed, []
        return found + [
            Event(front_ns, KIND, "", {"at_ns": one.at_ns, "alarms": one.alarms, "why": why})
            for one, why in failed
        ]

    def _kept(self, said: Mapping[str, object], front_ns: int) -> Event:
        alarms: list[str] = []
        for asked in self._asked:
            if asked.at_ns == said["at_ns"]:
                self._asked.remove(asked)
                alarms = asked.alarms
                break
        body = {key: value for key, value in said.items() if key != "name"} | {"alarms": alarms}
        return Event(front_ns, KIND, str(said.get("name", "")), body)


def evidence_of(front: object, site: Site, here: Station) -> Evidence:
    """For a site's alarms on levels, where its front end keeps samples."""
    return Evidence(
        keeper_of(front),
        site.evidence_path,
        [watch.key for watch in here.watches],
        [channel.band for channel in site.channels],
        simulated=site.simulated,
        recorder="fieldsill",
    )
