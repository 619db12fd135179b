"""Band powers of complex samples: averaged spectra of overlapping Hann segments.

Scale: 0 dBFS is a mean of |z| squared of 1. No mean, DC or quantisation correction is applied.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import DTypeLike, NDArray

from monitor.core.bandbins import band_slices
from monitor.core.errors import ConfigError

Samples = NDArray[np.complex64]
Real = NDArray[np.float64]

MAX_FFT = 1 << 22
BATCH_SAMPLES = 65_536
"""Samples transformed at once; sums always run in these groups, whatever the chunks added."""


@dataclass(frozen=True, slots=True)
class Datatype:
    """How one component is stored: value = (code + offset) / full_scale.

    rails: the two codes that mean a clipped converter; None where there is no full scale.
    """

    dtype: DTypeLike
    offset: float
    full_scale: float
    rails: tuple[int, int] | None


_CU8 = Datatype("u1", -127.5, 127.5, (0, 255))
_CS8 = Datatype("i1", 0.0, 128.0, (-128, 127))
_CS16 = Datatype("<i2", 0.0, 32768.0, (-32768, 32767))
_CS16_BE = Datatype(">i2", 0.0, 32768.0, (-32768, 32767))
_CF32 = Datatype("<f4", 0.0, 1.0, None)
_CF32_BE = Datatype(">f4", 0.0, 1.0, None)

DATATYPES = {
    "cu8": _CU8, "cs8": _CS8, "cs16": _CS16, "cf32": _CF32,
    "ci8": _CS8, "ci16_le": _CS16, "ci16_be": _CS16_BE, "cf32_le": _CF32, "cf32_be": _CF32_BE,
}  # fmt: skip
"""Short names, and the names of the SigMF specification (from memory) for the same layouts."""


def datatype_of(name: str) -> Datatype:
    """The layout of that name; ConfigError lists the known ones."""
    try:
        return DATATYPES[name]
    except KeyError:
        known = ", ".join(DATATYPES)
        raise ConfigError(f"datatype {name!r} is not known; use one of {known}") from None


def bytes_per_sample(datatype: str) -> int:
    """Bytes of one complex sample."""
    return 2 * np.dtype(datatype_of(datatype).dtype).itemsize


def _components(raw: bytes, datatype: str) -> tuple[Datatype, NDArray[np.generic]]:
    layout = datatype_of(datatype)
    whole = len(raw) - len(raw) % bytes_per_sample(datatype)
    return layout, np.frombuffer(memoryview(raw)[:whole], layout.dtype)


def samples_from_bytes(raw: bytes, datatype: str) -> Samples:
    """complex64 (n,) from interleaved components; part of a sample at the end is left out."""
    layout, components = _components(raw, datatype)
    # float64 before the division: the scale of every code is exact to float32's last bit.
    values = (components.astype(np.float64) + layout.offset) / layout.full_scale
    return values.astype(np.float32).view(np.complex64)


def clipped_components(raw: bytes, datatype: str) -> tuple[int, int]:
    """(components at a rail, components). Floating point has no rail: always (0, components)."""
    layout, components = _components(raw, datatype)
    if layout.rails is None:
        return 0, int(components.size)
    low, high = layout.rails
    return int(np.count_nonzero((components == low) | (components == high))), int(components.size)


@dataclass(frozen=True, slots=True)
class BandPowers:
    """Linear powers, 1.0 = 0 dBFS.

    power: float64 (b,), mean over all segments; peak: float64 (b,), the strongest single segment;
    both nan while there is no whole segment. total_power: time domain, every sample counted.
    """

    power: Real
    peak: Real
    total_power: float
    samples: int
    segments: int


class BandAccumulator:
    """Adds up a stream of samples; the result does not depend on how the stream is cut.

    rate_hz: complex samples a second. bands: (low, high) in Hz from the centre; whole bins with
    low <= f < high. fft: segment length in samples. overlap: share of a segment, 0 <= overlap < 1.
    ConfigError for a band outside the sampled span or without a bin.
    Method: P. D. Welch, IEEE Trans. Audio Electroacoust. 15 (1967) 70, periodic Hann window.
    """

    def __init__(
        self,
        rate_hz: float,
        bands: Sequence[tuple[float, float]],
        fft: int = 1024,
        overlap: float = 0.5,
    ) -> None:
        if not 2 <= fft <= MAX_FFT:
            raise ConfigError(f"fft {fft}: must be from 2 to {MAX_FFT}")
        if not 0.0 <= overlap < 1.0:
            raise ConfigError(f"overlap {overlap:g}: must be at least 0 and below 1")
        if not rate_hz > 0.0:
            raise ConfigError(f"rate {rate_hz:g} Hz: must be above 0")
        self._fft = fft
        self._hop = fft - int(overlap * fft)
        self._batch = max(1, BATCH_SAMPLES // fft)
        self._window = 0.5 - 0.5 * np.cos(2.0 * np.pi * np.arange(fft) / fft)
        self._scale = 1.0 / (fft * float(np.sum(self._window**2)))
        # numpy's fft begins with the centre frequency, the slices with the lowest
        order = np.fft.fftshift(np.arange(fft))
        self._masks = [order[bins] for bins in band_slices(rate_hz, bands, fft)]
        self._pending: Samples = np.empty(0, np.complex64)
        self._sum: Real = np.zeros(len(bands))
        self._peak: Real = np.full(len(bands), -np.inf)
        self._segments = 0
        self._energy = 0.0
        self._samples = 0

    def add(self, samples: Samples) -> None:
        """Take complex64 (n,) samples that follow those already added."""
        self._pending = np.concatenate([self._pending, samples])
        step = self._batch * self._hop
        need = step - self._hop + self._fft
        start = 0
        while self._pending.size - start >= need:
            self._take(self._pending[start : start + need], step)
            start += step
        # a copy, so that the chunk given is not kept alive by a view of its end
        self._pending = self._pending[start:].copy()

    def result(self) -> BandPowers:
        """The powers so far; more samples may be added afterwards."""
        tail = self._pending
        total, peak, segments = self._sum, self._peak, self._segments
        if tail.size >= self._fft:
            last = self._segment_powers(tail)
            total = total + last.sum(axis=0)
            peak = np.maximum(peak, last.max(axis=0))
            segments += last.shape[0]
        samples = self._samples + int(tail.size)
        energy = self._energy + _energy(tail)
        nothing = np.full(total.shape, np.nan)
        return BandPowers(
            power=total / segments if segments else nothing,
            peak=peak if segments else nothing,
            total_power=energy / samples if samples else float("nan"),
            samples=samples,
            segments=segments,
        )

    def _take(self, samples: Samples, step: int) -> None:
        powers = self._segment_powers(samples)
        self._sum = self._sum + powers.sum(axis=0)
        self._peak = np.maximum(self._peak, powers.max(axis=0))
        self._segments += powers.shape[0]
        self._energy += _energy(samples[:step])
        self._samples += step

    def _segment_powers(self, samples: Samples) -> Real:
        """Band power of every whole segment: float64 (segments, bands)."""
        windows = np.lib.stride_tricks.sliding_window_view(samples, self._fft)[:: self._hop]
        spectra = np.fft.fft(windows * self._window, axis=1)
        power = (spectra.real**2 + spectra.imag**2) * self._scale
        sums = np.empty((power.shape[0], len(self._masks)))
        for column, bins in enumerate(self._masks):
            sums[:, column] = power[:, bins].sum(axis=1)
        return sums


def _energy(samples: Samples) -> float:
    wide = samples.astype(np.complex128)
    return float(np.sum(wide.real**2 + wide.imag**2))
