"""Power of the bands at one place of the tuner over an interval, in milli-dBFS."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from monitor.core.readings import MISSING
from monitor.core.spectrum import BandAccumulator, clipped_components, samples_from_bytes

DATATYPE = "cu8"
COUNTS_PER_DB = 1000.0


class Levels:
    """Adds up one interval after the other. bands: (low, high) in Hz from the centre."""

    def __init__(self, rate_hz: float, bands: Sequence[tuple[float, float]], fft: int) -> None:
        self._arguments = (rate_hz, bands, fft)
        self._engine = BandAccumulator(*self._arguments)
        self._clipped = 0

    def add(self, raw: bytes) -> None:
        """Take samples that follow those already added."""
        self._engine.add(samples_from_bytes(raw, DATATYPE))
        self._clipped += clipped_components(raw, DATATYPE)[0]

    def take(self) -> tuple[NDArray[np.float64], int]:
        """Power of each band (1.0 = 0 dBFS) and how many components clipped; begins anew."""
        taken = self._engine.result().power, self._clipped
        self.drop()
        return taken

    def drop(self) -> None:
        """Begin anew: what follows does not join on to what was added."""
        self._engine = BandAccumulator(*self._arguments)
        self._clipped = 0


def counts(powers: NDArray[np.float64]) -> NDArray[np.int32]:
    """milli-dBFS, int32; MISSING where there is no power."""
    found = np.full(powers.shape, MISSING, np.int32)
    there = powers > 0
    found[there] = np.rint(COUNTS_PER_DB * 10.0 * np.log10(powers[there])).astype(np.int32)
    return found
