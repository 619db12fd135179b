"""The control charts of a record's reference checks, as documents. Keys carry their units."""

from __future__ import annotations

import math

from monitor import calparts
from monitor.core.control_chart import BASELINE, State, chart
from monitor.core.errors import CalibrationError, ConfigError
from monitor.record.reader import Record
from monitor.refchecks import Check
from monitor.refstrikes import judged

Document = dict[str, object]
FLOOR_DB = 0.05
"""Least sigma where the calibration file has no line of kind repeatability (our choice: what a
generator and a connector that is screwed on anew repeat to)."""
REPEATABILITY = "repeatability"


def charts(record: Record, channel: str | None, floor_db: float | None) -> list[Document]:
    """One chart for each channel and place of application, of the checks that rest on the same
    count table as the last one: another table is another zero. None: every channel.

    floor_db: least sigma; None: what the calibration in force states, else FLOOR_DB. ConfigError
    where the record has no such channel.
    """
    names = [row.name for row in record.channels()]
    if channel is not None and channel not in names:
        raise ConfigError(f"channel {channel!r}: the record has {', '.join(names) or 'none'}")
    stated = floor_db if floor_db is not None else stated_db(record)
    series: dict[tuple[str, str], list[Check]] = {}
    for check in judged(record):
        if channel in (None, check.channel):
            series.setdefault((check.channel, check.at), []).append(check)
    return [_document(checks, stated) for checks in series.values()]


def stated_db(record: Record) -> float:
    """Standard uncertainty of the lines of kind repeatability of the newest calibration, dB."""
    uses = record.calibrations().uses
    found = record.document(uses[-1].calibration) if uses else None
    try:
        lines = () if found is None else calparts.parse(found[1]).lines
    except CalibrationError:  # of a version that wrote it otherwise
        lines = ()
    mine = [line.contribution.u for line in lines if line.contribution.kind == REPEATABILITY]
    return math.hypot(*mine) if mine else FLOOR_DB


def _document(checks: list[Check], floor_db: float) -> Document:
    stand = [check for check in checks if check.struck is None]
    struck = [check for check in checks if check.struck is not None]
    table = (stand or struck)[-1].count_table
    mine = [check for check in stand if check.count_table == table]
    found = chart([check.difference_db for check in mine], floor_db)
    lines = found.lines
    return {
        "channel": checks[0].channel,
        "at": checks[0].at,
        "count_table": table,
        "checks_on_other_tables": len(stand) - len(mine),
        "baseline": BASELINE,
        "least_sigma_db": floor_db,
        "centre_db": lines and lines.centre,
        "sigma_db": lines and lines.sigma,
        "sigma_is_least": lines and lines.floored,
        "warning_db": list(lines.warning) if lines else None,
        "action_db": list(lines.action) if lines else None,
        "last": found.states[-1] if mine else None,
        "action": bool(mine) and found.states[-1] is State.ACTION,
        "checks": [{**_entry(check), "state": state} for check, state in zip(mine, found.states)],
        "struck": [{**_entry(check), "why": check.struck or None} for check in struck],
    }


def _entry(check: Check) -> Document:
    return {
        "number": check.number,
        "from": check.from_utc or None,
        "to": check.to_utc or None,
        "applied_dbm": check.applied_dbm,
        "mean_dbm": check.mean_dbm,
        "difference_db": check.difference_db,
        "note": check.note,
    }
