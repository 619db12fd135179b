"""A distribution of errors given as a table: a density that is straight between its points."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import CalibrationError

Real = NDArray[np.float64]
Points = tuple[tuple[float, float], ...]

MOST_OFF_CENTRE = 0.01
"""Mean over deviation from which a table is refused, our choice: it adds 5e-5 of u at most."""


@dataclass(frozen=True)
class Tabulated:
    """Density over the error, from rows (error, weight); none beyond the first and last row.

    Errors rise strictly; weights are zero or more, in any unit: their integral is taken as 1.
    """

    points: Points

    def __post_init__(self) -> None:
        """CalibrationError for a table that is no density, or whose mean is not zero."""
        errors, weights = self._columns
        if len(self.points) < 2:
            raise CalibrationError("points: needs at least two rows [error, weight]")
        if not (np.isfinite(errors).all() and np.isfinite(weights).all()):
            raise CalibrationError("points: every error and every weight must be a finite number")
        falls = np.flatnonzero(np.diff(errors) <= 0)
        if falls.size:
            at = int(falls[0])
            raise CalibrationError(
                f"points: error {errors[at]:g} then {errors[at + 1]:g}; errors must rise"
            )
        if (weights < 0).any():
            raise CalibrationError(f"points: weight {weights.min():g}; must be zero or more")
        if not weights.any():
            raise CalibrationError("points: all weights are zero; at least one must be more")
        if abs(self.mean) > MOST_OFF_CENTRE * self.deviation:
            raise CalibrationError(
                f"points: their mean is {self.mean:.4g}, not zero; correct the table by its mean"
                " first: subtract it from every error, and correct the figures for it"
            )

    @property
    def _columns(self) -> tuple[Real, Real]:
        return (
            np.array([error for error, _ in self.points], np.float64),
            np.array([weight for _, weight in self.points], np.float64),
        )

    @cached_property
    def _pieces(self) -> tuple[Real, Real, Real, Real]:
        """Errors (n,), density there (n,), its slopes (n - 1,), cumulative probability (n,)."""
        x, weight = self._columns
        step = np.diff(x)
        mass = 0.5 * step * (weight[:-1] + weight[1:])
        density = weight / mass.sum()
        cumulative = np.concatenate([[0.0], np.cumsum(mass) / mass.sum()])
        cumulative[-1] = 1.0
        return x, density, np.diff(density) / step, cumulative

    @cached_property
    def mean(self) -> float:
        """Mean error, by exact integration."""
        x, density, _, _ = self._pieces
        a, b, wa, wb = x[:-1], x[1:], density[:-1], density[1:]
        return float(np.sum((b - a) * (wa * (2.0 * a + b) + wb * (a + 2.0 * b))) / 6.0)

    @cached_property
    def deviation(self) -> float:
        """Root of the mean square error about zero, by exact integration: u (GUM 4.3.5)."""
        x, density, _, _ = self._pieces
        a, b, wa, wb = x[:-1], x[1:], density[:-1], density[1:]
        parts = wa * (3.0 * a * a + 2.0 * a * b + b * b) + wb * (a * a + 2.0 * a * b + 3.0 * b * b)
        return math.sqrt(float(np.sum((b - a) * parts)) / 12.0)

    @property
    def reach(self) -> float:
        """The largest error that is possible, in deviations."""
        return max(abs(self.points[0][0]), abs(self.points[-1][0])) / self.deviation

    def cumulative(self, deviations: Real) -> Real:
        """Probability (m,) of an error below each of (m,), in deviations."""
        x, density, slope, below = self._pieces
        at = np.clip(deviations * self.deviation, x[0], x[-1])
        piece = np.clip(np.searchsorted(x, at, "right") - 1, 0, x.size - 2)
        t = at - x[piece]
        return np.asarray(below[piece] + t * (density[piece] + 0.5 * slope[piece] * t))

    def at(self, probability: Real) -> Real:
        """Errors (m,), in deviations, below which lie the probabilities (m,), 0 to 1."""
        x, density, slope, below = self._pieces
        piece = np.clip(np.searchsorted(below, probability, "right") - 1, 0, x.size - 2)
        rest = probability - below[piece]
        root = np.sqrt(np.maximum(density[piece] ** 2 + 2.0 * slope[piece] * rest, 0.0))
        # Written so that a density that starts at nothing, or does not change, is no special case.
        divisor = np.maximum(density[piece] + root, np.finfo(np.float64).tiny)
        t = np.minimum(2.0 * rest / divisor, x[piece + 1] - x[piece])
        return np.asarray((x[piece] + t) / self.deviation)

    @cached_property
    def mirrored(self) -> Tabulated:
        """The distribution of the error with its sign turned round."""
        return Tabulated(tuple((-error, weight) for error, weight in reversed(self.points)))


@lru_cache(maxsize=256)
def tabulated(points: Points) -> Tabulated:
    """The distribution of rows (error, weight), made once; CalibrationError as of Tabulated."""
    return Tabulated(points)
