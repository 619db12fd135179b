"""Power of the bands at one place of the tuner over an interval, in milli-dBFS."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from monitor.core.bandpower import Engine
from monitor.core.readings import MISSING

DATATYPE = "cu8"
COUNTS_PER_DB = 1000.0
SPIKE_BINS = 3
"""Half width of what is left out round the centre (our choice): a steady offset is taken off as the
mean; of what wavers, the window passes on less than a thousandth beyond three bins."""
CODE = 1.0 / 127.5
FLOOR_SHARE = 0.1
"""A band in which nothing remains once the converter's own noise is taken off reads as this share
of that noise: not as zero, which has no dB, and not as a gap (our choice)."""


def spike_hz(rate_hz: float, fft: int) -> float:
    """Half width of what is left out round the centre, Hz."""
    return SPIKE_BINS * rate_hz / fft


def least_power(rate_hz: float, bands: Sequence[tuple[float, float]]) -> NDArray[np.float64]:
    """What a band (b,) reads at the least, 1.0 = 0 dBFS: FLOOR_SHARE of the rounding noise."""
    widths_hz = np.array([high - low for low, high in bands])
    return np.asarray(FLOOR_SHARE * CODE**2 / 6.0 * widths_hz / rate_hz)


class Levels:
    """Adds up one interval after the other. bands: (low, high) in Hz from the centre; spurs: the
    same of lines that the receiver makes itself, left out with as many bins as the centre's spike.

    ConfigError for a band that cannot be measured.
    """

    def __init__(
        self,
        rate_hz: float,
        bands: Sequence[tuple[float, float]],
        fft: int,
        spurs: Sequence[tuple[float, float]] = (),
    ) -> None:
        spike = spike_hz(rate_hz, fft)
        wider = [(low - spike, high + spike) for low, high in spurs]
        self._engine = Engine(
            rate_hz, bands, datatype=DATATYPE, fft=fft, excluded_hz=spike, excluded=wider
        )
        self._floor = least_power(rate_hz, bands)

    def add(self, raw: bytes | memoryview) -> None:
        """Take samples that follow those already added."""
        self._engine.add(raw)

    def take(self) -> tuple[NDArray[np.float64], int]:
        """Power of each band (1.0 = 0 dBFS) and how many components clipped.

        The next interval follows without a gap unless drop() is called.
        """
        found = self._engine.result()
        self._engine.reset()
        return np.maximum(found.power, self._floor), found.clipped

    def drop(self) -> None:
        """Begin anew: what follows does not join on to what was added."""
        self._engine.reset(continues=False)


def counts(powers: NDArray[np.float64]) -> NDArray[np.int32]:
    """milli-dBFS, int32; MISSING where there is no power."""
    found = np.full(powers.shape, MISSING, np.int32)
    there = powers > 0
    found[there] = np.rint(COUNTS_PER_DB * 10.0 * np.log10(powers[there])).astype(np.int32)
    return found
