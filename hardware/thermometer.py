"""A thermometer of the machine, read as a file: thousandths of a degree Celsius, as Linux gives
them (Documentation/hwmon/sysfs-interface.rst, temp*_input)."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from monitor.core.readings import MISSING, NS_PER_S

EVERY_S = 1.0
"""A receiver warms slowly, and some thermometers take milliseconds to answer."""
SPAN_DC = (-1000, 2000)
"""Tenths of a degree; what lies outside is no temperature of a receiver (our choice)."""

MOST_CHARACTERS = 32
"""A device that never ends is no thermometer."""


def tenths_of(path: Path) -> int:
    """Tenths of a degree Celsius; MISSING where the file cannot be read or holds no such number."""
    try:
        with path.open(encoding="ascii") as file:
            tenths = round(int(file.read(MOST_CHARACTERS)) / 100)
    except (OSError, ValueError):
        return MISSING
    return tenths if SPAN_DC[0] <= tenths <= SPAN_DC[1] else MISSING


class Thermometer:
    """Reads the file at most once in EVERY_S. path None: nothing tells the temperature."""

    def __init__(self, path: Path | None, now_ns: Callable[[], int]) -> None:
        self._path = path
        self._now_ns = now_ns
        self._read_ns: int | None = None
        self._tenths = MISSING

    def tenths(self) -> int:
        """Tenths of a degree Celsius, MISSING where nothing tells it."""
        now_ns = self._now_ns()
        old = self._read_ns is None or now_ns - self._read_ns >= EVERY_S * NS_PER_S
        if self._path is not None and old:
            self._tenths, self._read_ns = tenths_of(self._path), now_ns
        return self._tenths

    def celsius(self) -> float | None:
        """The same in degrees, None where nothing tells it."""
        tenths = self.tenths()
        return None if tenths == MISSING else tenths / 10
