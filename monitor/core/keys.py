"""A table of settings read key by key: every wrong or unknown key is one clear line."""

from __future__ import annotations

import difflib
import math
from collections.abc import Mapping, Sequence
from typing import Any

from monitor.core.errors import ConfigError

REQUIRED: Any = object()
"""Default of a key that must be there."""


class Table:
    """One TOML table. Read each key once, then call finish(), which refuses what is left.

    where: file and table, the start of every message, for example 'site.toml: sensor'.
    """

    def __init__(self, values: Mapping[str, Any], where: str) -> None:
        if not isinstance(values, Mapping):
            raise ConfigError(f"{where}: must be a table")
        self._values = dict(values)
        self._known: list[str] = []
        self.where = where

    @property
    def values(self) -> dict[str, Any]:
        """All of it as it stands, read or not."""
        return dict(self._values)

    def error(self, key: str, text: str) -> ConfigError:
        """The error to raise about a key."""
        return ConfigError(f"{self.where}.{key}: {text}")

    def any(self, key: str, default: Any = REQUIRED) -> Any:
        """The value as it stands."""
        self._known.append(key)
        if key not in self._values:
            if default is REQUIRED:
                raise self.error(key, self._missing(key))
            return default
        return self._values[key]

    def _missing(self, key: str) -> str:
        """What to do about a required key: the one that nothing asked for may be meant."""
        unread = [other for other in self._values if other not in self._known]
        near = difflib.get_close_matches(key, unread, 1, 0.79)
        return f"missing; did you mean {key} by {near[0]}?" if near else f"missing; add {key} = ..."

    def text(self, key: str, default: Any = REQUIRED, choices: Sequence[str] = ()) -> str:
        """A text, one of choices where they are given."""
        value = self.any(key, default)
        if value is default and default is not REQUIRED:
            return value  # type: ignore[no-any-return]
        if not isinstance(value, str):
            raise self.error(key, f"{value!r} is not a text; write it in quotes")
        if choices and value not in choices:
            raise self.error(key, f"{value!r} is not one of {', '.join(choices)}")
        return value

    def number(
        self, key: str, default: Any = REQUIRED, low: float = -math.inf, high: float = math.inf
    ) -> float:
        """A finite number within [low, high]."""
        value = self.any(key, default)
        if value is default and default is not REQUIRED:
            return value  # type: ignore[no-any-return]
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise self.error(key, f"{value!r} is not a number")
        if not math.isfinite(value) or not low <= value <= high:
            raise self.error(key, f"{value} is outside {low:g} to {high:g}")
        return float(value)

    def whole(
        self, key: str, default: Any = REQUIRED, low: float = -math.inf, high: float = math.inf
    ) -> int:
        """A whole number within [low, high]."""
        value = self.any(key, default)
        if value is default and default is not REQUIRED:
            return value  # type: ignore[no-any-return]
        if isinstance(value, bool) or not isinstance(value, int):
            raise self.error(key, f"{value!r} is not a whole number")
        if not low <= value <= high:
            raise self.error(key, f"{value} is outside {low:g} to {high:g}")
        return value

    def flag(self, key: str, default: Any = REQUIRED) -> bool:
        """true or false."""
        value = self.any(key, default)
        if not isinstance(value, bool):
            raise self.error(key, f"{value!r} is neither true nor false")
        return value

    def table(self, key: str, default: Any = REQUIRED) -> Table:
        """A table under this one."""
        return Table(self.any(key, default), f"{self.where}.{key}")

    def tables(self, key: str, default: Any = REQUIRED) -> list[Table]:
        """A list of tables under this one, counted from 1 in messages."""
        value = self.any(key, default)
        if not isinstance(value, (list, tuple)):
            raise self.error(key, f"must be written as [[{key}]]")
        return [Table(v, f"{self.where}.{key}[{i}]") for i, v in enumerate(value, 1)]

    def finish(self) -> None:
        """ConfigError for the first key that nothing asked for, with the nearest known one."""
        for key in self._values:
            if key not in self._known:
                near = difflib.get_close_matches(key, self._known, 1, 0.5)
                hint = f"did you mean {near[0]}?" if near else f"known: {', '.join(self._known)}"
                raise self.error(key, f"unknown key; {hint}")
