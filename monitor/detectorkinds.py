"""The kinds of detectors: a curve or curves, a scale with its gain steps, a probe as a whole.

Each is fitted to a band: what does not depend on a band is read once, by monitor.detectorkeys.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from monitor.core import detector as det
from monitor.core.calibration import FrequencyTable
from monitor.core.curves import Curves
from monitor.core.errors import CalibrationError
from monitor.core.keys import Table
from monitor.core.law import CurveLaw, Law, ProbeLaw, ScaleLaw

SPAN_HZ = (0.0, math.inf)
"""Of a detector that does not say at which frequencies it holds: the elements do."""

Ends = tuple[float, float]


@dataclass(frozen=True, slots=True)
class Noise:
    """Power at the port that is shown without any signal, W, and its standard uncertainty, W."""

    w: float = 0.0
    u_w: float = 0.0

    def in_part(self) -> Noise:
        """Of figures that hold between none and all of it: half, and rectangular between the two.

        Of a part p from 0 to 1 times w: variance w^2 / 12 + u^2 / 3 (GUM 4.3.7).
        """
        return Noise(self.w / 2.0, math.hypot(self.w / math.sqrt(12.0), self.u_w / math.sqrt(3.0)))


Fitted = tuple[Law, FrequencyTable | None, Noise, str]
"""Law, dB over frequency that it leaves out, noise, and the key that is at fault where the counts
are too many."""


@dataclass(frozen=True, slots=True, eq=False)
class CurveSource:
    """Volts by a curve, or by curves at several frequencies."""

    curves: Curves
    converter: det.Converter
    valid_v: Ends
    range_dbm: Ends
    noise: Noise

    @property
    def resolution(self) -> float | None:
        """What a count stands for; None for converter counts."""
        return None if self.converter.rails else self.converter.volts_per_count

    @property
    def span_hz(self) -> Ends:
        """Frequencies at which it is known."""
        f = self.curves.frequencies_hz
        return (float(f[0]), float(f[-1])) if f.size else SPAN_HZ

    def fit(self, where: Table, gain: str, low_hz: float, high_hz: float) -> Fitted:
        """For a gain step and a band; ConfigError where it lacks them."""
        _no_steps(where, gain)
        try:
            curve = self.curves.over(low_hz, high_hz)
        except CalibrationError as error:
            raise where.error("curve_at", str(error)) from None
        law = CurveLaw(curve, self.converter, self.valid_v, self.range_dbm)
        return law, None, self.noise, "bits" if self.converter.rails else "volts_per_count"


@dataclass(frozen=True, slots=True, eq=False)
class Step:
    """A receiver's gain step: dB from its figure to dBm at the port, over frequency or plain."""

    gain: str
    offset: FrequencyTable | float
    valid_dbm: Ends
    range_dbm: Ends
    noise: Noise


@dataclass(frozen=True, slots=True)
class Spur:
    """A line that the receiver makes itself; gain: the step at which it does, '' at every one."""

    frequency_hz: float
    width_hz: float
    level_dbm: float
    gain: str = ""

    @property
    def ends_hz(self) -> Ends:
        """Its lower and upper end."""
        return self.frequency_hz - self.width_hz / 2.0, self.frequency_hz + self.width_hz / 2.0


@dataclass(frozen=True, slots=True, eq=False)
class ScaleSource:
    """Figures in dBm, or in dBFS at one or more gain steps; spurs: what is left out of bands."""

    quantity: str
    resolution: float
    steps: tuple[Step, ...]
    spurs: tuple[Spur, ...] = ()

    @property
    def range_dbm(self) -> Ends:
        """Range to be trusted, dBm at the port, over all steps."""
        lows, highs = zip(*(step.range_dbm for step in self.steps))
        return min(lows), max(highs)

    @property
    def span_hz(self) -> Ends:
        """Frequencies at which it is known."""
        tables = [s.offset.frequencies_hz for s in self.steps if not isinstance(s.offset, float)]
        ends = [SPAN_HZ, *((float(f[0]), float(f[-1])) for f in tables)]
        return max(low for low, _ in ends), min(high for _, high in ends)

    def fit(self, where: Table, gain: str, low_hz: float, high_hz: float) -> Fitted:
        """For a gain step and a band; ConfigError where it lacks them."""
        step = self.step(where, gain)
        valid, usable = step.valid_dbm, step.range_dbm
        if isinstance(step.offset, float):
            law = ScaleLaw(self.quantity, self.resolution, step.offset, valid, usable)
            return law, None, step.noise, "resolution"
        try:
            step.offset.at(np.array([low_hz, high_hz]))
        except CalibrationError as error:
            raise where.error("step", f"gain {step.gain!r} {error}") from None
        middle_hz = min(max(math.sqrt(low_hz * high_hz), low_hz), high_hz)
        middle_db = float(step.offset.at(np.array([middle_hz]))[0])
        rest = FrequencyTable(step.offset.frequencies_hz, step.offset.db - middle_db)
        law = ScaleLaw(self.quantity, self.resolution, middle_db, valid, usable)
        return law, rest, step.noise, "resolution"

    def step(self, where: Table, gain: str) -> Step:
        """The step of that name; the only one where none is named."""
        if not self.steps[0].gain:
            _no_steps(where, gain)
            return self.steps[0]
        known = ", ".join(step.gain for step in self.steps)
        if not gain and len(self.steps) > 1:
            raise where.error(
                "step",
                f"several gain steps; say which, as gain = ...: {known}"
                " (of the site file's [[channel]], or --gain)",
            )
        for step in self.steps:
            if step.gain == gain or not gain:
                return step
        raise where.error("step", f"no gain step {gain!r}; there are {known}")


@dataclass(frozen=True, slots=True, eq=False)
class ProbeSource:
    """Figures of field strength or power density by a probe calibrated as a whole."""

    law: ProbeLaw
    noise: Noise

    @property
    def resolution(self) -> float | None:
        """What a count stands for; None for converter counts."""
        return self.law.resolution

    @property
    def range_dbm(self) -> Ends:
        """Range to be trusted, dBm at the port, over all steps."""
        return self.law.range_dbm

    @property
    def span_hz(self) -> Ends:
        """Frequencies at which it is known."""
        return SPAN_HZ

    def fit(self, where: Table, gain: str, low_hz: float, high_hz: float) -> Fitted:
        """For a gain step and a band; ConfigError where it lacks them."""
        _no_steps(where, gain)
        return self.law, None, self.noise, "resolution"


Source = CurveSource | ScaleSource | ProbeSource


def _no_steps(where: Table, gain: str) -> None:
    if gain:
        raise where.error("step", f"gain {gain!r} is asked for, but there are no gain steps")
