"""The past over a calendar span: from a request and the record to what a template draws."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from datetime import date
from typing import Any

import numpy as np

from dashboard import asked, chart, events, outline, past, reservations, span, words
from dashboard.models import Doors, RecordLike, Station, levels_for, levels_of
from dashboard.wish import Wish, read_wish, whole_number
from monitor.core import flags
from monitor.core.errors import ConfigError, RecordError
from monitor.core.limits import Scope
from monitor.record.types import History

WIDE = chart.Frame(1080, 400)
NARROW = chart.Frame(358, 320, left=52, right=8)
AT_MOST = 1440
"""A day of averages, one a minute, is drawn whole."""
MAX_API_POINTS = 20_000
MAX_EVENTS = 40


@contextmanager
def opened(station: Station, doors: Doors) -> Iterator[RecordLike]:
    """The record, closed again in any case; RecordError where there is none yet."""
    if not station.record_path.exists():
        raise RecordError(
            f"no record yet at {station.record_path.name}; start the monitor (fieldsill run)"
        )
    record = doors.open_record(station.record_path)
    try:
        yield record
    finally:
        record.close()


def _now_ns(record: RecordLike, doors: Doors) -> int:
    """The present, or the newest average where a record's own clock is ahead of this machine."""
    latest = record.latest()
    newest = None if latest is None else latest.utc_ns
    return max(doors.utc_ns(), newest or 0)


def _fallback_day(record: RecordLike, now_ns: int) -> date:
    latest = record.latest()
    known = latest.utc_ns if latest is not None else None
    return words.utc_of(now_ns if known is None else max(0, known - 1)).date()


def page(station: Station, doors: Doors, args: Mapping[str, str]) -> dict[str, Any]:
    """Everything that the history page shows."""
    with opened(station, doors) as record:
        now_ns = _now_ns(record, doors)
        wish = read_wish(args, _fallback_day(record, now_ns))
        wish = asked.settled(wish, args, record, station.occupancy)
        scopes, scope = dict(record.scopes()), wish.scope
        found = record.history(wish.span.start_ns, wish.span.end_ns, wish.averaging_s, AT_MOST)
        series = past.series_of(found, scope if wish.show == "ratio" else None, now_ns)
        summary = past.summary(series, wish.span, now_ns)
        said = outline.sentences(summary, wish, found, record, now_ns)
        happened = record.events(wish.span.start_ns, wish.span.end_ns, MAX_EVENTS)
        simulated = record.simulated
    marks = _marks(wish, found, scopes, scope, station)
    lines = events.numbered(happened)
    return {
        "simulated": simulated,
        "name": station.name,
        "place": station.place,
        "wish": wish,
        "average": words.average(wish.averaging_s),
        "unit": "V/m" if wish.show == "e" else "of the limit",
        "scope_title": _title(scopes[scope]) if scope is not None else "",
        "scope_links": _scope_links(wish, scopes, scope),
        "charts": _charts(series, wish, marks, lines, now_ns),
        "bin_words": words.duration(found.bin_ns / 1e9) if found.bin_ns else "",
        "summary": summary,
        "summary_words": said,
        "marks": marks,
        "gaps": past.gap_words(series.gaps, wish.span),
        "rows": past.rows(series, wish.span, now_ns),
        "u_words": outline.uncertainty(found),
        "ahead": wish.span.start_ns >= now_ns,
        "flags": _reservations(found),
        "levels": _levels(scopes, scope, station),
        "whole": not found.bin_ns,
        "events": lines,
        "more_events": len(happened) >= MAX_EVENTS,
        "links": _links(wish, now_ns),
    }


def _charts(
    series: chart.Series,
    wish: Wish,
    marks: Sequence[chart.Mark],
    lines: Sequence[events.EventLine],
    now_ns: int,
) -> list[tuple[str, chart.Chart, list[tuple[float, str]]]]:
    """(name, drawing, alarms that began) for wide and for narrow pages."""
    began = [(line.began_ns, line.number) for line in lines if line.began_ns is not None]
    return [
        (
            css,
            chart.draw(series, wish.span, marks, frame, wish.logarithmic, now_ns),
            chart.pennants(began, wish.span, frame),
        )
        for css, frame in (("wide", WIDE), ("narrow", NARROW))
    ]


def _title(scope: Scope) -> str:
    return words.scope_title(scope.set_id, scope.population, scope.scope, scope.averaging_s)


