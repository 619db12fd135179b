"""Measurement uncertainty after the GUM (JCGM 100:2008), in dB of a power ratio.

Every figure is 10 log of a ratio of powers, so it holds for P, for S and for E squared alike.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import CalibrationError

Real = NDArray[np.float64]

DISTRIBUTIONS = ("normal", "rectangular", "triangular", "u_shaped", "expanded")
CONFIDENCE = 0.95

_CELLS_PER_U = 256
"""Grid cells per combined standard uncertainty; the factor is then good to about 1e-4."""
_DIVISOR = {"rectangular": math.sqrt(3.0), "triangular": math.sqrt(6.0), "u_shaped": math.sqrt(2.0)}
"""Half width over standard deviation: GUM 4.3.7, 4.3.9; U-shaped (arcsine): GUM H.1.3.4."""


@dataclass(frozen=True, slots=True)
class Contribution:
    """One line of an uncertainty budget, for one channel.

    value_db >= 0: the standard deviation (normal), the half width (rectangular, triangular,
    u_shaped) or the expanded uncertainty that a certificate gives with its factor k (expanded).
    shared: one and the same error, by name, in all channels that list it. kind: a word on where
    it comes from (antenna, cable, detector, ...), for reading only.
    """

    name: str
    value_db: float
    distribution: str
    k: float = 2.0
    shared: bool = False
    kind: str = ""

    def __post_init__(self) -> None:
        """CalibrationError for a value, a factor or a distribution that means nothing."""
        if self.distribution not in DISTRIBUTIONS:
            raise CalibrationError(
                f"{self.name}: {self.distribution!r} is not one of {', '.join(DISTRIBUTIONS)}"
            )
        if not (math.isfinite(self.value_db) and self.value_db >= 0):
            raise CalibrationError(f"{self.name}: {self.value_db} dB; must be zero or more")
        if not (math.isfinite(self.k) and self.k > 0):
            raise CalibrationError(f"{self.name}: k = {self.k}; must be positive")

    @property
    def u_db(self) -> float:
        """Standard uncertainty, dB."""
        if self.distribution == "expanded":
            return self.value_db / self.k
        return self.value_db / _DIVISOR.get(self.distribution, 1.0)


Budget = Sequence[Sequence[Contribution]]
"""The lines of each channel, channel by channel."""
