"""Which bins of a spectrum belong to a band, and which of them are fit for use.

Bins are counted in order of frequency, the centre frequency at index fft // 2.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import ConfigError

Real = NDArray[np.float64]
Mask = NDArray[np.bool_]


def frequencies_hz(rate_hz: float, fft: int) -> Real:
    """The bins' frequencies from the centre, ascending: float64 (fft,)."""
    return np.fft.fftshift(np.fft.fftfreq(fft, 1.0 / rate_hz))


def band_slices(rate_hz: float, bands: Sequence[tuple[float, float]], fft: int) -> list[slice]:
    """Each band's whole bins, low <= f < high, as a slice of the ascending bins.

    ConfigError for a band that is empty, outside the sampled span or without a bin.
    """
    frequencies = frequencies_hz(rate_hz, fft)
    slices = []
    for low, high in bands:
        where = f"band {low:g}:{high:g} Hz"
        if not low < high:
            raise ConfigError(f"{where}: the low end must be below the high end")
        if low < -rate_hz / 2 or high > rate_hz / 2:
            raise ConfigError(f"{where}: outside the sampled span of +-{rate_hz / 2:g} Hz")
        first, past = (int(i) for i in np.searchsorted(frequencies, (low, high)))
        if first == past:
            raise ConfigError(f"{where}: no bin of {rate_hz / fft:g} Hz in it; use a larger fft")
        slices.append(slice(first, past))
    return slices


@dataclass(frozen=True, slots=True)
class BandBins:
    """Bands cut into runs of bins that no edge divides, so that each bin is summed once.

    runs: disjoint slices. whole, used: float64 (runs, b), 1 where the run is part of the band, and
    where it is fit for use besides. bins, used_bins: float64 (b,). used_mask: bool (fft, b).
    """

    runs: tuple[slice, ...]
    whole: Real
    used: Real
    bins: Real
    used_bins: Real
    used_mask: Mask


def fit_bins(
    rate_hz: float,
    fft: int,
    excluded_hz: float,
    edge_share: float,
    excluded: Sequence[tuple[float, float]] = (),
) -> Mask:
    """bool (fft,): false within excluded_hz of the centre (0: nothing) and at the span's ends.

    edge_share: the share of the span left out at each end. excluded: (low, high) in Hz from the
    centre, ends included, that are left out besides. ConfigError for a share outside 0 <= x < 0.5.
    """
    if not 0.0 <= edge_share < 0.5:
        raise ConfigError(f"edge_share {edge_share:g}: must be at least 0 and below 0.5")
    if not excluded_hz >= 0.0:
        raise ConfigError(f"excluded_hz {excluded_hz:g}: must be at least 0")
    frequencies = frequencies_hz(rate_hz, fft)
    reach_hz = rate_hz * (0.5 - edge_share)
    fit = (frequencies >= -reach_hz) & (frequencies < reach_hz)
    if excluded_hz > 0.0:
        fit &= np.abs(frequencies) > excluded_hz
    for low, high in excluded:
        fit &= (frequencies < low) | (frequencies > high)
    return np.asarray(fit)


def band_bins(
    rate_hz: float, bands: Sequence[tuple[float, float]], fft: int, fit: Mask
) -> BandBins:
    """Cut the bands into runs; ConfigError, besides band_slices', for a band with no fit bin."""
    masks = np.zeros((fft, len(bands)), np.bool_)
    for column, (bins, (low, high)) in enumerate(zip(band_slices(rate_hz, bands, fft), bands)):
        masks[bins, column] = True
        if not np.any(fit[bins]):
            raise ConfigError(
                f"band {low:g}:{high:g} Hz: every bin is left out (centre, end of the span, spurs);"
                " tune elsewhere or leave out less"
            )
    kinds = np.column_stack([masks, fit])
    edges = np.flatnonzero(np.any(kinds[1:] != kinds[:-1], axis=1)) + 1
    starts = np.concatenate([[0], edges])
    ends = np.concatenate([edges, [fft]])
    kept = np.any(masks[starts], axis=1)
    starts, ends = starts[kept], ends[kept]
    used_mask = masks & fit[:, np.newaxis]
    return BandBins(
        runs=tuple(slice(int(a), int(b)) for a, b in zip(starts, ends)),
        whole=masks[starts].astype(np.float64),
        used=used_mask[starts].astype(np.float64),
        bins=masks.sum(axis=0).astype(np.float64),
        used_bins=used_mask.sum(axis=0).astype(np.float64),
        used_mask=used_mask,
    )
