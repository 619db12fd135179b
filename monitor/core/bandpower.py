"""Live band powers of a stream of raw I/Q bytes: exact in mean square, bursts weighted evenly."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.bandbins import band_bins, fit_bins
from monitor.core.errors import ConfigError
from monitor.core.segments import Segments, SegmentSums, aligned
from monitor.core.spectrum import MAX_FFT, bytes_per_sample, datatype_of

Real = NDArray[np.float64]

MIN_FFT = 32
BLOCK_SAMPLES = 65_536
"""New samples worked on at once. Our choice, by measurement."""


@dataclass(frozen=True, slots=True)
class BandFigures:
    """Linear powers, 1.0 = 0 dBFS, a mean of |z| squared of 1; nan where nothing was seen.

    power: float64 (b,), mean square in each band: offset (mean) removed, quantisation noise taken
    off, bins left out made good; never below 0. raw_power: float64 (b,), all bins of the band
    without any correction. peak: float64 (b,), the strongest segment, bins left out made good but
    offset and quantisation noise still in it. crest_db: strongest sample over total_power, dB.
    clipped: components at a rail, of components. mean: the offset. total_power: time domain,
    every sample, uncorrected. usable_share: float64 (b,), share of the band's bins that are used.
    """

    power: Real
    raw_power: Real
    peak: Real
    crest_db: float
    clipped: int
    components: int
    mean: complex
    total_power: float
    samples: int
    segments: int
    usable_share: Real


@dataclass(frozen=True, slots=True)
class _Sums:
    """What adds up from block to block, in units of the stored codes."""

    spectral: SegmentSums
    samples: int = 0
    energy: float = 0.0
    top: float = 0.0
    sum: complex = 0j
    clipped: int = 0

    def plus(self, other: _Sums) -> _Sums:
        return _Sums(
            self.spectral.plus(other.spectral),
            self.samples + other.samples,
            self.energy + other.energy,
            max(self.top, other.top),
            self.sum + other.sum,
            self.clipped + other.clipped,
        )


class Engine:
    """Adds up a stream of bytes; the result does not depend on how the stream is cut.

    rate_hz: complex samples a second. bands: (low, high) in Hz from the centre; whole bins with
    low <= f < high. datatype: as in spectrum.DATATYPES. fft: segment length, even. excluded_hz:
    half width round the centre that is left out, 0 for nothing. edge_share: share of the span left
    out at each end. excluded: (low, high) in Hz from the centre, left out too. What is left out of
    a band is made good by the band's other bins, as if the spectrum were flat inside the band.
    ConfigError for what cannot be measured.

    Method: averaged spectra (P. D. Welch, IEEE Trans. Audio Electroacoust. 15 (1967) 70) of
    half-overlapping segments under a window whose shifted squares add up to 1, so that every
    sample of a stream weighs alike, but for the first and the last fft / 2, which lie on one slope
    only. A segment belongs to the interval in which it ends; intervals of whole fft / 2 weigh
    exactly alike, others within one segment of their number. Quantisation noise is taken as white
    and 1/6 of a code squared (I and Q, 1/12 each): not so for signals below about one code.
    """

    def __init__(
        self,
        rate_hz: float,
        bands: Sequence[tuple[float, float]],
        *,
        datatype: str,
        fft: int = 1024,
        excluded_hz: float = 0.0,
        edge_share: float = 0.0,
        excluded: Sequence[tuple[float, float]] = (),
    ) -> None:
        if not MIN_FFT <= fft <= MAX_FFT or fft % 2:
            raise ConfigError(f"fft {fft}: must be even and from {MIN_FFT} to {MAX_FFT}")
        if not rate_hz > 0.0:
            raise ConfigError(f"rate {rate_hz:g} Hz: must be above 0")
        self._layout = datatype_of(datatype)
        self._bytes = bytes_per_sample(datatype)
        self._fft, self._hop = fft, fft // 2
        fit = fit_bins(rate_hz, fft, excluded_hz, edge_share, excluded)
        self._bins = band_bins(rate_hz, bands, fft, fit)
        blocks = max(1, BLOCK_SAMPLES // self._hop)
        self._step = blocks * self._hop
        self._segments = Segments(fft, blocks, self._bins)
        self._squares: NDArray[np.float32] = aligned(self._segments.values.size, np.float32)
        self._powers: NDArray[np.float32] = aligned(self._squares.size // 2, np.float32)
        # raw bytes of one block and the segment that reaches over its end; filled, then used again
        self._raw: NDArray[np.uint8] = aligned((self._step + self._hop) * self._bytes, np.uint8)
        self._codes = self._raw.view(self._layout.dtype)
        self._filled = 0
        self._counted = 0  # samples at the head that the time domain has seen already
        self._sums = self._nothing()

    def _nothing(self) -> _Sums:
        return _Sums(SegmentSums.nothing(self._bins))

    def add(self, raw: bytes | bytearray | memoryview) -> None:
        """Take bytes that follow those already added; part of a sample waits for its rest."""
        given = np.frombuffer(raw, np.uint8)
        while given.size:
            taken = given[: self._raw.size - self._filled]
            self._raw[self._filled : self._filled + taken.size] = taken
            self._filled += taken.size
            given = given[taken.size :]
            if self._filled == self._raw.size:
                self._sums = self._sums.plus(self._measure(self._step + self._hop, self._step))
                self._counted = max(0, self._counted - self._step)
                self._drop(self._step)

    def _drop(self, samples: int) -> None:
        """Move what follows these samples to the head."""
        rest = self._raw[samples * self._bytes : self._filled].copy()
        self._raw[: rest.size] = rest
        self._filled = rest.size

    def reset(self, continues: bool = True) -> None:
        """Begin a new interval.

        continues: what comes next follows without a gap, so that segments reach over the interval's
        edge and a burst there weighs as any other. False after lost samples or a retune.
        """
        self._sums = self._nothing()
        if not continues:
            self._filled = self._counted = 0
            return
        waiting = self._filled // self._bytes
        done = self._segments_in(waiting) * self._hop
        self._drop(done)
        self._counted = waiting - done

    def result(self) -> BandFigures:
        """The figures so far; more may be added afterwards."""
        waiting = self._filled // self._bytes
        return self._figures(self._sums.plus(self._measure(waiting, waiting)))

    def _segments_in(self, samples: int) -> int:
        return max(0, samples // self._hop - 1)

    def _measure(self, samples: int, ahead: int) -> _Sums:
        """The samples at the head, of which the first ahead are this block's own."""
        raw = self._codes[: 2 * samples]
        values = self._segments.values[: raw.size]
        values[:] = raw
        values += np.float32(self._layout.offset)
        spectral = self._segments.sums(self._segments_in(samples))
        count = ahead - self._counted
        if count <= 0:
            return _Sums(spectral)
        new = slice(2 * self._counted, 2 * ahead)
        squares = np.square(values[new], out=self._squares[: 2 * count])
        power = np.add(squares[::2], squares[1::2], out=self._powers[:count])
        return _Sums(
            spectral,
            count,
            float(power.sum(dtype=np.float64)),
            float(power.max()),
            complex(values[new].view(np.complex64).sum()),
            self._at_rail(raw[new]),
        )

    def _at_rail(self, raw: NDArray[np.generic]) -> int:
        if self._layout.rails is None:
            return 0
        low, high = self._layout.rails
        if raw.min() > low and raw.max() < high:  # as a rule; cheaper than counting
            return 0
        return int(np.count_nonzero(raw == low) + np.count_nonzero(raw == high))

    def _figures(self, sums: _Sums) -> BandFigures:
        code, bins, nan = 1.0 / self._layout.full_scale, self._bins, float("nan")
        share = bins.used_bins / bins.bins
        mean = sums.sum / sums.samples if sums.samples else complex(nan, nan)
        total = sums.energy / sums.samples if sums.samples else nan
        power = raw = peak = np.full(share.shape, nan)
        if sums.spectral.count:
            # fft / 2 is the sum of the squared window: its noise bandwidth, accounted for exactly
            scale = code**2 / (self._fft * self._hop)
            raw = scale / sums.spectral.count * (sums.spectral.runs @ bins.whole)
            peak = scale * sums.spectral.peak / share
            offset = self._segments.offset_energy(sums.spectral, mean)
            used = scale / sums.spectral.count * (sums.spectral.runs @ bins.used - offset)
            noise = 0.0 if self._layout.rails is None else code**2 / 6 * bins.used_bins / self._fft
            power = np.maximum(used - noise, 0.0) / share
        return BandFigures(
            power=power,
            raw_power=raw,
            peak=peak,
            crest_db=10.0 * float(np.log10(sums.top / total)) if total > 0.0 else nan,
            clipped=sums.clipped,
            components=2 * sums.samples,
            mean=mean * code,
            total_power=total * code**2,
            samples=sums.samples,
            segments=sums.spectral.count,
            usable_share=share,
        )
