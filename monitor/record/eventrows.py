"""Events as rows: a text that no file can hold is mended, and never costs a commit."""

from __future__ import annotations

import json
from typing import Any

from monitor.core.rows import Event

_LARGEST = 2**63 - 1
RARE = "kind IN ('start', 'calibration', 'reference check')"
"""What a query must say, in these words, to be answered by the index calibration_events."""


class MalformedError(ValueError):
    """An event in the file that is not as FORMAT.md says."""


def body_of(text: str) -> dict[str, Any]:
    """The body of an event as stored; MalformedError where it is no JSON object."""
    try:
        body = json.loads(text)
    except (ValueError, RecursionError) as error:
        raise MalformedError(f"an event's body is no JSON: {error}") from None
    if not isinstance(body, dict):
        raise MalformedError("an event's body is no JSON object")
    return body


def event_row(boot: int, event: Event) -> tuple[object, ...]:
    """Boot, boot_ns, kind, name, body as JSON; a fault in its place where it cannot be kept."""
    try:
        body = json.dumps(event.body, ensure_ascii=False, allow_nan=False, sort_keys=True)
        row = (int(event.boot_ns), mended(event.kind), mended(event.name), mended(body))
    except (AttributeError, TypeError, ValueError, RecursionError) as error:
        return boot, _time(event), "fault", "event not kept", _reason(error)
    if abs(row[0]) > _LARGEST:
        return boot, 0, "fault", "event not kept", _reason("its time is out of range")
    return boot, *row


def mended(text: str) -> str:
    """The text with U+FFFD in the place of each surrogate that stands alone."""
    return text.encode("utf-16-le", "surrogatepass").decode("utf-16-le", "replace")


def _time(event: Event) -> int:
    kept = isinstance(event.boot_ns, int) and abs(event.boot_ns) <= _LARGEST
    return event.boot_ns if kept else 0


def _reason(error: Exception | str) -> str:
    kind = f"{type(error).__name__}: " if isinstance(error, Exception) else ""
    return json.dumps({"why": mended(f"{kind}{error}")}, ensure_ascii=False)
