"""The noise floor at one place of the tuner: quiet pieces of spectrum in and beside the bands."""

from __future__ import annotations

from collections import deque
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from hardware.iq_levels import DATATYPE, counts, least_power, spike_hz
from hardware.iq_plan import Tune
from monitor.core.bandpower import Engine
from monitor.core.noise_floor import quiet
from monitor.core.readings import NS_PER_S

CELL_BINS = 16
"""Bins of one piece of spectrum."""
LOOK_SAMPLES = 65_536
LOOK_EVERY_S = 1.0
"""So often so many samples are looked at: 3 % of the work at 2.4 million a second (our choice)."""
LOOKS, LEAST_LOOKS = 60, 30
"""The floor is that of so many looks; before the least nothing is said."""
TELL_S = 10.0
FLAT = 0.4
"""Further from the centre, in shares of the rate, a receiver's filter falls (IQ.md)."""
BESIDE = 0.5
LEAST_BESIDE = 8
"""So much is looked at to either side of a band: in widths of it, and in pieces at least."""


class Floor:
    """Looks at a stream now and then. bands: (low, high) in Hz from the centre; most samples of a
    look: as many as come without a pause."""

    def __init__(
        self, rate_hz: float, bands: Sequence[tuple[float, float]], fft: int, most: int
    ) -> None:
        cell_hz = CELL_BINS * rate_hz / fft
        reach_hz = max([FLAT * rate_hz, *(abs(edge) for band in bands for edge in band)])
        self._owners: list[NDArray[np.intp]] = []
        cells: list[tuple[float, float]] = []
        for low, high in bands:
            more = max(BESIDE * (high - low), LEAST_BESIDE * cell_hz)
            first = max(low - more, -reach_hz)
            n = int((min(high + more, reach_hz) - first) / cell_hz)
            own = [(first + i * cell_hz, first + (i + 1) * cell_hz) for i in range(n)]
            spike = spike_hz(rate_hz, fft)
            own = [cell for cell in own if cell[1] <= -spike or cell[0] > spike]
            self._owners.append(np.arange(len(cells), len(cells) + len(own)))
            cells += own
        self._cells = len(cells)
        self._widths = np.array([high - low for low, high in bands]) / cell_hz
        half = fft // 2
        self._least = least_power(rate_hz, bands)
        self._need = min(LOOK_SAMPLES, most) // half * half
        self._engine = Engine(rate_hz, cells, datatype=DATATYPE, fft=fft) if cells else None
        self._independent = CELL_BINS * self._need / fft
        self._looks: deque[NDArray[np.float64]] = deque(maxlen=LOOKS)
        self._have = 0
        self._due_ns = 0

    def offer(self, raw: memoryview, at_ns: int) -> None:
        """Samples that were taken at at_ns (boot time), whole; they follow those of a begun look
        unless leave() was called."""
        if self._engine is None or (self._have == 0 and at_ns < self._due_ns):
            return
        n = min(len(raw) // 2, self._need - self._have)
        self._engine.add(raw[: 2 * n])
        self._have += n
        if self._have == self._need:
            self._looks.append(self._engine.result().power)
            self._due_ns = at_ns + round(LOOK_EVERY_S * NS_PER_S)
            self.leave()

    def leave(self) -> None:
        """What comes does not follow what came."""
        if self._engine is not None and self._have:
            self._engine.reset(continues=False)
        self._have = 0

    def powers(self) -> NDArray[np.float64]:
        """Noise in each band (b,), 1.0 = 0 dBFS; nan before LEAST_LOOKS and where nothing is
        quiet to look at."""
        found = np.full(len(self._owners), np.nan)
        if len(self._looks) < LEAST_LOOKS:
            return found
        cells = quiet(np.array(self._looks), self._independent)
        for band, own in enumerate(self._owners):
            if own.size:
                found[band] = cells[own].min() * self._widths[band]
        return np.asarray(np.maximum(found, self._least))  # nan stays nan


class Floors:
    """The floor of every channel over all places of the tuner."""

    def __init__(self, rate_hz: float, tunes: Sequence[Tune], fft: int, most: int) -> None:
        self._tunes = tunes
        self._places = [Floor(rate_hz, tune.bands, fft, most) for tune in tunes]
        self._told: tuple[int, ...] = ()
        self._told_ns: int | None = None

    def offer(self, place: int, raw: memoryview, at_ns: int) -> None:
        """See Floor.offer; place: index among the tunes."""
        self._places[place].offer(raw, at_ns)

    def leave(self) -> None:
        """What comes does not follow what came."""
        for place in self._places:
            place.leave()

    def counts(self, channels: int, now_ns: int) -> tuple[int, ...]:
        """milli-dBFS per channel, MISSING where it is not known; anew every TELL_S."""
        if self._told_ns is None or now_ns - self._told_ns >= TELL_S * NS_PER_S:
            sums = np.zeros(channels)
            for tune, place in zip(self._tunes, self._places):
                for part, power in zip(tune.parts, place.powers()):
                    sums[part.channel] += power
            self._told = tuple(int(count) for count in counts(sums))
            self._told_ns = now_ns
        return self._told
