"""Levels as people write them on the command line: 3.2V/m, 0.05W/m2, 900MHz=3.2V/m."""

from __future__ import annotations

import math
from typing import Any

import click

from monitor.core.errors import ConfigError
from monitor.core.quantities import Z0_OHM, frequency_hz, s_from_e, split_unit
from monitor.seriesfile import LARGEST_E_V_PER_M

UNITS = {
    "v/m": ("E", 1.0),
    "mv/m": ("E", 1e-3),
    "a/m": ("H", 1.0),
    "ma/m": ("H", 1e-3),
    "w/m2": ("S", 1.0),
    "mw/m2": ("S", 1e-3),
    "mw/cm2": ("S", 10.0),
    "uw/cm2": ("S", 0.01),
}
LARGEST = {
    "E": LARGEST_E_V_PER_M,
    "H": LARGEST_E_V_PER_M / Z0_OHM,
    "S": s_from_e(LARGEST_E_V_PER_M),
}
"""In V/m, A/m and W/m2; above it a level is a mistake."""
LONGEST_S = 1e8
"""Three years: no averaging time comes near, and its ns leave room to reckon in 64 bits."""
KNOWN = "V/m, mV/m, A/m, mA/m, W/m2, mW/m2, mW/cm2, uW/cm2"


class Within(click.FloatRange):
    """A number within a range; nan, which compares with nothing, is in none."""

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> float:
        """The number, or click's error."""
        number = float(super().convert(value, param, ctx))
        if math.isnan(number):
            self.fail(f"{value!r} is not a number", param, ctx)
        return number


def level(text: str) -> tuple[str, float]:
    """(quantity E|H|S, value in V/m, A/m or W/m2) of a level; a bare number is V/m."""
    value, unit = split_unit(text)
    if unit.lower() not in UNITS and unit != "":
        raise ConfigError(f"{text!r}: unit {unit!r} is not known; use one of {KNOWN}")
    quantity, scale = UNITS[unit.lower() or "v/m"]
    if not math.isfinite(value) or value < 0.0:
        raise ConfigError(f"{text!r}: a level is a finite number, 0 or above")
    if value * scale > LARGEST[quantity]:
        raise ConfigError(f"{text!r}: no level is above {LARGEST_E_V_PER_M:g} V/m; check the unit")
    return quantity, value * scale


def level_at(text: str) -> tuple[float, str, float]:
    """(frequency in Hz, quantity, value) of 'FREQUENCY=LEVEL'."""
    frequency, equals, rest = text.partition("=")
    if not equals:
        raise ConfigError(f"{text!r}: write FREQUENCY=LEVEL, for example 900MHz=3.2V/m")
    return (frequency_hz(frequency), *level(rest))


def duration_s(text: str) -> float:
    """Seconds from '360', '360s', '6min' or '24h'; above 0, at most LONGEST_S."""
    value, unit = split_unit(text)
    scale = {"": 1.0, "s": 1.0, "min": 60.0, "h": 3600.0}.get(unit.lower())
    if scale is None or not math.isfinite(value) or value <= 0.0:
        raise ConfigError(f"{text!r}: not a duration; write for example 360, 6min or 24h")
    if value * scale > LONGEST_S:
        raise ConfigError(f"{text!r}: too long; at most {LONGEST_S:g} s, about three years")
    return value * scale
