"""How much of a band is the image of what lies on the other side of the centre.

A receiver whose I and Q branches differ shows every signal once more, conjugate, at the mirrored
frequency. There the product of both lines keeps its phase, which it does for no two signals of
different origin (improper signals; common practice, no source).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from monitor.core.bandbins import band_slices, fit_bins
from monitor.core.distributions import Real
from monitor.core.spectrum import samples_from_bytes

NOTABLE = 0.2
"""Share of a band's power from which its level is suspected: 1 dB too much (our choice)."""
LEAST_PRODUCTS = 1000
"""So many products of lines at the least; chance then makes a share of 0.001."""


class Image:
    """Adds up products of mirrored lines. bands: (low, high) in Hz from the centre; excluded_hz:
    half width round the centre that is left out. Bins that mirror into their own band are, too."""

    def __init__(
        self, rate_hz: float, bands: Sequence[tuple[float, float]], fft: int, excluded_hz: float
    ) -> None:
        fit = fit_bins(rate_hz, fft, excluded_hz, 0.0)
        self._fft, self._window = fft, np.hanning(fft + 1)[:fft]
        self._own = []
        for band in band_slices(rate_hz, bands, fft):
            bins = np.arange(band.start, band.stop)
            mirrored = fft - bins
            good = (bins > 0) & ((mirrored < band.start) | (mirrored >= band.stop))
            self._own.append(bins[good & fit[bins]])
        self._cross = np.zeros(len(bands), np.complex128)
        self._power, self._mirror = np.zeros(len(bands)), np.zeros(len(bands))
        self._count = np.zeros(len(bands))

    def add(self, raw: bytes | memoryview, datatype: str) -> None:
        """Look at samples, whole; what is no whole segment at the end is left."""
        samples = samples_from_bytes(bytes(raw), datatype)
        n = len(samples) // self._fft
        whole = samples[: n * self._fft].reshape(n, self._fft)
        lines = np.fft.fftshift(np.fft.fft(whole * self._window, axis=1), axes=1)
        for band, own in enumerate(self._own):
            here, there = lines[:, own], lines[:, self._fft - own]
            self._cross[band] += np.sum(here * there)
            self._power[band] += np.sum(np.abs(here) ** 2)
            self._mirror[band] += np.sum(np.abs(there) ** 2)
            self._count[band] += here.size

    def powers(self) -> tuple[Real, Real]:
        """(image, all) of the bins of each band (b,), in units of their own; nan where too little
        was looked at."""
        enough = self._count >= LEAST_PRODUCTS
        with np.errstate(invalid="ignore", divide="ignore"):
            image = np.abs(self._cross) ** 2 / self._mirror
        image = np.where(self._mirror > self._power, image, 0.0)  # never as strong as its source
        return np.where(enough, image, np.nan), np.where(enough, self._power, np.nan)
