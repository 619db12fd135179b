"""Uncertainty budgets after the GUM (JCGM 100:2008): lines of any unit, added to first order.

A budget has one sequence of lines per channel; a plain measurement has one channel.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor.core.distributions import (
    CONFIDENCE,
    DIVISOR,
    FEWEST_DEGREES,
    Error,
    Real,
    Shape,
    factor,
)
from monitor.core.errors import CalibrationError
from monitor.core.tabulated import Points, Tabulated, tabulated

DISTRIBUTIONS = ("normal", "rectangular", "triangular", "u_shaped", "expanded", "tabulated")


@dataclass(frozen=True, slots=True)
class Contribution:
    """One line of an uncertainty budget, for one channel.

    value >= 0, in a unit of its own: the standard deviation (normal), the half width (rectangular,
    triangular, u_shaped) or the expanded uncertainty that a certificate gives with its factor k
    (expanded). A tabulated one has points, rows (error, weight) of its density in that unit, which
    give its value, the standard deviation: 0 stands for "not given". shared: one and the same
    error, by name, in all channels that list it. kind: a word on where it comes from (antenna,
    cable, detector, ...), for reading only. degrees_of_freedom: how well the value is known (GUM
    4.2.6, G.4.2). sensitivity: change of the result per unit of value, in a chain dB per unit (GUM
    5.1.3); its sign matters where an error is shared.
    """

    name: str
    value: float
    distribution: str
    k: float = 2.0
    shared: bool = False
    kind: str = ""
    degrees_of_freedom: float = math.inf
    sensitivity: float = 1.0
    points: Points = ()

    def __post_init__(self) -> None:
        """CalibrationError for a value, a factor or a distribution that means nothing."""
        if self.distribution not in DISTRIBUTIONS:
            raise CalibrationError(
                f"{self.name}: {self.distribution!r} is not one of {', '.join(DISTRIBUTIONS)}"
            )
        if not (math.isfinite(self.value) and self.value >= 0):
            raise CalibrationError(f"{self.name}: {self.value}; must be zero or more")
        if not (math.isfinite(self.k) and self.k > 0):
            raise CalibrationError(f"{self.name}: k = {self.k}; must be positive")
        if not self.degrees_of_freedom >= FEWEST_DEGREES:
            raise CalibrationError(
                f"{self.name}: {self.degrees_of_freedom} degrees of freedom; at least 1"
            )
        if not math.isfinite(self.sensitivity):
            raise CalibrationError(f"{self.name}: sensitivity = {self.sensitivity}; must be finite")
        if self.distribution == "tabulated":
            self._take_table()
        elif self.points:
            raise CalibrationError(
                f"{self.name}: points belong to a tabulated distribution, not to a"
                f" {self.distribution} one; write distribution = 'tabulated' or leave them out"
            )

    def _take_table(self) -> None:
        try:
            value = tabulated(self.points).deviation
        except CalibrationError as error:
            raise CalibrationError(f"{self.name}: {error}") from None
        if self.value not in (0.0, value):
            raise CalibrationError(f"{self.name}: value {self.value:g}; leave out: points give it")
        object.__setattr__(self, "value", value)

    @property
    def shape(self) -> Shape:
        """The distribution of the error itself: a certificate's is taken as normal."""
        if self.distribution == "tabulated":
            return tabulated(self.points)
        return "normal" if self.distribution == "expanded" else self.distribution

    @property
    def effect(self) -> float:
        """Standard uncertainty times sensitivity, with its sign, in the unit of the result."""
        divisor = self.k if self.distribution == "expanded" else DIVISOR.get(self.distribution, 1.0)
        return self.value / divisor * self.sensitivity

    @property
    def u(self) -> float:
        """What it adds to the standard uncertainty of the result, alone."""
        return abs(self.effect)


Budget = Sequence[Sequence[Contribution]]
"""The lines of each channel, channel by channel."""


@dataclass(frozen=True, slots=True, eq=False)
class Independent:
    """One error that is independent of all others; effects: (c,), its effect in each channel."""

    name: str
    shape: Shape
    degrees_of_freedom: float
    effects: Real

    def at(self, shares: Real) -> Error:
        """Shape, u and degrees of freedom in a sum of the channels weighted by shares (c,)."""
        effect, shape = float(shares @ self.effects), self.shape
        if effect < 0 and isinstance(shape, Tabulated):
            shape = shape.mirrored
        return shape, abs(effect), self.degrees_of_freedom


