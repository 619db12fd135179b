"""Outside series of field strength: CSV with a header that holds time and e_v_per_m."""

from __future__ import annotations

import csv
import math
import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from decimal import Decimal, InvalidOperation
from pathlib import Path
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import ConfigError, DeviceError
from monitor.core.readings import NS_PER_S

COLUMNS = ("time", "e_v_per_m")
_STAMP = re.compile(
    r"(\d{4}-\d\d-\d\d)[Tt ](\d\d:\d\d:\d\d)(?:\.(\d+))?([Zz]|[+-]\d\d:\d\d)", re.ASCII
)
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_SECOND = timedelta(seconds=1)
_LARGEST_S = 9_000_000_000


@dataclass(frozen=True, slots=True)
class Series:
    """times_ns: int64 (n,), increasing. e_v_per_m: float64 (n,), rms, nan where a line has none.

    in_utc: the file's times are RFC 3339 and count from 1970; else seconds from wherever it began.
    """

    times_ns: NDArray[np.int64]
    e_v_per_m: NDArray[np.float64]
    in_utc: bool


def utc_ns_from_text(text: str) -> int:
    """Nanoseconds since 1970 of an RFC 3339 time with its offset; ValueError otherwise."""
    match = _STAMP.fullmatch(text.strip())
    if match is None:
        raise ValueError(
            f"{text!r} is not an RFC 3339 time; write for example 2031-05-01T07:12:00Z"
        )
    day, clock, fraction, offset = match.groups()
    whole = datetime.fromisoformat(f"{day}T{clock}{'Z' if offset in 'zZ' else offset}")
    return (whole - _EPOCH) // _SECOND * NS_PER_S + int(f"{fraction or '':0<9.9}")


def text_from_utc_ns(utc_ns: int) -> str:
    """RFC 3339 in UTC, with as many digits of a second as there are."""
    seconds, rest = divmod(utc_ns, NS_PER_S)
    text = f"{_EPOCH + seconds * _SECOND:%Y-%m-%dT%H:%M:%S}"
    digits = f".{rest:09d}".rstrip("0") if rest else ""
    return f"{text}{digits}Z"


def _ns_from_seconds(text: str) -> int:
    try:
        value = Decimal(text)
    except InvalidOperation:
        raise ValueError(f"{text!r} is neither seconds nor an RFC 3339 time") from None
    if not value.is_finite() or abs(value) > _LARGEST_S:
        raise ValueError(f"{text!r} is out of range for seconds")
    return int(value * NS_PER_S)


class Lines(Protocol):
    """What the standard library's CSV reader is."""

    line_num: int

    def __iter__(self) -> Iterator[list[str]]: ...
    def __next__(self) -> list[str]: ...


def read_series(path: Path) -> Series:
    """Read a file; ConfigError 'file:line: what' at the first bad line, DeviceError if missing."""
    try:
        with path.open(newline="", encoding="utf-8-sig") as file:
            return _read(path, csv.reader(file))
    except OSError as error:
        raise DeviceError(f"{path}: {error.strerror}") from error
    except UnicodeDecodeError as error:
        raise ConfigError(f"{path}: not a text in UTF-8") from error
    except csv.Error as error:
        raise ConfigError(f"{path}: not a CSV file: {error}") from error


def _read(path: Path, lines: Lines) -> Series:
    header = [name.strip() for name in next(lines, [])]
    for name in COLUMNS:
        if name not in header:
            raise ConfigError(f"{path}:1: no column {name!r}; the header must hold time,e_v_per_m")
    time_at, e_at = (header.index(name) for name in COLUMNS)
    times: list[int] = []
    values: list[float] = []
    parse: Callable[[str], int] | None = None
    for row in lines:
        if not row:
            continue
        try:
            time_text, e_text = row[time_at].strip(), row[e_at].strip()
            if parse is None:
                parse = utc_ns_from_text if _STAMP.fullmatch(time_text) else _ns_from_seconds
            times.append(parse(time_text))
            values.append(_field_strength(e_text))
            if len(times) > 1 and times[-1] <= times[-2]:
                raise ValueError(f"time {time_text} is not after the line before")
        except IndexError:
            raise ConfigError(f"{path}:{lines.line_num}: too few columns") from None
        except ValueError as error:
            raise ConfigError(f"{path}:{lines.line_num}: {error}") from error
    if not times:
        raise ConfigError(f"{path}: holds no reading")
    return Series(np.array(times, np.int64), np.array(values), parse is utc_ns_from_text)


def _field_strength(text: str) -> float:
    """V/m; an empty field is a reading that is not there."""
    if text == "":
        return math.nan
    try:
        value = float(text)
    except ValueError:
        raise ValueError(f"e_v_per_m {text!r} is not a number") from None
    if not math.isfinite(value) or value < 0.0:
        raise ValueError(f"e_v_per_m {text} is not a finite number of 0 or above")
    return value
