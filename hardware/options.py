"""Options that several kinds of front end share."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import UTC, datetime
from pathlib import Path

from monitor.core.averaging_law import KINDS, Averaging
from monitor.core.errors import DeviceError
from monitor.core.keys import Table
from monitor.core.readings import NS_PER_S

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


def sensor_table(options: Mapping[str, object]) -> Table:
    """The rest of a site's [sensor] table."""
    return Table(options, "sensor")


def utc_ns_of(value: object) -> int | None:
    """UTC in ns since 1970 of a time with its offset, aware or RFC 3339; None for all else."""
    try:
        when = datetime.fromisoformat(value) if isinstance(value, str) else value
    except ValueError:
        return None
    if not isinstance(when, datetime) or when.tzinfo is None:
        return None
    since = when - _EPOCH
    return (since.days * 86_400 + since.seconds) * NS_PER_S + since.microseconds * 1_000


def clock_start_ns(table: Table, required: bool = False) -> int | None:
    """UTC (ns) of the option clock_start, RFC 3339 with its offset; None where it is absent."""
    key = "clock_start"
    value = table.any(key) if required else table.any(key, None)
    if value is None:
        return None
    start_ns = utc_ns_of(value)
    if start_ns is None:
        raise table.error(key, f'{value!r} is not a time with its offset; "2026-03-01T00:00:00Z"')
    return start_ns


def existing_file(table: Table, key: str, folder: Path) -> Path:
    """The file named by key, relative to folder; DeviceError where it cannot be read."""
    path = folder / table.text(key)
    if not path.is_file():
        raise DeviceError(f"{table.where}.{key}: {path} does not exist; correct the path")
    return path


def pace(table: Table) -> bool:
    """Whether a recorded series plays in real time; the option pace."""
    return table.text("pace", "full", ("full", "real")) == "real"


def averaging(table: Table) -> Averaging:
    """What a device says that it averages: the options averages and averaging_s."""
    kind = table.text("averages", "undeclared", (*KINDS, "undeclared"))
    seconds = table.number("averaging_s", 0.0, 0.0, 3600.0)
    if seconds and kind not in ("log", "power"):
        raise table.error("averaging_s", "only where averages is log or power; take it out")
    return Averaging(kind, seconds)
