"""What two imperfect matches at a joint may do to the power that passes it."""

from __future__ import annotations

import math
from dataclasses import dataclass

from monitor.core.distributions import DIVISOR
from monitor.core.errors import CalibrationError


def reflection(vswr: float) -> float:
    """Magnitude of the reflection coefficient of a standing wave ratio of 1 or more."""
    if not (math.isfinite(vswr) and vswr >= 1.0):
        raise CalibrationError(f"a standing wave ratio of {vswr:g}; must be 1 or more")
    return (vswr - 1.0) / (vswr + 1.0)


@dataclass(frozen=True, slots=True)
class Mismatch:
    """Two reflection coefficients, magnitudes from 0 to below 1, of unknown phase.

    The voltage that passes is multiplied by something between 1 - rho1 rho2 and 1 + rho1 rho2. With
    the phase anywhere the error is U-shaped between the limits (Harris and Warner 1981, from
    memory); EA-4/02 M, S6 and S7, take it so.
    """

    rho1: float
    rho2: float

    def __post_init__(self) -> None:
        """CalibrationError for a magnitude that no passive joint has."""
        for rho in (self.rho1, self.rho2):
            if not 0.0 <= rho < 1.0:
                raise CalibrationError(f"a reflection of {rho:g}; must be from 0 to below 1")

    @classmethod
    def of_vswr(cls, first: float, second: float) -> Mismatch:
        """Of two standing wave ratios."""
        return cls(reflection(first), reflection(second))

    @property
    def voltage(self) -> float:
        """Half width of the error of the voltage, relative."""
        return self.rho1 * self.rho2

    @property
    def limits_db(self) -> tuple[float, float]:
        """Lower (negative) and upper limit, dB: 20 log(1 -+ rho1 rho2); the lower is further."""
        return 20.0 * math.log10(1.0 - self.voltage), 20.0 * math.log10(1.0 + self.voltage)

    @property
    def limits_percent(self) -> tuple[float, float]:
        """Lower (negative) and upper limit of the power, percent."""
        low, high = (1.0 - self.voltage) ** 2, (1.0 + self.voltage) ** 2
        return 100.0 * (low - 1.0), 100.0 * (high - 1.0)

    @property
    def half_width_db(self) -> float:
        """The larger limit, dB, for a budget whose lines are symmetric."""
        return -self.limits_db[0]

    @property
    def standard_db(self) -> float:
        """Standard uncertainty of the U-shaped error, dB, by the larger limit (GUM H.1.3.4)."""
        return self.half_width_db / DIVISOR["u_shaped"]

    @property
    def standard_percent(self) -> float:
        """Standard uncertainty of the power, percent, to first order: 200 rho1 rho2 / root 2."""
        return 200.0 * self.voltage / DIVISOR["u_shaped"]
