"""Energy of bands in half-overlapping segments of a stream, many segments at a time.

Double precision throughout: numpy's transform is no faster in single precision.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Self

import numpy as np
from numpy.typing import NDArray

from monitor.core.bandbins import BandBins

Real = NDArray[np.float64]
Complex = NDArray[np.complex128]

KAISER_ALPHA = 4.0
"""Our choice: leakage eight bins away is -72 dB; at 3 it would be -61 dB."""
NEAR_BINS = 8
"""Bins on either side of the centre whose lines are kept; a steady offset leaks less beyond."""
BATCH_SAMPLES = 16_384
"""New samples transformed at once: few enough to stay in cache, enough for calls to cost little.
Our choice, by measurement."""
CACHE_LINE = 64


def window(fft: int) -> Real:
    """Kaiser-Bessel-derived window, float64 (fft,), fft even.

    w(n)^2 + w(n + fft/2)^2 = 1: the condition of J. P. Princen and A. B. Bradley, IEEE Trans.
    Acoust. Speech Signal Process. 34 (1986) 1153; running sums of a Kaiser window fulfil it (both
    from memory, the tests check the sum). Of a steady tone at most 6e-8 of the power falls eight
    bins or more to one side, 7.1e-4 three or more: three bins inside a band it reads 0.006 dB low
    at most.
    """
    half = fft // 2
    sums = np.cumsum(np.kaiser(half + 1, np.pi * KAISER_ALPHA))
    rise = np.sqrt(sums[:half] / sums[-1])
    return np.concatenate([rise, rise[::-1]])


def aligned(count: int, dtype: type[np.generic]) -> NDArray[Any]:
    """An array that begins with a line of the processor's cache, so that no wide load straddles."""
    size = count * np.dtype(dtype).itemsize
    room = np.empty(size + CACHE_LINE, np.uint8)
    start = -room.ctypes.data % CACHE_LINE
    return room[start : start + size].view(dtype)


@dataclass(frozen=True, slots=True)
class SegmentSums:
    """What adds up from segment to segment: squares of the transform's lines.

    runs: float64 (runs,), over each run of bins. peak: float64 (b,), the strongest segment's used
    bins. near: complex128 (2 NEAR_BINS + 1,), sums of the lines round the centre.
    """

    runs: Real
    peak: Real
    near: Complex
    count: int = 0

    @classmethod
    def nothing(cls, bins: BandBins) -> Self:
        """No segment yet."""
        runs, bands = bins.used.shape
        near = np.zeros(2 * NEAR_BINS + 1, np.complex128)
        return cls(np.zeros(runs), np.full(bands, -np.inf), near)

    def plus(self, other: SegmentSums) -> SegmentSums:
        """Both together."""
        return SegmentSums(
            self.runs + other.runs,
            np.maximum(self.peak, other.peak),
            self.near + other.near,
            self.count + other.count,
        )


class Segments:
    """Transforms a buffer of its own: samples are put into values, then sums() is asked for.

    values: float32 (2 * blocks * hop + 2 * hop,), interleaved I and Q of blocks segments.
    """

    def __init__(self, fft: int, blocks: int, bins: BandBins) -> None:
        self.hop = fft // 2
        self._bins = bins
        self._batch = max(1, BATCH_SAMPLES // self.hop)
        self._near = slice(self.hop - NEAR_BINS, self.hop + NEAR_BINS + 1)
        # alternating signs put the centre frequency in the middle of the spectrum
        signed = window(fft) * (-1.0) ** np.arange(fft)
        self._window: Real = aligned(2 * fft, np.float64)
        self._window[:] = np.repeat(signed, 2)
        self._offset_lines: Complex = np.fft.fft(signed)[self._near]
        # room made once: fresh memory would cost more than the sums
        self.values: NDArray[np.float32] = aligned(2 * (blocks + 1) * self.hop, np.float32)
        self._segments = np.lib.stride_tricks.sliding_window_view(self.values, 2 * fft)[::fft]
        self._spectra: Complex = aligned(self._batch * fft, np.complex128).reshape(-1, fft)
        self._parts: Real = self._spectra.view(np.float64)
        self._energy: Real = np.empty((blocks, len(bins.runs)), order="F")
        self._columns = [self._energy[:, column] for column in range(len(bins.runs))]
        self._runs = [slice(2 * run.start, 2 * run.stop) for run in bins.runs]

    def sums(self, count: int) -> SegmentSums:
        """Of the first count segments in values."""
        if not count:
            return SegmentSums.nothing(self._bins)
        energy = self._energy[:count]
        near = np.zeros(2 * NEAR_BINS + 1, np.complex128)
        for first in range(0, count, self._batch):
            past = min(first + self._batch, count)
            spectra, parts = self._spectra[: past - first], self._parts[: past - first]
            # copied, then multiplied in place: numpy is faster at the two than at both in one
            parts[:] = self._segments[first:past]
            parts *= self._window
            np.fft.fft(spectra, axis=1, out=spectra)
            for run, column in zip(self._runs, self._columns):
                part = parts[:, run]
                np.vecdot(part, part, out=column[first:past])
            near += spectra[:, self._near].sum(axis=0)
        peak = (energy @ self._bins.used).max(axis=0)
        return SegmentSums(energy.sum(axis=0), peak, near, count)

    def offset_energy(self, sums: SegmentSums, mean: complex) -> Real:
        """float64 (b,), what a steady mean adds to the used bins: |X|^2 less |X - mean W|^2.

        X: the segments' lines, W: the window's.
        """
        lines = mean * self._offset_lines
        excess = 2.0 * (np.conj(lines) * sums.near).real - sums.count * np.abs(lines) ** 2
        return np.asarray(excess @ self._bins.used_mask[self._near])
