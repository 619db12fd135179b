"""Shewhart control chart of individual figures: has what is checked again and again moved?

ISO 7870-2 (from memory): the centre is the mean, sigma the mean moving range over d2; warning lines
at 2 sigma, action lines at 3. Our choice: the first checks are the baseline, and stay it, so that
a slow drift cannot pull the lines along; sigma has a floor, so that a few figures that happen to
lie close together do not make every later one a false alarm.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from enum import StrEnum

import numpy as np

BASELINE = 8
"""Checks that make the lines (our choice)."""
D2 = 2.0 / math.sqrt(math.pi)
"""Mean range of two draws from a normal distribution, in its standard deviations: 1.128."""
WARNING_SIGMA, ACTION_SIGMA = 2.0, 3.0


class State(StrEnum):
    """Where a figure lies."""

    NO_LINES = "no lines yet"
    WITHIN = "within"
    WARNING = "beyond a warning line"
    ACTION = "beyond an action line"


@dataclass(frozen=True, slots=True)
class Lines:
    """Centre and sigma, in the figures' unit; floored: sigma is the floor, not the baseline's."""

    centre: float
    sigma: float
    floored: bool

    @property
    def warning(self) -> tuple[float, float]:
        """Lower and upper warning line."""
        return self._at(WARNING_SIGMA)

    @property
    def action(self) -> tuple[float, float]:
        """Lower and upper action line."""
        return self._at(ACTION_SIGMA)

    def _at(self, sigmas: float) -> tuple[float, float]:
        return self.centre - sigmas * self.sigma, self.centre + sigmas * self.sigma

    def state(self, value: float) -> State:
        """Where a figure lies; on a line is not beyond it."""
        if not self.action[0] <= value <= self.action[1]:
            return State.ACTION
        inside = self.warning[0] <= value <= self.warning[1]
        return State.WITHIN if inside else State.WARNING


@dataclass(frozen=True, slots=True)
class Chart:
    """Lines, None before there are BASELINE figures, and the state of each figure."""

    lines: Lines | None
    states: tuple[State, ...]


def chart(values: Sequence[float], floor: float) -> Chart:
    """The chart of figures in the order of time. floor: least sigma, in their unit, 0 or more."""
    if len(values) < BASELINE:
        return Chart(None, (State.NO_LINES,) * len(values))
    baseline = np.asarray(values[:BASELINE], np.float64)
    sigma = float(np.abs(np.diff(baseline)).mean()) / D2
    lines = Lines(float(baseline.mean()), max(sigma, floor), sigma < floor)
    return Chart(lines, tuple(lines.state(float(value)) for value in values))
