"""Outside series of field strength: CSV with a header that holds time and e_v_per_m."""

from __future__ import annotations

import csv
import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from decimal import Decimal
from pathlib import Path
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import ConfigError, DeviceError
from monitor.core.numerals import figure
from monitor.core.readings import NS_PER_S
from monitor.times import FURTHEST_S, is_stamp, utc_ns_of

COLUMNS = ("time", "e_v_per_m")
LARGEST_E_V_PER_M = 1e9
"""More than any field in air can be; above it a figure is a mistake, and its square overflows."""


@dataclass(frozen=True, slots=True)
class Series:
    """times_ns: int64 (n,), increasing. e_v_per_m: float64 (n,), rms, nan where a line has none.

    in_utc: the file's times are RFC 3339 and count from 1970; else seconds from wherever it began.
    """

    times_ns: NDArray[np.int64]
    e_v_per_m: NDArray[np.float64]
    in_utc: bool


def _ns_from_seconds(text: str) -> int:
    value = figure(text)
    if value is None or math.isnan(value):
        raise ValueError(f"{text!r} is neither seconds nor an RFC 3339 time")
    if abs(value) > FURTHEST_S:
        raise ValueError(f"{text!r} is out of range for seconds")
    return int(Decimal(text) * NS_PER_S)


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
                parse = utc_ns_of if is_stamp(time_text) else _ns_from_seconds
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
    return Series(np.array(times, np.int64), np.array(values), parse is utc_ns_of)


def _field_strength(text: str) -> float:
    """V/m; an empty field is a reading that is not there."""
    value = figure(text)
    if value is None or (text and math.isnan(value)):
        raise ValueError(f"e_v_per_m {text!r} is not a number")
    if not math.isnan(value) and not 0.0 <= value <= LARGEST_E_V_PER_M:
        raise ValueError(f"e_v_per_m {text} is not within 0 to {LARGEST_E_V_PER_M:g} V/m")
    return value
