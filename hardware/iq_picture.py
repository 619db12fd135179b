"""A coarse spectrum of each place of the tuner, for people to look at: no reading is made of it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from random import Random

import numpy as np
from numpy.typing import NDArray

from hardware.iq_plan import Tune
from monitor.core.readings import NS_PER_S

Real = NDArray[np.float64]

FFT = 1024
GROUPS = 256
IN_GROUP = FFT // GROUPS
SPIKE_BINS = 3
LOOKED = 16
"""One sample of so many is looked at: enough for a picture, and cheap (our choice)."""
EVERY_S = 3.0
TENTHS = 10
"""Levels are told in tenths of a dB."""


@dataclass(slots=True)
class _Sums:
    total: Real
    most: Real
    segments: int = 0
    start_ns: int = 0
    end_ns: int = 0


class Picture:
    """Mean and maximum of groups of four lines, Hann window, cu8; a maximum is of 1024 samples."""

    def __init__(self, rate_hz: float, tunes: Sequence[Tune], draws: Random) -> None:
        self._rate_hz, self._tunes, self._draws = rate_hz, tunes, draws
        self._window = np.hanning(FFT + 1)[:FFT]
        # mean square of a line, 1.0 = 0 dBFS: the window's own power and the codes' full scale
        self._scale = 1.0 / (FFT * float(np.square(self._window).sum()) * 127.5**2)
        self._sums = [_begun() for _ in tunes]

    def add(self, place: int, raw: bytes | memoryview, at_ns: int) -> None:
        """Look at some of the samples, from anywhere among them; at_ns: boot time of the first."""
        samples = len(raw) // 2
        if samples < FFT:
            return
        segments = max(1, samples // LOOKED // FFT)
        first = 2 * self._draws.randrange(samples - segments * FFT + 1)
        codes = np.frombuffer(raw, np.uint8)[first : first + 2 * segments * FFT]
        values = (codes.astype(np.float64) - 127.5).view(np.complex128).reshape(segments, FFT)
        lines = np.fft.fftshift(np.fft.fft(values * self._window, axis=1), axes=1)
        groups = np.square(lines.view(np.float64)).reshape(segments, GROUPS, 2 * IN_GROUP).sum(2)
        sums = self._sums[place]
        if not sums.segments:
            sums.start_ns = at_ns
        sums.end_ns = at_ns + round(samples * NS_PER_S / self._rate_hz)
        sums.total += groups.sum(axis=0)
        np.maximum(sums.most, groups.max(axis=0), out=sums.most)
        sums.segments += segments

    def due(self, now_ns: int) -> list[dict[str, object]]:
        """The pictures of places that were looked at for EVERY_S, JSON-ready; begun anew."""
        found: list[dict[str, object]] = []
        for place, sums in enumerate(self._sums):
            if sums.segments and now_ns - sums.start_ns >= EVERY_S * NS_PER_S:
                found.append({"picture": self._told(place, sums)})
                self._sums[place] = _begun()
        return found

    def _told(self, place: int, sums: _Sums) -> dict[str, object]:
        return {
            "place": place,
            "centre_hz": self._tunes[place].centre_hz,
            "rate_hz": self._rate_hz,
            "start_ns": sums.start_ns,
            "end_ns": sums.end_ns,
            "looked_s": sums.segments * FFT / self._rate_hz,
            "piece_s": FFT / self._rate_hz,
            "mean": self._tenths(sums.total / sums.segments),
            "max": self._tenths(sums.most),
        }

    def _tenths(self, groups: Real) -> list[int | None]:
        """Tenths of dBFS; None round the centre, where the receiver's own spike is."""
        levels = 10.0 * np.log10(np.maximum(groups * self._scale, 1e-15))
        found: list[int | None] = [round(TENTHS * float(level)) for level in levels]
        spike = range((FFT // 2 - SPIKE_BINS) // IN_GROUP, (FFT // 2 + SPIKE_BINS) // IN_GROUP + 1)
        for group in spike:
            found[group] = None
        return found


def _begun() -> _Sums:
    return _Sums(np.zeros(GROUPS), np.zeros(GROUPS))
