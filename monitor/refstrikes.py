"""Reference checks that were struck out: a mistake stays in the record, and is left out."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

from monitor.alarm_desk import text_of
from monitor.core.errors import ConfigError, RecordError
from monitor.core.rows import Event
from monitor.record.reader import Record
from monitor.refchecks import MOST_EVENTS, Check, checks_of

KIND = "reference check struck"


def judged(record: Record) -> list[Check]:
    """Every reference check of a record, as checks_of gives them, with what struck them."""
    why = _struck(record)
    return [replace(check, struck=why.get(check.number)) for check in checks_of(record)]


def request_of(record: Record, number: int, note: str) -> dict[str, object]:
    """What the daemon is asked to keep; ConfigError where that check is none or is struck."""
    checks = {check.number: check for check in judged(record)}
    if number not in checks:
        known = f"1 to {len(checks)}" if checks else "none"
        raise ConfigError(f"--strike {number}: no such check; the record has {known}")
    check = checks[number]
    if check.struck is not None:
        raise ConfigError(f"--strike {number}: is struck already")
    return {"do": KIND, "number": number, "channel": check.channel, "to_utc": check.to_utc,
            "difference_db": check.difference_db, "note": note}  # fmt: skip


def event_of(request: Mapping[str, object], channels: Sequence[str], now_ns: int) -> Event:
    """The event of a request; ConfigError where it cannot be kept."""
    number, off_db = request.get("number"), request.get("difference_db")
    channel = text_of(request, "channel", 200)
    if channel not in channels:
        raise ConfigError(f"channel {channel!r}: no such channel")
    if isinstance(number, bool) or not isinstance(number, int) or not 1 <= number <= MOST_EVENTS:
        raise ConfigError(f"number: {number!r} is not the number of a check")
    if isinstance(off_db, bool) or not isinstance(off_db, (int, float)) or not abs(off_db) < 1e9:
        raise ConfigError(f"difference_db: {off_db!r} is not a number")
    note = text_of(request, "note", 2000, "")
    text = f"check {number}, which read {off_db:+.2f} dB otherwise, is struck"
    body: dict[str, object] = {
        "number": number, "difference_db": float(off_db), "note": note,
        "to_utc": text_of(request, "to_utc", 40, ""), "text": f"{text}; {note}" if note else text,
    }  # fmt: skip
    return Event(now_ns, KIND, channel, body)


def _struck(record: Record) -> dict[int, str]:
    """Number of a check to why it was struck, '' where nobody said."""
    found = {}
    for event in record.events(limit=MOST_EVENTS, rare=KIND):
        try:
            found[int(str(event.body["number"]))] = str(event.body["note"])
        except (KeyError, TypeError, ValueError) as error:
            raise RecordError(
                f"{record.path}: a struck check in it cannot be read: {error}; restore a copy"
            ) from error
    return found
