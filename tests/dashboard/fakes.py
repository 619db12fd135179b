"""A daemon and a record that say what a test wants them to say."""

from __future__ import annotations

import copy
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
from flask import Flask
from flask.testing import FlaskClient

from dashboard.app import create_app
from dashboard.models import Doors
from dashboard.words import rfc3339
from monitor.core.alarms import AlertRule
from monitor.core.errors import DeviceError
from monitor.core.limits import Scope
from monitor.record.types import EventRow, History, Latest

S = 1_000_000_000
NOON_NS = 1_740_830_400 * S
"""2025-03-01 12:00 UTC."""
DAY_NS = NOON_NS - 12 * 3600 * S

SCOPES = {
    i: Scope(set_id, "x", population, scope, averaging_s, verified, "Table")
    for i, (set_id, population, scope, averaging_s, verified) in enumerate(
        [
            ("icnirp-2020", "general_public", "whole_body", 1800, True),
            ("icnirp-2020", "occupational", "whole_body", 1800, False),
            ("icnirp-2020", "general_public", "local", 360, True),
            ("icnirp-2020", "occupational", "local", 360, True),
            ("fcc-1.1310", "general_public", "whole_body", 1800, True),
            ("fcc-1.1310", "occupational", "whole_body", 360, True),
        ],
        1,
    )
}
DIVISORS = {1: 1.0, 2: 5.0, 3: 4.6, 4: 23.0, 5: 1.07, 6: 5.4}
"""Ratio of scope 1 over the ratio of each scope; invented, with the order of the real limits."""

ALERT = AlertRule("half of the limit", "", "general_public", "whole_body", 0.5, 0.4, 60, 60)
LEVEL = {
    "name": "half of the limit", "set": "", "population": "general_public",
    "scope": "whole_body", "ratio": 0.5, "returns_at": 0.4,
}  # fmt: skip
WORKERS_LEVEL = {**LEVEL, "population": "occupational"}


KEY = "half | icnirp-2020 general_public whole_body 1800 s"


def snapshot(ratio: float = 0.31, **changes: Any) -> dict[str, Any]:
    """A daemon's snapshot in which scope 1 stands at a ratio; changes replace its keys."""
    e = 40.0 * ratio**0.5
    shown: dict[str, Any] = {
        "utc": rfc3339(NOON_NS),
        "boot": 3,
        "boot_ns": 99 * S,
        "last_reading_age_s": 3.2,
        "last_reading_utc": rfc3339(NOON_NS - 3 * S),
        "simulated": False,
        "progress": None,
        "record_error": "",
        "device": {
            "ended": False, "late": 0, "connected": True,
            "text": "board A, firmware 1.2", "temperature_c": 21.4,
            "supply_v": 5.02, "counters": {"bad_checksums": 2, "lost_frames": 0},
        },
        "site": {"name": "Harrowgate Mill", "place": "Tern Hollow", "occupancy": "public"},
        "fields": [
            {
                "averaging_s": a, "e_low": e * 0.99, "e_mean": e, "e_high": e * 1.02,
                "e_max": e * 1.8, "u_db": 2.6, "k": 1.96, "valid_share": 0.98,
                "observed_share": 1.0,
            }
            for a in (360, 1800)
        ],
        "exposures": [_exposure(i, s, ratio / DIVISORS[i]) for i, s in SCOPES.items()],
        "alarms": [],
        "levels": [LEVEL, WORKERS_LEVEL],
        "flags": [],
    }  # fmt: skip
    shown.update(changes)
    return copy.deepcopy(shown)


def _exposure(index: int, scope: Scope, ratio: float) -> dict[str, Any]:
    verdict = "exceeds" if ratio > 1.6 else "conforms" if ratio < 0.6 else "undecided"
    holds = "; the limit lies between" if verdict == "undecided" else ""
    reasons = [f"{ratio * 0.68:.3g} to {ratio * 1.5:.3g} of the limit{holds}"]
    if not scope.verified and verdict == "conforms":
        verdict = "undecided"
        reasons.append("the limit is from memory, not confirmed against the published text")
    return {
        "index": index, "scope": scope.scope, "set": scope.set_id, "edition": scope.edition,
        "population": scope.population, "averaging_s": scope.averaging_s,
        "ratio_low": ratio * 0.98, "ratio_mean": ratio, "ratio_high": ratio * 1.04,
        "u_db": 2.0, "k": 1.96,
        "verified": scope.verified, "verdict": verdict, "reasons": reasons,
    }  # fmt: skip


def edited(now: dict[str, Any], **changes: Any) -> dict[str, Any]:
    """The snapshot with changed keys in every exposure, or in every field where prefixed f_."""
    for one in now["exposures"]:
        one.update({key: value for key, value in changes.items() if not key.startswith("f_")})
    for one in now["fields"]:
        one.update({key[2:]: value for key, value in changes.items() if key.startswith("f_")})
    return now


def dead_axis(low: float = 27.0, verdict: str = "exceeds") -> dict[str, Any]:
    """One of three axes gives nothing: no moment is valid, but the others bound from below."""
    return edited(
        snapshot(), ratio_low=low, ratio_mean=None, ratio_high=None, u_db=None, verdict=verdict,
        reasons=["no valid part in the averaging time", "valid for 0% of the time; 75% is needed"],
        f_valid_share=0.0, f_e_low=207.8, f_e_mean=None, f_e_high=None, f_e_max=None, f_u_db=None,
    )  # fmt: skip


