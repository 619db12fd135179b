"""Lines of the uncertainty budget in a calibration file, alike everywhere or over frequency."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from monitor.core.budget import DISTRIBUTIONS, Contribution
from monitor.core.calibration import FrequencyTable
from monitor.core.distributions import FEWEST_DEGREES
from monitor.core.errors import CalibrationError
from monitor.core.keys import Table
from monitor.core.mismatch import Mismatch
from monitor.core.tabulated import Points, tabulated
from monitor.tomlfile import rows

AXES = ("x", "y", "z")
MOST_DB = 30.0
"""A contribution beyond it is a slip of the point."""
MOST_DEGREES = 1e6
WAYS = {
    "value": "",
    "table": "",
    "points": "tabulated",
    "reflection": "u_shaped",
    "vswr": "u_shaped",
}
"""Keys that can say how large a line is, and the distribution that each belongs to, '' any."""
ASSUMED = "(assumed)"
"""How the names of lines end that nobody has written."""


@dataclass(frozen=True, slots=True)
class Line:
    """One line of the budget, from the table where; axis '' serves every axis.

    contribution: with the largest value that it has anywhere. curve: its value over frequency, in
    its own unit; None where it is the same everywhere.
    """

    where: Table
    axis: str
    contribution: Contribution
    curve: FrequencyTable | None = None

    @property
    def name(self) -> str:
        """The contribution's name."""
        return self.contribution.name

    def over(self, low_hz: float, high_hz: float) -> Contribution:
        """With its largest value over a band, or at one frequency where both ends are the same.

        Between two rows it runs straight over log f, so it is largest at a row or at an end.
        ConfigError outside its table.
        """
        if self.curve is None:
            return self.contribution
        knots = self.curve.frequencies_hz
        inside = knots[(knots > low_hz) & (knots < high_hz)]
        try:
            values = self.curve.at(np.array([low_hz, *inside, high_hz]))
        except CalibrationError as error:
            raise self.where.error("table", f"{self.name!r} {error}") from None
        return replace(self.contribution, value=float(values.max()))


def read_line(table: Table) -> Line:
    """Read one [[contribution]]; ConfigError or CalibrationError of one line."""
    axis = table.text("axis", "", AXES)
    name = table.text("name").strip()
    if not name or name.endswith(ASSUMED):
        raise table.error("name", f"{name!r} is not a name; none is empty or ends in {ASSUMED!r}")
    distribution = table.text("distribution", choices=DISTRIBUTIONS)
    sensitivity = table.number("sensitivity", 1.0, -1e6, 1e6)
    value, curve, points = _value(table, distribution, MOST_DB if sensitivity == 1.0 else 1e6)
    line = Contribution(
        name=name,
        value=value,
        distribution=distribution,
        k=table.number("k", low=1.0, high=5.0) if distribution == "expanded" else 1.0,
        shared=table.flag("shared"),
        kind=table.text("kind", ""),
        degrees_of_freedom=read_degrees(table),
        sensitivity=sensitivity,
        points=points,
    )
    table.finish()
    if line.value * abs(sensitivity) > MOST_DB:
        key = "table" if curve else "value"
        raise table.error(key, f"times its sensitivity it is beyond {MOST_DB:g} dB")
    return Line(table, axis, line, curve)


def read_degrees(table: Table) -> float:
    """Degrees of freedom of a figure; without end where the key is left out."""
    return table.number("degrees_of_freedom", math.inf, FEWEST_DEGREES, MOST_DEGREES)


def _value(
    table: Table, distribution: str, most: float
) -> tuple[float, FrequencyTable | None, Points]:
    """Value, table over frequency and points of the distribution, as far as they are given.

    The value is then the largest one of the table, the deviation of the points, or the half width
    of what two reflections do to each other.
    """
    given = [key for key in WAYS if table.any(key, None) is not None]
    if len(given) > 1:
        raise table.error(given[0], f"stands beside {given[1]}; give one of the two")
    way = given[0] if given else "value"
    wanted = WAYS[way]
    if wanted and distribution != wanted:
        raise table.error(way, f"is for distribution = {wanted!r}; it is {distribution!r}")
    if distribution == "tabulated" and way != "points":
        raise table.error("points", "missing; a tabulated distribution needs them, and no value")
    if way == "value":
        return table.number("value", low=0.0, high=most), None, ()
    if way == "table":
        values = rows(table, "table", "[frequency, value]", frequency=True)
        over_f = frequency_table(table, values[:, 0], values[:, 1])
        return float(values[:, 1].max()), over_f, ()
    try:
        if way == "points":
            points = tuple((float(e), float(w)) for e, w in rows(table, way, "[error, weight]"))
            return tabulated(points).deviation, None, points
        return _mismatch(table, way).half_width_db, None, ()
    except CalibrationError as error:
        raise table.error(way, str(error).removeprefix("points: ")) from None


def _mismatch(table: Table, way: str) -> Mismatch:
    """Of two reflection coefficients, or of two standing wave ratios."""
    pair = table.any(way)
    numbers = isinstance(pair, list) and [
        float(v) for v in pair if isinstance(v, (int, float)) and not isinstance(v, bool)
    ]
    if not numbers or len(numbers) != 2 or len(pair) != 2:
        raise table.error(way, f"{pair!r} is not two numbers, one for each side of the joint")
    return Mismatch(*numbers) if way == "reflection" else Mismatch.of_vswr(*numbers)


def frequency_table(
    table: Table, frequencies_hz: np.ndarray, values: np.ndarray, word: str = "an uncertainty"
) -> FrequencyTable:
    """A table of uncertainties over frequency; ConfigError for one below zero or out of order."""
    if (values < 0).any():
        raise table.error("table", f"{word} of {values.min():g}; it is zero or more")
    try:
        return FrequencyTable(frequencies_hz, values)
    except CalibrationError as error:
        raise table.error("table", str(error)) from None
