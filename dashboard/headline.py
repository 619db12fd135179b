"""The one sentence at the head of the page of the present. Pure: from a Live to words."""

from __future__ import annotations

from dataclasses import replace

from dashboard import bounds, told, words
from dashboard.bounds import Kind, Ratio
from dashboard.models import OWN_POPULATION, Live, Snapshot, Station, levels_for, stands
from dashboard.standstill import Headline, without_measurement
from monitor.core.alarms import INSTRUMENT_TEXTS

AT_ANTENNA = "at the monitor's antenna"
STANDING = ("unacknowledged", "acknowledged", "shelved")


def occupancy(live: Live, station: Station) -> str:
    """'public' or 'controlled'."""
    site = live.snapshot.get("site") or {}
    return str(site.get("occupancy") or station.occupancy)


def governing(live: Live, station: Station, wanted: int | None) -> Snapshot | None:
    """The scope that the picture draws: the one asked for, else the largest that applies here."""
    known = [e for e in live.exposures if live.ratio(e).stands is not None]
    for exposure in known:
        if exposure["index"] == wanted:
            return exposure
    own = OWN_POPULATION.get(occupancy(live, station))
    candidates = [e for e in known if e.get("population") == own] or known
    return max(candidates, key=live.rank, default=None)


def headline(live: Live, station: Station) -> Headline:
    """The sentence at the head of the page."""
    if not live.current:
        return without_measurement(live)
    said = _measuring(live, station)
    troubles = [text for key, text in INSTRUMENT_TEXTS.items() if stands(live.snapshot, key)]
    if not troubles:
        return said
    kind = "open" if said.kind == "below" else said.kind
    return replace(said, kind=kind, text=f"{said.text}; {' and '.join(troubles)}")


def _measuring(live: Live, station: Station) -> Headline:
    own = OWN_POPULATION.get(occupancy(live, station))
    applying = [e for e in live.exposures if e.get("population") == own] or live.exposures
    above = [e for e in applying if live.ratio(e).exceeds]
    if above:
        worst = max(above, key=live.rank)
        ratio = live.ratio(worst)
        text = f"Above the limit {AT_ANTENNA}"
        if ratio.kind is not Kind.AT_LEAST or (ratio.stands or 0) > 1:
            text += f": {told.figure(ratio)} of it"  # a verdict is one-sided, an interval is not
        spans = told.interval(ratio)
        line = f"{title(worst)}: exceeds" + (f"; {spans}" if spans else "")
        return Headline("limit", text, (line, *_carried(live)))
    near = [e for e in applying if not live.ratio(e).window.thin and live.rank(e) >= 1]
    if near:
        return _at_limit(max(near, key=live.rank), live)
    standing = [a for a in live.alarms if is_level(a) and a.get("state") in STANDING]
    if standing:
        names = dict.fromkeys(alarm_text(alarm) for alarm in standing)
        known = [words.parse_utc(alarm.get("since_utc")) for alarm in standing]
        began = min((when for when in known if when is not None), default=None)
        since = f" since {words.moment(began, live.drawn)}" if began else ""
        return Headline("over", f"Over an alert level {AT_ANTENNA}{since}", (*names, *_thin(live)))
    return _against_levels(live, station)


def _at_limit(exposure: Snapshot, live: Live) -> Headline:
    """A figure of the limit or more, of which no excess is known."""
    ratio = live.ratio(exposure)
    where = "Up to the limit or above it" if ratio.kind is Kind.BELOW else "At or above the limit"
    text = f"{where} {AT_ANTENNA}: {told.figure(ratio)} of it; cannot be decided"
    why = told.why(ratio, [str(reason) for reason in exposure.get("reasons") or ()])
    more = f"{title(exposure)}: {words.verdict('undecided', why)}"
    return Headline("undecided", text, (more, *_carried(live)))


def _against_levels(live: Live, station: Station) -> Headline:
    """No alarm of a level stands; yet that alone is no proof of being below."""
    pairs = [(lv, live.ratio(e)) for e in live.exposures for lv in levels_for([*live.levels], e)]
    carried = _carried(live)
    worst = governing(live, station, None)
    if worst is None:
        return Headline("starting", f"No average yet; this {words.NOTHING}.", carried)
    over = [str(lv["name"]) for lv, ratio in pairs if _over(ratio, float(lv["ratio"]))]
    if over:
        text = f"Over an alert level {AT_ANTENNA}; no alarm is raised yet"
        return Headline("over", text, (*dict.fromkeys(over), *carried))
    levels = f"the alert {'levels' if len(live.levels) > 1 else 'level'}" if pairs else "the limit"
    open_ = _open(live.ratio(worst), [ratio for _, ratio in pairs], levels)
    if open_:
        return Headline("open", open_, (*_thin(live), *carried))
    if not pairs:
        text = f"{_capital(told.of_limit(live.ratio(worst)))} {AT_ANTENNA}; no alert level is set"
        return Headline("below", text, carried)
    below = f"Below {levels} {AT_ANTENNA}"
    thin = _thin(live)
    if thin or any((ratio.high or 0) >= float(lv["ratio"]) for lv, ratio in pairs):
        text = f"{below} in what was measured; gaps leave it open"
        return Headline("open", text, (*thin, *carried))
    return Headline("below", below, carried)


def _open(ratio: Ratio, watched: list[Ratio], what: str) -> str:
    """Why nothing can be said to be below; '' where something can. ratio: that of the picture."""
    unbounded = next((one for one in [ratio, *watched] if _unbounded(one)), None)
    if unbounded is not None:
        neither = unbounded.kind is Kind.OPEN
        bound = "neither an upper nor a lower bound" if neither else "a lower bound"
        figure = _capital(told.of_limit(unbounded))
        return f"{figure} {AT_ANTENNA}; {bound}: it cannot be said to be below {what}"
    if ratio.window.thin:
        part = f"Only {told.valid_part(ratio.window)} are valid"
        return f"{part}; {told.of_limit(ratio)} {AT_ANTENNA}, gaps leave the rest open"
    return ""


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def _over(ratio: Ratio, level: float) -> bool:
    """As the alarms count: the mean where enough is valid, gaps as nothing always."""
    mean = None if ratio.window.thin else ratio.mean
    return any(figure is not None and figure >= level for figure in (ratio.low, mean))


def _unbounded(ratio: Ratio) -> bool:
    """Whether nothing bounds a figure above."""
    lone = ratio.mean is None and ratio.stands is not None
    return lone or bool(ratio.window.lower)


def _thin(live: Live) -> tuple[str, ...]:
    """The averages that stand on too small a part of their averaging time."""
    windows = [bounds.window(field) for field in live.fields]
    return tuple(
        f"Only {words.share(w.share)} of the {words.average(w.averaging_s)} is valid."
        for w in windows
        if w.thin
    )


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
