"""A TOML file whose mistakes read 'site.toml: sensor.hold_s: what'."""

from __future__ import annotations

import datetime
import math
import tomllib
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import ConfigError, DeviceError
from monitor.core.keys import REQUIRED, Table
from monitor.core.quantities import frequency_hz

MAX_BYTES = 4_000_000
MAX_ROWS = 10_000
MAX_FIGURE = 300.0
"""No dB, dBm, degree or detector voltage is larger; a slip of the point would overflow later."""


class TopTable(Table):
    """The whole file as a table: the file's name stands before a colon in every message."""

    def error(self, key: str, text: str) -> ConfigError:
        """The error to raise about a key at the top."""
        return ConfigError(f"{self.where}: {key}: {text}")

    def table(self, key: str, default: Any = REQUIRED) -> Table:
        """A table of the file."""
        return Table(self.any(key, default), f"{self.where}: {key}")

    def tables(self, key: str, default: Any = REQUIRED) -> list[Table]:
        """A list of tables of the file, counted from 1 in messages."""
        value = self.any(key, default)
        if not isinstance(value, (list, tuple)):
            raise self.error(key, f"must be written as [[{key}]]")
        return [Table(v, f"{self.where}: {key}[{i}]") for i, v in enumerate(value, 1)]


def read(path: Path, what: str) -> tuple[TopTable, bytes]:
    """The file's tables and its bytes. what: 'site file', for messages.

    DeviceError where it cannot be read, ConfigError where it is no TOML.
    """
    try:
        body = path.read_bytes()
    except OSError as error:
        raise DeviceError(f"{path}: the {what} cannot be read: {error.strerror}") from error
    if len(body) > MAX_BYTES:
        raise ConfigError(f"{path.name}: {len(body)} bytes; a {what} has at most {MAX_BYTES}")
    return parse(body, path.name, what), body


def parse(body: bytes, name: str, what: str) -> TopTable:
    """The tables of a TOML text; ConfigError where it is none."""
    try:
        values = tomllib.loads(body.decode("utf-8"))
        _refuse_huge(values)
    except UnicodeDecodeError:
        raise ConfigError(f"{name}: the {what} is not UTF-8 text") from None
    except (ValueError, RecursionError) as error:
        raise ConfigError(f"{name}: not valid TOML: {error}") from None
    return TopTable(values, name)


def _refuse_huge(value: object) -> None:
    """ValueError for an integer beyond 64 bits: TOML 1.0 has none, its reader here takes any."""
    if isinstance(value, (dict, list)):
        for item in value.values() if isinstance(value, dict) else value:
            _refuse_huge(item)
    elif isinstance(value, int) and not -(2**63) <= value < 2**63:
        raise ValueError("an integer is beyond 64 bits")


LAST_DAY = datetime.date(2261, 12, 31)
"""The last whole year that nanoseconds since 1970 reach in 64 bits (2262-04-11)."""


def pair(
    table: Table, key: str, default: Any = REQUIRED, most: float = MAX_FIGURE
) -> tuple[float, float]:
    """Two finite numbers [low, high], low below high, neither beyond most."""
    value = table.any(key, default)
    if value is default and default is not REQUIRED:
        return value  # type: ignore[no-any-return]
    if not _numbers(value, 2) or not value[0] < value[1]:
        raise table.error(key, "must be two numbers [low, high], low below high")
    if max(abs(value[0]), abs(value[1])) > most:
        raise table.error(key, f"{value!r} is beyond {most:g}")
    return float(value[0]), float(value[1])


def date(table: Table, key: str, default: Any = REQUIRED) -> datetime.date:
    """A date, as TOML writes one or in quotes."""
    value = table.any(key, default)
    if value is default and default is not REQUIRED:
        return value  # type: ignore[no-any-return]
    if isinstance(value, str):
        try:
            value = datetime.date.fromisoformat(value)
        except ValueError:
            value = repr(value)
    if isinstance(value, datetime.date) and not isinstance(value, datetime.datetime):
        if value > LAST_DAY:
            raise table.error(key, f"{value} is too far ahead; the last day is {LAST_DAY}")
        return value
    raise table.error(key, f"{value} is not a date; write for example 2025-11-30")


def rows(
    table: Table,
    key: str,
    form: str,
    frequency: bool = False,
    columns: int = 2,
    most: float = MAX_FIGURE,
) -> NDArray[np.float64]:
    """A list of at least two rows of finite numbers, f8 (n, columns), up to most.

    form: '[dBm, volts]', for messages. frequency: the first of each is a frequency, '700MHz' or Hz.
    """
    value = table.any(key)
    if not isinstance(value, list) or not 2 <= len(value) <= MAX_ROWS:
        raise table.error(key, f"must be a list of 2 to {MAX_ROWS} rows {form}")
    plain = []
    for i, row in enumerate(value, 1):
        try:
            if frequency and isinstance(row, list) and row and _figure(row[0]):
                row = [frequency_hz(row[0]), *row[1:]]
        except ConfigError as error:
            raise table.error(key, f"row {i}: {error}") from None
        if not _numbers(row, columns):
            raise table.error(key, f"row {i}: {row!r} is not {form}")
        if max(abs(v) for v in (row[1:] if frequency else row)) > most:
            raise table.error(key, f"row {i}: {row!r} is beyond {most:g}")
        plain.append(row)
    return np.array(plain, np.float64)


def _figure(value: object) -> bool:
    """Whether it may be a frequency: a text or a number."""
    return isinstance(value, (str, int, float)) and not isinstance(value, bool)


def _numbers(value: object, n: int) -> bool:
    return (
        isinstance(value, (list, tuple))
        and len(value) == n
        and all(isinstance(v, (int, float)) and not isinstance(v, bool) for v in value)
        and all(math.isfinite(v) for v in value)
    )
