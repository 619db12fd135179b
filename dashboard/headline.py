"""The one sentence at the head of the page of the present. Pure: from a Live to words."""

from __future__ import annotations

from dataclasses import dataclass

from dashboard import words
from dashboard.models import OWN_POPULATION, Live, Snapshot, State, Station, levels_for
from dashboard.picture import ratio_of
from monitor.core.alarms import ENOUGH_SHARE

AT_ANTENNA = "at the monitor's antenna"
STANDING = ("unacknowledged", "acknowledged", "shelved")


@dataclass(frozen=True, slots=True)
class Headline:
    """The one sentence; kind: below, over, limit, silent, stopped, starting or no_record."""

    kind: str
    text: str
    more: tuple[str, ...] = ()


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
    if live.state is State.SILENT and (live.snapshot.get("device") or {}).get("ended"):
        text = f"The recorded series ended at {since}; this {words.NOTHING} since then."
        return Headline("silent", text, (_device(live),))
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
    above = [e for e in applying if e.get("verdict") == "exceeds" or _mean(e) > 1]
    if above:
        worst = max(above, key=_mean)
        figure = words.ratio_figure(_mean(worst))
        verdict = words.verdict(str(worst.get("verdict")), ())
        more = f"{title(worst)}: {verdict}"
        return Headline("limit", f"Above the limit {AT_ANTENNA}: {figure} of it", (more,))
    standing = [a for a in live.alarms if is_level(a) and a.get("state") in STANDING]
    if standing:
        names = dict.fromkeys(alarm_text(alarm) for alarm in standing)
        return Headline("over", f"Over an alert level {AT_ANTENNA}", tuple(names))
    return _against_levels(live, station)


def _against_levels(live: Live, station: Station) -> Headline:
    """No alarm of a level stands; yet that alone is no proof of being below."""
    pairs = [(lv, e) for e in live.exposures for lv in levels_for([*live.levels], e)]
    carried = _carried(live)
    worst = governing(live, station, None)
    if worst is None:
        return Headline("starting", f"No average yet; this {words.NOTHING}.", carried)
    over = [str(lv["name"]) for lv, e in pairs if _mean(e) >= float(lv["ratio"])]
    if over:
        text = f"Over an alert level {AT_ANTENNA}; no alarm is raised yet"
        return Headline("over", text, (*dict.fromkeys(over), *carried))
    if not pairs:
        figure = words.ratio_figure(_mean(worst))
        text = f"{figure} of the limit {AT_ANTENNA}; no alert level is set"
        return Headline("below", text, carried)
    below = f"Below the alert {'levels' if len(live.levels) > 1 else 'level'} {AT_ANTENNA}"
    thin = _thin(live)
    if thin or any((ratio_of(e, "ratio_high") or 0) >= float(lv["ratio"]) for lv, e in pairs):
        return Headline("open", f"{below} in what was measured; gaps leave it open", thin + carried)
    return Headline("below", below, carried)


def _thin(live: Live) -> tuple[str, ...]:
    """The averages that stand on too small a part of their averaging time."""
    return tuple(
        f"Only {words.share(f['valid_share'])} of the {words.average(f['averaging_s'])} is valid."
        for f in live.fields
        if not f["valid_share"] >= ENOUGH_SHARE
    )


def _mean(exposure: Snapshot) -> float:
    return ratio_of(exposure, "ratio_mean") or 0.0


def _carried(live: Live) -> tuple[str, ...]:
    """The reservations that the figures carry, simulated aside: every page says that itself."""
    found = [str(flag) for flag in live.snapshot.get("flags") or () if flag != "simulated"]
    trouble = live.snapshot.get("record_error")
    lines = [f"The figures carry a reservation: {'; '.join(found)}."] if found else []
    return (*lines, *([f"The record is not written: {trouble}"] if trouble else ()))


def is_level(alarm: Snapshot) -> bool:
    """Whether an alarm watches an alert level (and not, say, the instrument's silence)."""
    return alarm.get("level") is not None


def alarm_text(alarm: Snapshot) -> str:
    """What an alarm is about."""
    return words.alarm_text(str(alarm.get("text") or alarm.get("key")))


def title(exposure: Snapshot) -> str:
    """The name of an exposure's scope."""
    return words.scope_title(
        str(exposure.get("set", "")),
        str(exposure.get("population", "")),
        str(exposure.get("scope", "")),
        int(exposure.get("averaging_s") or 0),
    )
