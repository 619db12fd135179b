"""What is said where no figure describes the present. Pure: from a Live to words."""

from __future__ import annotations

from dataclasses import dataclass

from dashboard import words
from dashboard.models import Live, Snapshot, State
from monitor.core.flags import WORDS, Flag

NO_WIRE = WORDS[Flag.NO_SIGNAL_WIRE]


@dataclass(frozen=True, slots=True)
class Headline:
    """The one sentence; kind: below, open, over, undecided, limit, or without a measurement.

    The kinds without one: silent, stopped, starting, no_record. small: what only helps whoever
    mends it, such as paths and commands.
    """

    kind: str
    text: str
    more: tuple[str, ...] = ()
    small: tuple[str, ...] = ()


def without_measurement(live: Live) -> Headline:
    """The sentence of a state that has no measurement of the present."""
    if live.state is State.STOPPED:
        return _stopped(live)
    if live.state is State.NO_RECORD:
        return Headline(
            "no_record",
            f"No measurement and no record yet; this {words.NOTHING}.",
            ("The monitor has not been started here.",),
            ("Start it with fieldsill run, or fieldsill rehearse for invented data.",),
        )
    since = words.moment(live.since, live.drawn)
    if live.state is State.SILENT and (live.snapshot.get("device") or {}).get("ended"):
        text = f"The recorded series ended at {since}; this {words.NOTHING} since then."
        return Headline("silent", text, (sensor(live.snapshot),))
    if live.state is State.SILENT:
        text = nothing_valid(live.snapshot, since if live.since else "", live.flags)
        age = () if live.age_s is None else (f"For {words.duration(live.age_s)} so far.",)
        return Headline("silent", text, (*age, sensor(live.snapshot)))
    return Headline("starting", f"No reading yet; this {words.NOTHING}.", (sensor(live.snapshot),))


def nothing_valid(snapshot: Snapshot, since: str, flags: list[str]) -> str:
    """Since when no reading is valid, and why. since: '' where none ever was."""
    when = f"since {since}" if since else "yet"
    return f"No valid reading {when}: {_cause(snapshot, flags)}; this {words.NOTHING}."


def _cause(snapshot: Snapshot, flags: list[str]) -> str:
    if not (snapshot.get("device") or {}).get("connected", True):
        return "the sensor is not connected"
    if NO_WIRE in flags:
        # At the strong end an overload gives the same voltage: it must not pass for a bad wire.
        overload = "too strong a field, or an " if WORDS[Flag.ABOVE_RANGE] in flags else ""
        return f"{NO_WIRE} ({overload}open or shorted wire?)"
    return "the sensor is connected, but sends none"


def sensor(snapshot: Snapshot) -> str:
    """Whether the device is connected, and what it says of itself."""
    device = snapshot.get("device") or {}
    state = "connected" if device.get("connected") else "not connected"
    text = device.get("text")
    return f"Sensor: {state}{f' ({text})' if text else ''}."


def _stopped(live: Live) -> Headline:
    """The monitor does not answer: what is known, and how long it has been so."""
    small = (f"No answer: {live.trouble}",) if live.trouble else ()
    unheard = "The monitor does not answer"
    if live.unheard_s is not None:
        unheard = f"The monitor has not answered for {words.duration(live.unheard_s)}"
    if live.since is None:
        return Headline(
            "stopped", f"No measurement; this {words.NOTHING}.", (unheard + ".",), small
        )
    since = words.moment(live.since, live.drawn, seconds=True)
    more = f"{unheard}; nothing is recorded yet."
    if live.recorded is not None:
        last = words.moment(live.recorded, live.drawn, seconds=True)
        ago = words.duration((live.drawn - live.recorded).total_seconds())
        more = (
            f"{unheard}; last reading recorded {last}, {ago} ago (a few seconds more may be lost)."
        )
    return Headline(
        "stopped", f"No measurement since {since}; this {words.NOTHING}.", (more,), small
    )
