"""What the page of the present says, state by state. Pure: from a Live to words and a picture."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from dashboard import picture, words
from dashboard.models import Live, Snapshot, State, Station, levels_for
from dashboard.picture import Picture, ratio_of

AT_ANTENNA = "at the monitor's antenna"
OWN_POPULATION = {"public": "general_public", "controlled": "occupational"}


@dataclass(frozen=True, slots=True)
class Headline:
    """The one sentence; kind: below, over, limit, silent, stopped, starting or no_record."""

    kind: str
    text: str
    more: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class ScopeLine:
    """One limit set and scope in words, with its small picture."""

    index: int
    title: str
    ratio: str
    gaps: str
    verdict: str
    reasons: tuple[str, ...]
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


def occupancy(live: Live, station: Station) -> str:
    """'public' or 'controlled'."""
    site = live.snapshot.get("site") or {}
    return str(site.get("occupancy") or station.occupancy)


def governing(live: Live, station: Station, wanted: int | None) -> Snapshot | None:
    """The scope that the picture draws: the one asked for, else the largest that applies here."""
    known = [e for e in live.exposures if ratio_of(e, "ratio_mean") is not None]
    for exposure in known:
        if exposure["index"] == wanted:
            return exposure
    own = OWN_POPULATION.get(occupancy(live, station))
    candidates = [e for e in known if e.get("population") == own] or known
    return max(candidates, key=lambda e: float(e["ratio_mean"]), default=None)


def headline(live: Live, station: Station) -> Headline:
    """The sentence at the head of the page."""
    since = words.moment(live.since, live.drawn)
    if live.state is State.STOPPED:
        known = f"No measurement since {since}" if live.since else "No measurement"
        return Headline("stopped", f"{known}; this {words.NOTHING}.", (_why(live),))
    if live.state is State.NO_RECORD:
        return Headline(
            "no_record",
            f"No measurement and no record yet; this {words.NOTHING}.",
            ("Start the monitor: fieldsill run, or fieldsill rehearse for invented data.",),
        )
    if live.state is State.STARTING:
        return Headline("starting", f"No reading yet; this {words.NOTHING}.", (_device(live),))
    if live.state is State.SILENT:
        age = words.duration(live.age_s or 0)
        text = f"No reading since {since}, for {age}; this {words.NOTHING}."
        return Headline("silent", text, (_device(live),))
    return _measuring(live, station)


def _why(live: Live) -> str:
    return f"The measuring part of the monitor does not answer ({live.trouble})."


def _device(live: Live) -> str:
    device = live.snapshot.get("device") or {}
    state = "connected" if device.get("connected") else "not connected"
    text = device.get("text")
    return f"Sensor: {state}{f' ({text})' if text else ''}."


def _measuring(live: Live, station: Station) -> Headline:
    own = OWN_POPULATION.get(occupancy(live, station))
    applying = [e for e in live.exposures if e.get("population") == own] or live.exposures
    exceeding = [e for e in applying if e.get("verdict") == "exceeds"]
    above = [e for e in applying if (ratio_of(e, "ratio_mean") or 0) > 1]
    if exceeding or above:
        worst = max(exceeding or above, key=lambda e: ratio_of(e, "ratio_mean") or 0)
        figure = words.ratio_figure(ratio_of(worst, "ratio_mean"))
        return Headline("limit", f"Above the limit {AT_ANTENNA}: {figure} of it", (_title(worst),))
    over = [a for a in live.alarms if is_level(a) and a.get("state") in STANDING]
    if over:
        return Headline("over", f"Over an alert level {AT_ANTENNA}", tuple(_names(over)))
    if live.levels:
        plural = "levels" if len(live.levels) > 1 else "level"
        return Headline("below", f"Below the alert {plural} {AT_ANTENNA}")
    worst_known = governing(live, station, None)
    figure = words.ratio_figure(ratio_of(worst_known, "ratio_mean"))
    return Headline("below", f"{figure} of the limit {AT_ANTENNA}; no alert level is set")


STANDING = ("unacknowledged", "acknowledged", "shelved")


def is_level(alarm: Snapshot) -> bool:
    """Whether an alarm watches an alert level (and not, say, the instrument's silence)."""
    return alarm.get("level") is not None


def _names(alarms: Sequence[Snapshot]) -> list[str]:
    return [str(alarm.get("text") or alarm.get("key")) for alarm in alarms]


def _title(exposure: Snapshot) -> str:
    return words.scope_title(
        str(exposure.get("set", "")),
        str(exposure.get("population", "")),
        str(exposure.get("scope", "")),
        int(exposure.get("averaging_s") or 0),
    )


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
    low, high = ratio_of(exposure, "ratio_low"), ratio_of(exposure, "ratio_high")
    gaps = ""
    if low is not None and high is not None and words.figure(low) != words.figure(high):
        gaps = (
            f"between {words.ratio_figure(low)} (gaps as zero) and "
            f"{words.ratio_figure(high)} (gaps at the maximum)"
        )
    verdict = str(exposure.get("verdict", "undecided"))
    reasons = tuple(str(r) for r in exposure.get("reasons") or ())
    return ScopeLine(
        index=int(exposure["index"]),
        title=_title(exposure),
        ratio=words.of_limit(mean),
        gaps=gaps,
        verdict=words.verdict(verdict, () if verdict != "undecided" else reasons),
        reasons=reasons if verdict != "undecided" else (),
        note="" if exposure.get("verified", False) else "limit values from memory, not confirmed",
        kind=verdict,
        picture=drawn(exposure, live, station),
    )


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
    until = words.parse_utc(alarm.get("until_utc"))
    muted_until = words.moment(until, live.drawn) if until else ""
    return AlarmLine(
        key=str(alarm.get("key")),
        text=str(alarm.get("text") or alarm.get("key")),
        state=words.alarm_state(state, is_level=is_level(alarm), muted_until=muted_until),
        since=words.moment(words.parse_utc(alarm.get("since_utc")), live.drawn),
        kind="returned" if state == "returned_unacknowledged" else state,
        can_confirm=state in ("unacknowledged", "returned_unacknowledged"),
        can_mute=state in ("unacknowledged", "acknowledged"),
        can_unmute=state == "shelved",
    )