def independent(budget: Budget) -> list[Independent]:
    """The independent errors of a budget: what is shared by name is one error.

    CalibrationError where a shared one differs in shape or degrees of freedom.
    """
    shared: dict[str, Independent] = {}
    own: list[Independent] = []
    for channel, lines in enumerate(budget):
        for line in lines:
            error = shared.get(line.name) if line.shared else None
            if error is None:
                effects = np.zeros(len(budget))
                error = Independent(line.name, line.shape, line.degrees_of_freedom, effects)
                if line.shared:
                    shared[line.name] = error
                else:
                    own.append(error)
            if error.shape != line.shape:
                raise CalibrationError(
                    f"{line.name}: shared, but as {error.shape} and as {line.shape}"
                )
            if error.degrees_of_freedom != line.degrees_of_freedom:
                raise CalibrationError(
                    f"{line.name}: shared, but with {error.degrees_of_freedom:g} and with"
                    f" {line.degrees_of_freedom:g} degrees of freedom"
                )
            error.effects[channel] += line.effect
    return [*shared.values(), *own]


@dataclass(frozen=True, slots=True)
class Combined:
    """Combined standard uncertainty, its effective degrees of freedom, and its coverage factor."""

    u: float
    degrees_of_freedom: float
    k: float


def combined(budget: Budget, shares: Real, confidence: float = CONFIDENCE) -> Combined:
    """A sum of channels weighted by shares (c,): GUM 5.1.2, G.4.1, k from the distribution."""
    errors = [error.at(shares) for error in independent(budget)]
    return Combined(standard(errors), effective_degrees(errors), factor(errors, confidence))


def standard(errors: Sequence[Error]) -> float:
    """Combined standard uncertainty of independent errors (GUM 5.1.2)."""
    return math.sqrt(sum(u * u for _, u, _ in errors))


def linear(lines: Sequence[Contribution], confidence: float = CONFIDENCE) -> Combined:
    """The budget of one result, in any unit: its lines add, each times its sensitivity."""
    return combined([lines], np.ones(1), confidence)


def effective_degrees(errors: Sequence[Error]) -> float:
    """Welch-Satterthwaite (GUM G.2b): inf where every u is exactly known, or nothing is unsure."""
    largest = max((u for _, u, _ in errors), default=0.0)
    if largest == 0.0:
        return math.inf
    parts = [(u / largest, v) for _, u, v in errors]
    doubt = sum(u**4 / v for u, v in parts)
    return sum(u * u for u, _ in parts) ** 2 / doubt if doubt > 0.0 else math.inf


@dataclass(frozen=True, slots=True)
class Row:
    """A line of the contribution table: equal ones of several channels are one row.

    value, sensitivity: None where the channels differ. u: in the sum, in the unit of the result.
    channels: how many list it. variance_share: its part of the combined variance.
    """

    name: str
    kind: str
    distribution: str
    value: float | None
    k: float | None
    sensitivity: float | None
    shared: bool
    channels: int
    u: float
    degrees_of_freedom: float
    variance_share: float


def table(budget: Budget, shares: Real) -> list[Row]:
    """The contribution table of a sum of channels weighted by shares (c,), in the file's order."""
    groups: dict[object, list[list[Contribution]]] = {}
    for channel, lines in enumerate(budget):
        for line in lines:
            key = line.name if line.shared else line
            group = groups.setdefault(key, [[] for _ in budget])
            group[channel].append(line)
    whole = standard([error.at(shares) for error in independent(budget)])
    return [_row(group, shares, whole) for group in groups.values()]


def _row(group: Budget, shares: Real, whole: float) -> Row:
    lines = [line for channel in group for line in channel]
    first = lines[0]
    u = standard([error.at(shares) for error in independent(group)])
    value, k, sensitivity = (
        found.pop() if len(found) == 1 else None
        for found in (
            {line.value for line in lines},
            {line.k for line in lines if line.distribution == "expanded"},
            {line.sensitivity for line in lines},
        )
    )
    return Row(
        first.name,
        first.kind,
        first.distribution,
        value,
        k,
        sensitivity,
        first.shared,
        len(lines),
        u,
        first.degrees_of_freedom,
        (u / whole) ** 2 if whole > 0.0 else 0.0,
    )


@dataclass(frozen=True, slots=True)
class Factors:
    """What an expanded uncertainty in dB of power is as factors on E and on S, unequal by nature.

    The true value lies between the shown one times low and times high.
    """

    e_low: float
    e_high: float
    s_low: float
    s_high: float


def factors(expanded_db: float) -> Factors:
    """Linear bounds of +- expanded_db: 20 log for E, 10 log for S and E squared."""
    e, s = 10.0 ** (expanded_db / 20.0), 10.0 ** (expanded_db / 10.0)
    return Factors(1.0 / e, e, 1.0 / s, s)
