"""What happened, in words. Pure."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

from dashboard import bounds, words
from monitor.core.alarms import ENOUGH_SHARE
from monitor.record.types import EventRow


@dataclass(frozen=True, slots=True)
class EventLine:
    """An event: when in words, what it is about, and what there is to say of it.

    began_ns: UTC of an alarm that began then, with its number in the drawing.
    """

    when: str
    what: str
    text: str
    began_ns: int | None = None
    number: int = 0


def numbered(found: Sequence[EventRow]) -> list[EventLine]:
    """The lines of events; alarms that begin are counted, for the drawing marks them."""
    lines, number = [], 0
    for event in found:
        began = event.kind == "alarm" and event.body.get("raised") and event.utc_ns is not None
        number += bool(began)
        one = line(event)
        lines.append(replace(one, began_ns=event.utc_ns, number=number) if began else one)
    return lines


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
    raised, crossed = event.body.get("raised"), bounds.number(event.body, "exposure_ratio")
    if crossed is None:
        text = _text(event)
        return name, f"alarm {'began' if raised else 'ended'}{f'; {text}' if text else ''}"
    if not raised:
        return name, f"returned below, at {words.ratio_figure(crossed)} of the limit"
    share, low = bounds.number(event.body, "valid_share"), bounds.number(event.body, "ratio_low")
    lone = "ratio_mean" in event.body and bounds.number(event.body, "ratio_mean") is None
    if low is not None and (lone or (share is not None and not share >= ENOUGH_SHARE)):
        part = "" if share is None else f"; {words.share(share)} of the averaging time is valid"
        return name, f"went over, at {words.rounded_down(low)} of the limit, gaps as nothing{part}"
    return name, f"went over, at {words.ratio_figure(crossed)} of the limit"


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


def _evidence(event: EventRow, name: str) -> tuple[str, str]:
    """name is that of a file and stays as it is written."""
    size, why = bounds.number(event.body, "bytes"), str(event.body.get("why") or "")
    megabytes = "" if size is None else f", {size / 1e6:.1f} MB"
    if event.body.get("removed"):
        return "Recording removed", f"{event.name}{megabytes}; {why}"
    if why:
        return "Recording", f"not kept: {why}"
    covers = "" if event.body.get("covers", True) else "; the moment itself was no longer there"
    return "Recording kept", f"{event.name}{megabytes}, of the samples when an alarm began{covers}"


_KINDS: dict[str, Callable[[EventRow, str], tuple[str, str]]] = {
    "alarm": _alarm,
    "confirmed": _confirmed,
    "muted": _muted,
    "device": _device,
    "evidence": _evidence,
    "note": _note,
    "start": _start,
    "stop": _stop,
}
