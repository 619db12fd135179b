"""What is known now, as one JSON-ready document for the pages and for status."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from monitor.config import Site
from monitor.core import figures
from monitor.core.alarms import INSTRUMENT_TEXTS, Alarm, AlertRule
from monitor.core.exposure import Verdict, reasons
from monitor.core.flags import Flag, words
from monitor.core.pipeline import State, live
from monitor.core.readings import DeviceStatus
from monitor.core.rows import ExposureRows
from monitor.core.station import Station
from monitor.marking import DAY_NS
from monitor.times import text_of


@dataclass(frozen=True, slots=True)
class View:
    """What the daemon's loop last knew; replaced whole, so that any thread may read it."""

    state: State
    device: DeviceStatus
    boot: int | None
    utc_offset_ns: int | None
    last_reading_age_s: float | None
    alarms: Mapping[str, Alarm]
    progress: tuple[float, float] | None
    record_error: str


def rfc3339(utc_ns: int | None) -> str | None:
    """UTC in RFC 3339 to the millisecond; None stays None."""
    return None if utc_ns is None else text_of(utc_ns, 3)


def snapshot(view: View, here: Station, site: Site) -> dict[str, object]:
    """The document of the control socket's answer to now; nan is None."""
    state = view.state
    utc = _utc(view, state.front_ns)
    return {
        "utc": rfc3339(utc),
        "boot": view.boot,
        "boot_ns": state.front_ns,
        "last_reading_age_s": view.last_reading_age_s,
        "last_reading_utc": rfc3339(_utc(view, state.last_ns)) if _heard(view) else None,
        "simulated": site.simulated,
        "progress": _progress(view.progress),
        "device": {
            "connected": view.device.connected,
            "ended": view.device.ended,
            "text": view.device.text,
            "temperature_c": view.device.temperature_c,
            "supply_v": view.device.supply_v,
            "counters": dict(view.device.counters),
            "late": state.late,
        },
        "calibration": _calibration(here, utc),
        "site": {"name": site.name, "place": site.place, "occupancy": site.occupancy},
        "fields": [_field(state, averaging_s, here) for averaging_s in here.averagings_s],
        "exposures": _exposures(state, here),
        "alarms": [_alarm(alarm, view) for alarm in _shown(view.alarms.values(), state.front_ns)],
        "levels": [_level(rule) for rule in _rules(here)],
        "flags": _flags(state, here),
        "record_error": view.record_error,
    }


def _utc(view: View, boot_ns: int) -> int | None:
    return None if view.utc_offset_ns is None else boot_ns + view.utc_offset_ns


def _heard(view: View) -> bool:
    return view.last_reading_age_s is not None


def _progress(progress: tuple[float, float] | None) -> dict[str, float] | None:
    return None if progress is None else {"done_s": progress[0], "total_s": progress[1]}


def _number(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None


def _field(state: State, averaging_s: int, here: Station) -> dict[str, object]:
    row = figures.fields(live(state, averaging_s, here), averaging_s, here)
    known = math.isfinite(row.e2_mean[0])
    return {
        "averaging_s": averaging_s,
        "e_low": _number(math.sqrt(row.e2_low[0])),
        "e_mean": math.sqrt(row.e2_mean[0]) if known else None,
        "e_high": math.sqrt(row.e2_high[0]) if known else None,
        "e_max": math.sqrt(row.e2_max[0]) if known else None,
        "u_db": _number(row.u_db[0]) if known else None,
        "added_e2": _number(row.added_e2[0]) if known else None,
        "k": float(row.k[0]),
        "valid_share": float(row.valid_share[0]),
        "observed_share": float(row.observed_share[0]),
        "flags": words(int(row.flags[0])),
    }


def _calibration(here: Station, utc_ns: int | None) -> dict[str, object]:
    """When it is due and the whole days until then, below 0 where it is overdue."""
    due_ns = here.chain.due_utc_ns
    days = None if due_ns is None or utc_ns is None else (due_ns - utc_ns) // DAY_NS
    return {"due_utc": rfc3339(due_ns), "days_left": days}


def _exposures(state: State, here: Station) -> list[dict[str, object]]:
    found = []
    for averaging_s in here.averagings_s:
        sums = live(state, averaging_s, here)
        rows = figures.exposures(sums, averaging_s, here)
        share = float(figures.valid_share(sums, averaging_s)[0])
        bits = int(figures.field_flags(sums, averaging_s, here)[0])
        seen = float(figures.seen_share(sums, averaging_s)[0])
        for i, index in enumerate(rows.scope.tolist()):
            scope = here.scopes[index]
            found.append(
                {
                    "index": index,
                    "set": scope.set_id,
                    "edition": scope.edition,
                    "population": scope.population,
                    "scope": scope.scope,
                    "averaging_s": averaging_s,
                    "clause": scope.clause,
                    "verified": scope.verified,
                    "ratio_low": _number(rows.ratio_low[i]),
                    "ratio_mean": _number(rows.ratio_mean[i]),
                    "ratio_high": _number(rows.ratio_high[i]),
                    "u_db": _number(rows.u_db[i]),
                    "added_ratio": _number(rows.added_ratio[i]),
                    "k": here.k_ratio,
                    "verdict": Verdict(int(rows.verdict[i])).name.lower(),
                    "reasons": _reasons(rows, i, (share, bits), seen, here, scope.verified),
                }
            )
    return sorted(found, key=lambda item: int(str(item["index"])))


def _reasons(
    rows: ExposureRows,
    i: int,
    share_flags: tuple[float, int],
    seen_share: float,
    here: Station,
    verified: bool,
) -> list[str]:
    return reasons(
        float(rows.ratio_low[i]),
        float(rows.ratio_mean[i]),
        float(rows.ratio_high[i]),
        float(rows.u_db[i]) / here.k_ratio,
        here.k_ratio,
        *share_flags,
        verified=verified,
        field_region=here.field_region,
        outside_excluded=here.outside_excluded,
        lowest_hz=here.lowest_hz,
        added=float(rows.added_ratio[i]) / here.k_ratio,
        seen_share=seen_share,
    )


def _shown(alarms: Iterable[Alarm], now_ns: int) -> list[Alarm]:
    return [alarm for alarm in alarms if alarm.state(now_ns) != "normal"]


def _alarm(alarm: Alarm, view: View) -> dict[str, object]:
    return {
        "key": alarm.key,
        "text": INSTRUMENT_TEXTS.get(alarm.key, alarm.key),
        "state": alarm.state(view.state.front_ns),
        "since_utc": rfc3339(_utc(view, alarm.since_ns)),
        "muted_until_utc": (
            None if alarm.muted_until_ns is None else rfc3339(_utc(view, alarm.muted_until_ns))
        ),
        "level": alarm.level,
        "ratio": alarm.ratio,
    }


def _rules(here: Station) -> Sequence[AlertRule]:
    return list(dict.fromkeys(watch.rule for watch in here.watches))


def _level(rule: AlertRule) -> dict[str, object]:
    return {
        "name": rule.name,
        "set": rule.set_id,
        "population": rule.population,
        "scope": rule.scope,
        "ratio": rule.ratio,
        "returns_at": rule.returns_at,
    }


def _flags(state: State, here: Station) -> list[str]:
    bits = 0
    for averaging_s in here.averagings_s:
        bits |= int(figures.field_flags(live(state, averaging_s, here), averaging_s, here)[0])
    return words(bits & ~int(Flag.SIMULATED))