def controlled(ratio: float = 0.31, **changes: Any) -> dict[str, Any]:
    """The snapshot of a place with controlled occupancy; occupational whole body at ratio."""
    site = {"name": "Harrowgate Mill", "place": "roof", "occupancy": "controlled"}
    return snapshot(ratio * DIVISORS[2], site=site, **changes)


def alarm(state: str, key: str = "half", **changes: Any) -> dict[str, Any]:
    """An alarm of an alert level."""
    return {
        "key": key, "text": "half of the limit: ICNIRP 2020, general public, whole body",
        "state": state, "since_utc": rfc3339(NOON_NS - 1800 * S), "level": 0.5, "ratio": 0.72,
        **changes,
    }  # fmt: skip


class FakeDaemon:
    """Answers with a snapshot, or as a daemon that is gone; keeps what it was asked to do."""

    def __init__(self, now: Mapping[str, Any] | None) -> None:
        self.now = now
        self.asked: list[dict[str, object]] = []
        self.refusal = ""
        self.spectrum: Mapping[str, Any] | None = None

    def ask(self, path: Path, what: Mapping[str, object], timeout_s: float) -> Mapping[str, Any]:
        if self.now is None:
            raise DeviceError(f"{path.name}: no daemon listens")
        if what["do"] == "now":
            return {"ok": True, "now": self.now}
        if what["do"] == "spectrum":
            return {"ok": True, "spectrum": self.spectrum}
        self.asked.append(dict(what))
        return {"ok": False, "error": self.refusal} if self.refusal else {"ok": True}


class FakeRecord:
    """A day of six-minute averages with a gap from 03:10 to 04:25."""

    def __init__(self, simulated: bool = False, empty: bool = False) -> None:
        self.simulated = simulated
        self.empty = empty
        self.closed = 0

    def close(self) -> None:
        self.closed += 1

    def latest(self) -> Latest | None:
        if self.empty:
            return None
        last_ns = DAY_NS + (7 * 60 + 12) * 60 * S
        return Latest(3, "machine", 0, last_ns, 0, last_ns, (), (), 0)

    def scopes(self) -> dict[int, Scope]:
        return {} if self.empty else SCOPES

    def events(self, start_utc_ns: int, end_utc_ns: int, limit: int) -> list[EventRow]:
        body: dict[str, object] = {"raised": True, "exposure_ratio": 0.52}
        found = EventRow(DAY_NS + 3600 * S, 3, 0, "alarm", KEY, body)
        note = EventRow(DAY_NS + 3601 * S, 3, 0, "note", "", {"text": "<over> a level"})
        return [found, note] if start_utc_ns <= DAY_NS + 3600 * S < end_utc_ns else []

    def history(
        self, start_utc_ns: int, end_utc_ns: int, averaging_s: int, at_most: int
    ) -> History:
        minutes = np.arange(1, 12 * 60 + 1)
        t = DAY_NS + minutes * 60 * S
        keep = ~((minutes > 190) & (minutes < 265)) & (t > start_utc_ns) & (t <= end_utc_ns)
        if self.empty:
            keep[:] = False
        t, minutes = t[keep], minutes[keep]
        ratio = 0.2 + 0.15 * np.sin(minutes / 97.0) + 0.4 * ((minutes > 500) & (minutes < 530))
        e = 40.0 * np.sqrt(ratio)
        gap = (DAY_NS + 190 * 60 * S, DAY_NS + 265 * 60 * S)
        share = np.where((minutes >= 265) & (minutes < 271), 0.5, 1.0)
        return History(
            averaging_s, t, e * 0.97, e, e * 1.05, e * 2, share, np.full(t.size, 2.6),
            np.zeros(t.size, np.int64),
            {
                i: (ratio / d * 0.94, ratio / d, ratio / d * 1.1)
                for i, d in DIVISORS.items() if SCOPES[i].averaging_s == averaging_s
            },
            [gap] if start_utc_ns < gap[1] and end_utc_ns > gap[0] else [],
            0,
            base_u_db=np.full(t.size, 2.6),
            added_e2=np.zeros(t.size),
        )  # fmt: skip


def app_over(
    daemon: FakeDaemon, record: FakeRecord, folder: Path, *, there: bool = True, **more: Any
) -> Flask:
    """The pages over a fake daemon and record; there: the record's file exists."""
    path = folder / "station.fieldsill"
    if there:
        path.touch()
    doors = Doors(daemon.ask, lambda _: record, lambda: NOON_NS)
    return create_app(path, folder / "station.sock", doors=doors, alerts=(ALERT,), **more)


def client_over(
    now: Mapping[str, Any] | None, folder: Path, record: FakeRecord | None = None, **more: Any
) -> FlaskClient:
    """A client of the pages over a daemon that answers with a snapshot, or is gone (None)."""
    app = app_over(FakeDaemon(now), record or FakeRecord(), folder, **more)
    return app.test_client()
