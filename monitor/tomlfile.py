"""A TOML file whose mistakes read 'site.toml: sensor.hold_s: what'."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

from monitor.core.errors import ConfigError, DeviceError
from monitor.core.keys import REQUIRED, Table

MAX_BYTES = 4_000_000


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
    try:
        values = tomllib.loads(body.decode("utf-8"))
    except UnicodeDecodeError:
        raise ConfigError(f"{path.name}: the {what} is not UTF-8 text") from None
    except tomllib.TOMLDecodeError as error:
        raise ConfigError(f"{path.name}: not valid TOML: {error}") from None
    return TopTable(values, path.name), body
