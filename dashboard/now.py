"""What the page of the present says of each limit and each alarm. Pure: words and pictures."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from dashboard import picture, told, words
from dashboard.headline import alarm_text, is_level, occupancy, title
from dashboard.models import OWN_POPULATION, Live, Snapshot, Station, levels_for
from dashboard.picture import Picture

FROM_MEMORY = "limit values from memory, not confirmed"


@dataclass(frozen=True, slots=True)
class ScopeLine:
    """One limit set and scope in words, with its small picture.

    label, space: the words in the large picture, at the level and above it. line, left: what its
    line is, and for a controlled place what is left.
    """

    index: int
    title: str
    ratio: str
    detail: str
    verdict: str
    note: str
    kind: str
    picture: Picture
    label: str
    space: str
    line: str
    left: str


@dataclass(frozen=True, slots=True)
class AlarmLine:
    """One alarm in plain words, and what a person may do about it."""

    key: str
    text: str
    state: str
    since: str
    kind: str
    can_confirm: bool
    can_mute: bool
    can_unmute: bool
    history: dict[str, str]


def scope_lines(live: Live, station: Station) -> list[tuple[str, list[ScopeLine]]]:
    """(heading, lines) per population, that of the place first."""
    own = OWN_POPULATION.get(occupancy(live, station), "general_public")
    order = sorted({str(e.get("population")) for e in live.exposures}, key=lambda p: p != own)
    found = []
    for population in order:
        lines = [
            scope_line(e, live, station)
            for e in sorted(live.exposures, key=lambda e: -live.rank(e))
            if e.get("population") == population
        ]
        name = words.POPULATIONS.get(population, population)
        here = "the limits of this place" if population == own else "computed beside them"
        found.append((f"{name.capitalize()}: {here}", lines))
    return found


def scope_line(exposure: Snapshot, live: Live, station: Station) -> ScopeLine:
    """One scope in words."""
    ratio = live.ratio(exposure)
    reasons = tuple(str(r) for r in exposure.get("reasons") or ())
    filled = occupancy(live, station) == "controlled"
    verified = exposure.get("verified") or ratio.verdict == "undecided"
    return ScopeLine(
        index=int(exposure["index"]),
        title=title(exposure),
        ratio=told.of_limit(ratio),
        detail="; ".join(filter(None, [told.in_valid_part(ratio), told.interval(ratio)])),
        verdict=words.verdict(ratio.verdict, told.why(ratio, reasons)),
        note="" if verified else FROM_MEMORY,
        kind=ratio.verdict,
        picture=drawn(exposure, live, station),
        label=told.level_label(ratio, filled=filled),
        space=told.space_label(ratio),
        line=told.line(ratio),
        left=told.left(ratio, reasons),
    )


def drawn(exposure: Snapshot | None, live: Live, station: Station) -> Picture:
    """The recess of one scope."""
    controlled = occupancy(live, station) == "controlled"
    if exposure is None:
        return picture.draw(None, filled=controlled)
    levels = levels_for(live.levels, exposure)
    return picture.draw(live.ratio(exposure), filled=controlled, levels=levels)


@dataclass(frozen=True, slots=True)
class FieldWords:
    """The field strength of one averaging time in words; known: there is a figure at all."""

    e: str
    interval: str
    spread: str
    known: bool


def field_words(live: Live) -> list[FieldWords]:
    """The field strengths, in the order of the snapshot."""
    return [
        FieldWords(
            told.e_words(one, live.flags),
            told.e_interval(one, live.flags),
            told.e_spread(one, live.flags),
            told.e_words(one, live.flags) != words.figure(None),
        )
        for one in live.fields
    ]


def alarm_lines(live: Live) -> list[AlarmLine]:
    """Every alarm that is not normal, in words."""
    return [_alarm(alarm, live) for alarm in live.alarms]


def _alarm(alarm: Mapping[str, Any], live: Live) -> AlarmLine:
    state = str(alarm.get("state"))
    until = words.parse_utc(alarm.get("muted_until_utc"))
    muted_until = words.moment(until, live.drawn) if until else ""
    return AlarmLine(
        key=str(alarm.get("key")),
        text=alarm_text(alarm),
        state=words.alarm_state(state, is_level=is_level(alarm), muted_until=muted_until),
        since=words.moment(words.parse_utc(alarm.get("since_utc")), live.drawn),
        kind="returned" if state == "returned_unacknowledged" else state,
        can_confirm=state in ("unacknowledged", "returned_unacknowledged"),
        can_mute=state in ("unacknowledged", "acknowledged"),
        can_unmute=state == "shelved",
        history=_in_history(alarm),
    )


def _in_history(alarm: Mapping[str, Any]) -> dict[str, str]:
    """What the history is asked for to show an alarm: its day and its limit."""
    since = words.parse_utc(alarm.get("since_utc"))
    day = {"from": since.date().isoformat(), "to": since.date().isoformat()} if since else {}
    limit = words.scope_of(str(alarm.get("key")))
    return {**day, "show": "ratio", "limit": " ".join(limit)} if limit else day