def _scope_links(
    wish: Wish, scopes: Mapping[int, Scope], scope: int | None
) -> list[tuple[str, str, bool]]:
    return [
        (_title(s), wish.span.link("/history", **wish.keys(scope=i)), i == scope)
        for i, s in scopes.items()
        if int(s.averaging_s) == wish.averaging_s
    ]


def _marks(
    wish: Wish, found: History, scopes: Mapping[int, Scope], scope: int | None, station: Station
) -> list[chart.Mark]:
    if scope is None:
        return []
    limit = 1.0 if wish.show == "ratio" else past.equivalent_limit(found, scope)
    return past.marks(_levels(scopes, scope, station), limit, wish.show == "e")


def _levels(
    scopes: Mapping[int, Scope], scope: int | None, station: Station
) -> Sequence[Mapping[str, object]]:
    """The alert levels that watch the scope whose limit is drawn."""
    if scope is None:
        return []
    one = scopes[scope]
    described = {"set": one.set_id, "population": one.population, "scope": one.scope}
    return levels_for(levels_of(station.alerts), described)


def _reservations(found: History) -> list[str]:
    """What any average in the span has to say about itself; simulated stands on every page."""
    bits = int(np.bitwise_or.reduce(found.flags)) if found.flags.size else 0
    return reservations.sentences(flags.words(bits & ~int(flags.Flag.GAP)))


def _links(wish: Wish, now_ns: int) -> dict[str, str]:
    """Addresses of the neighbouring spans and of the usual lengths round this one."""
    last = words.utc_of(max(wish.span.start_ns, min(wish.span.end_ns - 1, now_ns)))
    keys = wish.keys()
    following = wish.span.moved(1)
    links = {
        "previous": wish.span.moved(-1).link("/history", **keys),
        "day": span.day(last).link("/history", **keys),
        "week": span.week(last).link("/history", **keys),
        "month": span.month(last).link("/history", **keys),
        "year": span.year(last).link("/history", **keys),
        "scale": wish.span.link(
            "/history", **wish.keys(scale="straight" if wish.logarithmic else "log")
        ),
    }
    if following.start_ns < now_ns:
        links["next"] = following.link("/history", **keys)
    return links


def document(station: Station, doors: Doors, args: Mapping[str, str]) -> dict[str, Any]:
    """History as JSON; a figure that is not there is null."""
    text = args.get("at_most") or str(AT_MOST)
    if not whole_number(text) or not 1 <= int(text) <= MAX_API_POINTS:
        raise ConfigError(
            f"at_most: {text[:20]!r} is not a whole number from 1 to {MAX_API_POINTS}"
        )
    with opened(station, doors) as record:
        now_ns = _now_ns(record, doors)
        wish = read_wish(args, _fallback_day(record, now_ns))
        found = record.history(wish.span.start_ns, wish.span.end_ns, wish.averaging_s, int(text))
        scopes = dict(record.scopes())
        asked.named(wish, args, scopes)
        simulated = record.simulated
    return {
        "from_utc": words.rfc3339(wish.span.start_ns),
        "to_utc": words.rfc3339(wish.span.end_ns),
        "averaging_s": found.averaging_s,
        "simulated": simulated,
        "bin_s": found.bin_ns / 1e9,
        "end_utc": [words.rfc3339(int(t)) for t in found.utc_ns],
        "e_low_v_per_m": _numbers(found.e_low),
        "e_mean_v_per_m": _numbers(found.e_mean),
        "e_high_v_per_m": _numbers(found.e_high),
        "e_max_v_per_m": _numbers(found.e_max),
        "valid_share": _numbers(found.valid_share),
        "expanded_uncertainty_db": _numbers(found.u_db),
        "flags": [flags.words(int(bits)) for bits in found.flags],
        "exposure_ratios": _ratios(found, scopes),
        "gaps": [
            {"start_utc": words.rfc3339(a), "end_utc": words.rfc3339(b)}
            for a, b in past.gaps_until(found.gaps, now_ns)
        ],
    }


def _ratios(found: History, scopes: Mapping[int, Scope]) -> list[dict[str, Any]]:
    return [
        {
            "set": scopes[index].set_id,
            "edition": scopes[index].edition,
            "population": scopes[index].population,
            "scope": scopes[index].scope,
            "low": _numbers(low),
            "mean": _numbers(mean),
            "high": _numbers(high),
        }
        for index, (low, mean, high) in found.ratios.items()
    ]


def _numbers(values: Any) -> list[float | None]:
    return [float(v) if math.isfinite(v) else None for v in values]
