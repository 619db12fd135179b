"""Curves of a detector, volts against power: one, or several over frequency."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from monitor.core.calibration import FrequencyTable
from monitor.core.distributions import Real
from monitor.core.errors import CalibrationError


class Inverse(Protocol):
    """Power at a voltage, strictly monotonic between ends_v, V; its end beyond them."""

    @property
    def ends_v(self) -> tuple[float, float]: ...
    @property
    def rising(self) -> bool: ...
    def dbm_at(self, volts: Real) -> Real: ...


@dataclass(frozen=True, slots=True, eq=False)
class Curve:
    """Detector voltage against power: both f8 (n,), strictly monotonic; voltage of either slope.

    linear_in: 'dbm' (log detector: volts follow dBm) or 'amplitude' (rms detector: volts follow the
    root of power); the curve is a straight line between points in that figure.
    """

    dbm: Real
    volts: Real
    linear_in: str

    def __post_init__(self) -> None:
        """CalibrationError where the curve cannot be inverted."""
        if self.dbm.size < 2 or self.dbm.size != self.volts.size:
            raise CalibrationError("needs at least two points [dBm, volts]")
        for values, word in ((self.dbm, "dBm"), (self.volts, "volts")):
            steps = np.diff(values) * np.sign(values[-1] - values[0])
            if not np.all(steps > 0):
                wrong = int(np.flatnonzero(steps <= 0)[0])
                raise CalibrationError(
                    f"not monotonic: {word} {values[wrong]:g} then {values[wrong + 1]:g} at points "
                    f"{wrong + 1} and {wrong + 2}; a voltage must belong to one power"
                )

    @property
    def ends_v(self) -> tuple[float, float]:
        """Lowest and highest voltage."""
        return float(self.volts.min()), float(self.volts.max())

    @property
    def rising(self) -> bool:
        """Whether more power gives more volts."""
        return bool((self.volts[-1] > self.volts[0]) == (self.dbm[-1] > self.dbm[0]))

    def dbm_at(self, volts: Real) -> Real:
        """Power (n,), dBm, at volts (n,); the end of the curve beyond its ends."""
        order = np.argsort(self.volts)
        knots, dbm = self.volts[order], self.dbm[order]
        if self.linear_in == "dbm":
            return np.interp(volts, knots, dbm)
        return 20.0 * np.log10(np.interp(volts, knots, 10.0 ** (dbm / 20.0)))

    def volts_at(self, dbm: float) -> float:
        """Volts at a power within the curve, dBm."""
        order = np.argsort(self.dbm)
        knots, volts = self.dbm[order], self.volts[order]
        if self.linear_in == "dbm":
            return float(np.interp(dbm, knots, volts))
        return float(np.interp(10.0 ** (dbm / 20.0), 10.0 ** (knots / 20.0), volts))


@dataclass(frozen=True, slots=True, eq=False)
class Blend:
    """What a detector that cannot tell frequencies apart shows of a band.

    pairs: at every frequency where an extreme can lie, the curves on either side of it and the
    second one's part. Its power at a voltage is the middle in dB of the smallest and the largest.
    """

    pairs: tuple[tuple[Curve, Curve, float], ...]
    ends_v: tuple[float, float]

    @property
    def rising(self) -> bool:
        """Whether more power gives more volts."""
        return self.pairs[0][0].rising

    def dbm_at(self, volts: Real) -> Real:
        """Power (n,), dBm, at volts (n,); that of the end beyond ends_v."""
        low, high = self._extremes(volts)
        return (low + high) / 2.0

    def half_spread_db(self, volts: Real) -> Real:
        """Half of largest less smallest (n,), dB: how far a signal of the band may be off."""
        low, high = self._extremes(volts)
        return (high - low) / 2.0

    def _extremes(self, volts: Real) -> tuple[Real, Real]:
        inside = np.clip(volts, *self.ends_v)
        each = [
            lower.dbm_at(inside) * (1.0 - part) + upper.dbm_at(inside) * part
            for lower, upper, part in self.pairs
        ]
        return np.min(each, axis=0), np.max(each, axis=0)


@dataclass(frozen=True, slots=True, eq=False)
class Curves:
    """Curves at rising frequencies_hz (n,); or none, and one curve for all frequencies.

    Between two of them dBm at a voltage runs straight over the logarithm of frequency. Only the
    voltages that all have in common are used.
    """

    frequencies_hz: Real
    curves: tuple[Curve, ...]

    def __post_init__(self) -> None:
        """CalibrationError for frequencies that do not rise, or curves that do not go together."""
        if self.frequencies_hz.size:
            self._places()
        if len({curve.rising for curve in self.curves}) > 1:
            raise CalibrationError("the voltage rises at one frequency and falls at another")
        if not self.ends_v[0] < self.ends_v[1]:
            raise CalibrationError("the curves have no voltage in common")

    def _places(self) -> FrequencyTable:
        """The place in the row of curves, 0 to n - 1, over frequency."""
        return FrequencyTable(self.frequencies_hz, np.arange(len(self.curves), dtype=np.float64))

    @property
    def ends_v(self) -> tuple[float, float]:
        """Voltages that every curve has."""
        ends = [curve.ends_v for curve in self.curves]
        return max(low for low, _ in ends), min(high for _, high in ends)

    @property
    def ends_dbm(self) -> tuple[float, float]:
        """Powers, dBm, that are within ends_v at every frequency."""
        ends = np.array([np.sort(curve.dbm_at(np.array(self.ends_v))) for curve in self.curves])
        return float(ends[:, 0].max()), float(ends[:, 1].min())

    def volts_of(self, dbm: float) -> tuple[float, float]:
        """Lowest and highest voltage that a power gives at any of the frequencies."""
        volts = [curve.volts_at(dbm) for curve in self.curves]
        return min(volts), max(volts)

    def over(self, low_hz: float, high_hz: float) -> Blend:
        """The middle over a band, or the curve at one frequency where low is high.

        CalibrationError where the curves do not cover it: nothing is extrapolated.
        """
        if not self.frequencies_hz.size:
            return Blend(((self.curves[0], self.curves[0], 0.0),), self.ends_v)
        f = self.frequencies_hz
        at = np.unique(np.concatenate([[low_hz, high_hz], f[(f > low_hz) & (f < high_hz)]]))
        pairs = []
        for place in self._places().at(at).tolist():
            lower = min(math.floor(place), len(self.curves) - 2)
            pairs.append((self.curves[lower], self.curves[lower + 1], place - lower))
        return Blend(tuple(pairs), self.ends_v)
