"""How warm the board is, and what its detector makes of that.

The board is as warm as a cosine of the time of day says; its detector follows with a lag of first
order, long settled, and reads too high by so many dB for each kelvin above a reference. What a
frame tells is the board's temperature, not the detector's: with a lag they differ.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

MOST_C = 999.0
"""What fits into a frame either way."""


@dataclass(frozen=True)
class Climate:
    """warmest_s: seconds after midnight UTC of one of the warmest moments, period_s apart.

    db_per_k: how much too high the detector reads for each kelvin above reference_c, dB of power.
    """

    mean_c: float = 21.0
    swing_c: float = 6.0
    period_s: float = 86_400.0
    warmest_s: float = 54_000.0
    db_per_k: float = 0.0
    reference_c: float = 23.0
    lag_s: float = 0.0

    def __post_init__(self) -> None:
        """Raises ValueError for a course that no frame can carry or no lag can follow."""
        if not all(math.isfinite(getattr(self, one.name)) for one in fields(self)):
            raise ValueError("climate: finite numbers")
        if abs(self.mean_c) + abs(self.swing_c) > MOST_C:
            raise ValueError(f"climate: mean_c and swing_c within {MOST_C:g} degrees")
        if self.period_s <= 0 or self.lag_s < 0:
            raise ValueError("climate: period_s above 0, lag_s 0 or more")

    def board_c(self, utc_s: Floats) -> Floats:
        """Temperature of the board (n,) at seconds after a midnight UTC (n,), degrees Celsius."""
        return self.mean_c + self.swing_c * np.cos(self._turn(utc_s))

    def told_dc(self, utc_s: Floats) -> NDArray[np.int32]:
        """The board's temperature (n,) as a frame tells it, whole tenths of a degree."""
        return np.rint(10.0 * self.board_c(utc_s)).astype(np.int32)

    def drift_db(self, utc_s: Floats) -> Floats:
        """How much too high the detector reads (n,), dB of power."""
        late = 2.0 * math.pi * self.lag_s / self.period_s
        swing_c = self.swing_c / math.hypot(1.0, late)
        detector_c = self.mean_c + swing_c * np.cos(self._turn(utc_s) - math.atan(late))
        return np.asarray(self.db_per_k * (detector_c - self.reference_c))

    def _turn(self, utc_s: Floats) -> Floats:
        return 2.0 * math.pi * (utc_s - self.warmest_s) / self.period_s


def read(table: Mapping[str, object]) -> Climate:
    """The [climate] of a scene; what it does not say stays as it is. Raises ValueError."""
    known = {one.name for one in fields(Climate)}
    strange = sorted(set(table) - known)
    if strange:
        raise ValueError(f"climate: {strange[0]!r} is not one of {', '.join(sorted(known))}")
    return Climate(**{name: float(str(value)) for name, value in table.items()})
