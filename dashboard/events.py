"""What happened, in words. Pure."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from dashboard import words
from monitor.record.types import EventRow


@dataclass(frozen=True, slots=True)
class EventLine:
    """An event: when in words, what it is about, and what there is to say of it."""

    when: str
    what: str
    text: str


def line(event: EventRow) -> EventLine:
    """The words of an event; one of an unknown kind gives its kind, name and text."""
    when = words.moment(words.utc_of(event.utc_ns)) if event.utc_ns is not None else "time unknown"
    name = words.alarm_text(event.name).replace("_", " ")
    say = _KINDS.get(event.kind)
    if say is not None:
        return EventLine(when, *say(event, name))
    return EventLine(when, f"{event.kind.replace('_', ' ')}: {name}", _text(event))


def _text(event: EventRow) -> str:
    return str(event.body.get("text") or "")


def _by(event: EventRow) -> str:
    who = event.body.get("by")
    return f" by {who}" if who else ""


def _alarm(event: EventRow, name: str) -> tuple[str, str]:
    ratio, raised = event.body.get("exposure_ratio"), event.body.get("raised")
    at = f" at {words.ratio_figure(float(ratio))}" if isinstance(ratio, (int, float)) else ""
    if isinstance(ratio, (int, float)):
        return name, f"went over{at}" if raised else f"returned below{at}"
    return name, "alarm began" if raised else "alarm ended"


def _confirmed(event: EventRow, name: str) -> tuple[str, str]:
    return name, f"confirmed{_by(event)}"


def _muted(event: EventRow, name: str) -> tuple[str, str]:
    ended = event.body.get("until_ns") is None
    return name, f"{'muting ended' if ended else 'muted'}{_by(event)}"


def _device(event: EventRow, name: str) -> tuple[str, str]:
    connected = "connected" if event.body.get("connected") else "not connected"
    text = _text(event)
    return f"Sensor ({name})", f"{connected}; {text}" if text else connected


def _note(event: EventRow, name: str) -> tuple[str, str]:
    return f"Note by {name}" if name else "Note", _text(event)


def _start(event: EventRow, name: str) -> tuple[str, str]:
    return "Monitor", "started"


def _stop(event: EventRow, name: str) -> tuple[str, str]:
    return "Monitor", "stopped"


_KINDS: dict[str, Callable[[EventRow, str], tuple[str, str]]] = {
    "alarm": _alarm,
    "confirmed": _confirmed,
    "muted": _muted,
    "device": _device,
    "note": _note,
    "start": _start,
    "stop": _stop,
}
