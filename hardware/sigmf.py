"""The pair of files of a SigMF recording (specification 1.x, from memory): what its header says."""

from __future__ import annotations

import json
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import Any

from hardware.options import utc_ns
from monitor.core.errors import ConfigError, DeviceError

META, DATA = ".sigmf-meta", ".sigmf-data"


@dataclass(frozen=True, slots=True)
class Header:
    """What the header of a recording says; None where it says nothing. skip_bytes: before data."""

    data: Path
    datatype: str
    rate_hz: float | None
    centre_hz: float | None
    start_utc_ns: int | None
    skip_bytes: int
    trailing_bytes: int


def is_pair(path: Path) -> bool:
    """Whether path names one of the two files of a recording."""
    return path.suffix in (META, DATA)


def load(path: Path) -> Header:
    """The header of the recording that path (either of its files) belongs to.

    DeviceError where one of the two is missing, ConfigError where the header cannot be used.
    """
    meta, data = path.with_suffix(META), path.with_suffix(DATA)
    for one in (meta, data):
        if not one.is_file():
            raise DeviceError(f"sensor.file: {one} does not exist; a recording has both files")
    try:
        body = json.loads(meta.read_text(encoding="utf-8"))
        general, captures = body["global"], body.get("captures") or [{}]
        return _header(meta, data, general, captures)
    except (ValueError, KeyError, TypeError, AttributeError) as error:
        if isinstance(error, ConfigError):
            raise
        raise ConfigError(f"{meta}: not a header of a recording ({error!r})") from None


def _header(meta: Path, data: Path, general: Any, captures: Any) -> Header:
    if general.get("core:num_channels", 1) != 1:
        raise ConfigError(f"{meta}: core:num_channels: only one channel can be read")
    first = captures[0]
    tuned = {capture.get("core:frequency", first.get("core:frequency")) for capture in captures}
    if len(tuned) > 1:
        raise ConfigError(f"{meta}: captures: the centre changes; split the recording")
    when = first.get("core:datetime")
    start = None if when is None else datetime.fromisoformat(when)
    return Header(
        data=data,
        datatype=str(general["core:datatype"]),
        rate_hz=_optional(general.get("core:sample_rate")),
        centre_hz=_optional(first.get("core:frequency")),
        start_utc_ns=None if start is None or start.tzinfo is None else utc_ns(start),
        skip_bytes=int(first.get("core:header_bytes", 0)),
        trailing_bytes=int(general.get("core:trailing_bytes", 0)),
    )


def _optional(value: object) -> float | None:
    return float(value) if isinstance(value, (int, float)) else None
