"""The routes: read the moment or the past, hand it to a template; what a person does is sent on."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from flask import Blueprint, current_app, redirect, render_template, request, url_for
from flask.typing import ResponseReturnValue

from dashboard import headline, history, now, reservations, spectrum, wish, words
from dashboard.models import (
    ASK_TIMEOUT_S,
    UNREACHABLE,
    Doors,
    Heard,
    Live,
    State,
    Station,
    read_live,
)
from monitor.core.errors import ConfigError, DeviceError

pages = Blueprint("pages", __name__)
MUTE_MINUTES = (15, 60, 240, 720)


@dataclass(frozen=True, slots=True)
class Context:
    """What every route needs. token: proves that a form came from our own page."""

    station: Station
    doors: Doors
    token: str
    may_act: bool
    heard: Heard = field(default_factory=Heard)


def _context() -> Context:
    context: Context = current_app.extensions["fieldsill"]
    return context


def _live() -> Live:
    context = _context()
    return read_live(context.station, context.doors, context.heard)


def _wanted_scope() -> int | None:
    return wish.scope_number(request.args.get("scope", ""))


def _now_values(live: Live) -> dict[str, Any]:
    context = _context()
    wanted = _wanted_scope()
    known = {e.get("index") for e in live.snapshot.get("exposures") or []}
    if wanted is not None and known and wanted not in known:
        raise ConfigError(f"scope: there is no limit number {wanted}; follow a link instead")
    chosen = headline.governing(live, context.station, wanted)
    site = live.snapshot.get("site") or {}
    return {
        "live": live,
        "simulated": live.simulated,
        "name": site.get("name") or context.station.name,
        "place": site.get("place") or context.station.place,
        "controlled": headline.occupancy(live, context.station) == "controlled",
        "headline": headline.headline(live, context.station),
        "chosen": chosen and now.scope_line(chosen, live, context.station),
        "picture": now.drawn(chosen, live, context.station),
        "wanted": wanted,
        "field_words": now.field_words(live),
        "groups": now.scope_lines(live, context.station),
        "alarms": now.alarm_lines(live),
        "counters": reservations.counters(live.snapshot),
        "reservations": reservations.sentences(live.flags, reservations.days_left(live.snapshot)),
        "device": live.snapshot.get("device") or {},
        "token": context.token,
        "may_act": context.may_act,
        "mute_minutes": MUTE_MINUTES,
        "cautions": words.CAUTIONS,
        "part_url": url_for("pages.part", scope=wanted),
    }


@pages.get("/")
def present() -> ResponseReturnValue:
    """The page of the present."""
    return render_template("now.html", **_now_values(_live()))


@pages.get("/part")
def part() -> ResponseReturnValue:
    """The changing parts of the page of the present, for the script that renews them."""
    return render_template("now_parts.html", **_now_values(_live()))


@pages.post("/alarms")
def alarms() -> ResponseReturnValue:
    """Send what a person did about an alarm to the daemon; only it decides and logs."""
    action, key = request.form.get("do", ""), request.form.get("key", "")
    wish: dict[str, object] = {"do": action, "key": key}
    if action not in ("acknowledge", "shelve", "unshelve") or not key:
        raise ConfigError("do: must be acknowledge, shelve or unshelve, with the key of an alarm")
    if action == "shelve":
        minutes = request.form.get("minutes", "")
        if minutes not in {str(m) for m in MUTE_MINUTES}:
            raise ConfigError(f"minutes: {minutes!r} is not one of {MUTE_MINUTES}")
        wish["for_s"] = int(minutes) * 60
    _send(wish)
    return redirect(url_for("pages.present") + "#alarms", 303)


def _send(wish: Mapping[str, object]) -> None:
    _asked(wish, "not done: ")


def _asked(wish: Mapping[str, object], failed: str = "") -> Mapping[str, Any]:
    """The daemon's answer. failed: what a refusal or a silence begins with."""
    context = _context()
    try:
        answer = context.doors.ask(context.station.control_path, wish, ASK_TIMEOUT_S)
    except UNREACHABLE as error:
        why = f"{failed}the monitor does not answer ({error}); try again"
        raise DeviceError(why) from error
    if not answer.get("ok"):
        raise ConfigError(f"{failed}{answer.get('error', 'the monitor refused')}")
    return answer


@pages.get("/history")
def past() -> ResponseReturnValue:
    """The page of the past."""
    context = _context()
    values = history.page(context.station, context.doors, request.args)
    return render_template("history.html", **values)


@pages.get("/spectrum")
def spectral() -> ResponseReturnValue:
    """The page of the spectrum."""
    context = _context()
    answer = _asked({"do": "spectrum"})
    found = answer.get("spectrum")
    return render_template("spectrum.html", **spectrum.page(found, context.station))


@pages.get("/api/spectrum")
def api_spectrum() -> ResponseReturnValue:
    """The daemon's own document of the spectrum; null where its sensor gives none."""
    return {"spectrum": _asked({"do": "spectrum"}).get("spectrum")}


@pages.get("/api/now")
def api_now() -> ResponseReturnValue:
    """The moment as JSON; `now` is the daemon's own snapshot, null where it does not answer."""
    live = _live()
    return {
        "state": str(live.state),
        "drawn_utc": _iso(live.drawn),
        "last_reading_utc": _iso(live.since),
        "last_reading_age_s": live.age_s,
        "simulated": live.simulated,
        "words": headline.headline(live, _context().station).text,
        "now": dict(live.snapshot) if live.snapshot else None,
    }


@pages.get("/api/history")
def api_history() -> ResponseReturnValue:
    """Averages over a span as JSON."""
    context = _context()
    return history.document(context.station, context.doors, request.args)


@pages.get("/health")
def health() -> ResponseReturnValue:
    """200 while readings arrive, else 503."""
    live = _live()
    body = {
        "state": str(live.state),
        "last_reading_utc": _iso(live.since),
        "last_reading_age_s": live.age_s,
        "simulated": live.simulated,
    }
    return body, 200 if live.state is State.MEASURING else 503


def _iso(moment: Any) -> str | None:
    return None if moment is None else moment.isoformat().replace("+00:00", "Z")
