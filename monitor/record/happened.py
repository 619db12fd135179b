"""The events of the record: what happened in a span, and what the alarms are made of."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Sequence

from monitor.record.eventrows import RARE, body_of
from monitor.record.types import Boot, EventRow

_ALARM_EVENTS = """
WITH alarms AS NOT MATERIALIZED (
  SELECT event, kind, name, body FROM events WHERE kind IN ('alarm', 'confirmed', 'muted')),
names AS (SELECT DISTINCT name FROM alarms),
raised AS (
  SELECT name, (SELECT event FROM alarms AS a WHERE kind = 'alarm' AND a.name = names.name
    AND json_extract(body, '$.raised') ORDER BY event DESC LIMIT 1) AS event FROM names),
newest AS (
  SELECT name, kind, max(event) AS event FROM alarms GROUP BY kind, name)
SELECT event FROM raised WHERE event IS NOT NULL
UNION SELECT newest.event FROM newest JOIN raised USING (name)
  WHERE kind != 'confirmed' OR newest.event > ifnull(raised.event, 0)
"""
_EVENTS = (
    "WITH offsets AS MATERIALIZED ("
    "SELECT CAST(key AS INTEGER) AS boot, value AS offset_ns FROM json_each(?1)) "
    "SELECT boot_ns + offset_ns, boot, boot_ns, kind, name, body "
    "FROM events LEFT JOIN offsets USING (boot) "
)


def between(
    db: sqlite3.Connection, boots: Sequence[Boot], span: tuple[int | None, int | None], limit: int,
    rare: str = "",
) -> list[EventRow]:  # fmt: skip
    """See Record.events; span: [start, end) in UTC ns, None: open."""
    query = (
        _EVENTS + "WHERE (?2 IS NULL OR boot_ns + offset_ns >= ?2) "
        "AND (?3 IS NULL OR boot_ns + offset_ns < ?3) "
        + (f"AND {RARE} " if f"'{rare}'" in RARE else "")
        + ("AND kind = ?5 " if rare else "")
        + "ORDER BY event DESC LIMIT ?4"
    )
    rows = db.execute(query, (_offsets(boots), *span, limit, *([rare] if rare else []))).fetchall()
    return [_event(*row) for row in reversed(rows)]


def of_alarms(db: sqlite3.Connection, boots: Sequence[Boot]) -> list[EventRow]:
    """See Record.alarm_events."""
    wanted = json.dumps([event for (event,) in db.execute(_ALARM_EVENTS)])
    query = _EVENTS + "WHERE event IN (SELECT value FROM json_each(?2)) ORDER BY event"
    return [_event(*row) for row in db.execute(query, (_offsets(boots), wanted))]


def _offsets(boots: Sequence[Boot]) -> str:
    known = {boot.boot: boot.utc_offset_ns for boot in boots if boot.utc_offset_ns is not None}
    return json.dumps(known)


def _event(
    utc_ns: int | None, boot: int, boot_ns: int, kind: str, name: str, body: str
) -> EventRow:
    return EventRow(utc_ns, boot, boot_ns, kind, name, body_of(body))
