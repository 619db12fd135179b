"""RFC 3339 in and out, from and to nanoseconds of UTC since 1970."""

from __future__ import annotations

import re
from datetime import UTC, datetime, timedelta

from monitor.core.readings import NS_PER_S

FURTHEST_S = 9_000_000_000
"""Seconds from 1970 (years 1684 to 2255): with room to reckon, ns of it fit in 64 bits."""

_STAMP = re.compile(
    r"(\d{4}-\d\d-\d\d)[Tt ](\d\d:\d\d:\d\d)(?:\.(\d+))?([Zz]|[+-]\d\d:\d\d)", re.ASCII
)
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_SECOND = timedelta(seconds=1)


def is_stamp(text: str) -> bool:
    """Whether a text has the form of an RFC 3339 time with its offset."""
    return _STAMP.fullmatch(text.strip()) is not None


def utc_ns_of(text: str) -> int:
    """Nanoseconds since 1970 of an RFC 3339 time with its offset; ValueError of one line else."""
    match = _STAMP.fullmatch(text.strip())
    if match is None:
        raise ValueError(
            f"{text!r} is not an RFC 3339 time; write for example 2031-05-01T07:12:00Z"
        )
    day, clock, fraction, offset = match.groups()
    try:
        whole = datetime.fromisoformat(f"{day}T{clock}{'Z' if offset in 'zZ' else offset}")
    except ValueError as error:
        raise ValueError(f"{text!r} is not a time: {error}") from None
    seconds = (whole - _EPOCH) // _SECOND
    if abs(seconds) > FURTHEST_S:
        raise ValueError(f"{text!r} is too far away; times from 1685 to 2254 are understood")
    return seconds * NS_PER_S + int(f"{fraction or '':0<9.9}")


def text_of(utc_ns: int, digits: int | None = None) -> str:
    """RFC 3339 in UTC with that many digits of a second, cut off; None: as many as there are."""
    seconds, rest = divmod(int(utc_ns), NS_PER_S)
    fraction = f"{rest:09d}"
    fraction = fraction.rstrip("0") if digits is None else fraction[:digits]
    text = f"{_EPOCH + seconds * _SECOND:%Y-%m-%dT%H:%M:%S}"
    return f"{text}.{fraction}Z" if fraction else f"{text}Z"
