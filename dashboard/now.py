"""What the page of the present says of each limit and each alarm. Pure: words and pictures."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from dashboard import picture, words
from dashboard.headline import alarm_text, is_level, occupancy, title
from dashboard.models import OWN_POPULATION, Live, Snapshot, Station, levels_for
from dashboard.picture import Picture, ratio_of

FROM_MEMORY = "limit values from memory, not confirmed"


@dataclass(frozen=True, slots=True)
class ScopeLine:
    """One limit set and scope in words, with its small picture."""

    index: int
    title: str
    ratio: str
    detail: str
    verdict: str
    note: str
    kind: str
    picture: Picture


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


def scope_lines(live: Live, station: Station) -> list[tuple[str, list[ScopeLine]]]:
    """(heading, lines) per population, that of the place first."""
    own = OWN_POPULATION.get(occupancy(live, station), "general_public")
    order = sorted({str(e.get("population")) for e in live.exposures}, key=lambda p: p != own)
    found = []
    for population in order:
        lines = [
            scope_line(e, live, station)
            for e in sorted(live.exposures, key=lambda e: -(ratio_of(e, "ratio_mean") or -1.0))
            if e.get("population") == population
        ]
        name = words.POPULATIONS.get(population, population)
        here = "the limits of this place" if population == own else "computed beside them"
        found.append((f"{name.capitalize()}: {here}", lines))
    return found


def scope_line(exposure: Snapshot, live: Live, station: Station) -> ScopeLine:
    """One scope in words."""
    mean = ratio_of(exposure, "ratio_mean")
    verdict = str(exposure.get("verdict", "undecided"))
    u_db = uncertainty_db(live, exposure)
    reasons = tuple(str(r) for r in exposure.get("reasons") or ())
    # The first reason tells what was compared; alone, it is why nothing can be decided.
    alone = verdict == "undecided" and len(reasons) == 1
    compared, why = ((), reasons) if alone else (reasons[:1], reasons[1:])
    return ScopeLine(
        index=int(exposure["index"]),
        title=title(exposure),
        ratio=words.of_limit(mean),
        detail="; ".join(filter(None, [_interval(exposure, u_db), *compared])),
        verdict=words.verdict(verdict, why),
        note=FROM_MEMORY if verdict != "undecided" and not exposure.get("verified") else "",
        kind=verdict,
        picture=drawn(exposure, live, station),
    )


def _interval(exposure: Snapshot, u_db: float | None) -> str:
    low, high = ratio_of(exposure, "ratio_low"), ratio_of(exposure, "ratio_high")
    if low is None or high is None:
        return ""
    bottom, top = picture.interval(low, high, u_db)
    what = "gaps" if u_db is None else "gaps and expanded uncertainty"
    return f"between {words.ratio_figure(bottom)} and {words.ratio_figure(top)}, by {what}"


def drawn(exposure: Snapshot | None, live: Live, station: Station) -> Picture:
    """The recess of one scope."""
    controlled = occupancy(live, station) == "controlled"
    if exposure is None:
        return picture.draw(None, filled=controlled)
    return picture.draw(
        exposure,
        filled=controlled,
        u_db=uncertainty_db(live, exposure),
        levels=levels_for(live.levels, exposure),
    )


def uncertainty_db(live: Live, exposure: Snapshot) -> float | None:
    """Expanded uncertainty of the field over the scope's averaging time, dB."""
    for one in live.fields:
        if one.get("averaging_s") == exposure.get("averaging_s"):
            value = one.get("u_db")
            return float(value) if isinstance(value, (int, float)) else None
    return None


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
    )


@dataclass(frozen=True, slots=True)
class Counters:
    """The device's counters in words: those that counted something, and the names of the rest."""

    some: list[tuple[str, int]]
    none: list[str]


def counters(live: Live) -> Counters:
    """Every counter of the device, bad frames among them."""
    found = (live.snapshot.get("device") or {}).get("counters") or {}
    named = [(str(key).replace("_", " "), int(count)) for key, count in found.items()]
    return Counters([c for c in named if c[1]], [name for name, count in named if not count])
