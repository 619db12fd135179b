"""Where a receiver must be tuned to see every band: one place for all, or one after the other."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from monitor.core.errors import ConfigError

_TRIED = 32
Bands = Sequence[tuple[float, float]]


@dataclass(frozen=True, slots=True)
class Part:
    """A band, or a slice of it, at one place of the tuner: low, high in Hz from the centre."""

    channel: int
    low_hz: float
    high_hz: float


@dataclass(frozen=True, slots=True)
class Tune:
    """One place of the tuner and what is seen there. spurs: (low, high) in Hz from the centre of
    lines that the receiver makes itself."""

    centre_hz: int
    parts: tuple[Part, ...]
    spurs: tuple[tuple[float, float], ...] = ()

    @property
    def bands(self) -> tuple[tuple[float, float], ...]:
        """Of each part, Hz from the centre."""
        return tuple((part.low_hz, part.high_hz) for part in self.parts)


def tunes(bands: Bands, span_hz: float, spike_hz: float) -> tuple[Tune, ...]:
    """The places that show every band (low, high; Hz on the air). span_hz: what one place shows.

    A band wider than that is divided into equal slices, whose powers add. The centre, with its
    spike of so many Hz to either side, is put where no band is, if there is such a place, else
    away from the middle of every band: what lies under it is not seen, and carriers like middles.
    """
    span_hz -= 4 * spike_hz  # so that there always is a place two spikes off the middle
    slices: list[tuple[float, float, int]] = []
    for channel, (low, high) in enumerate(bands):
        n = math.ceil((high - low) / span_hz)
        edges = [low + (high - low) * i / n for i in range(n)] + [high]
        slices += [(a, b, channel) for a, b in zip(edges, edges[1:])]
    groups: list[list[tuple[float, float, int]]] = []
    for one in sorted(slices):
        # half a hertz to either side is lost to the whole hertz of a centre
        if groups and max(one[1], *(b for _, b, _ in groups[-1])) - groups[-1][0][0] < span_hz - 1:
            groups[-1].append(one)
        else:
            groups.append([one])
    return tuple(_tune(group, _centre(group, span_hz + 4 * spike_hz, spike_hz)) for group in groups)


def fixed_tune(bands: Bands, centre_hz: int, span_hz: float) -> tuple[Tune, ...]:
    """The one place that somebody chose; ConfigError for the first band that it does not show."""
    for low, high in bands:
        if low < centre_hz - span_hz / 2 or high > centre_hz + span_hz / 2:
            raise ConfigError(
                f"band {low / 1e6:.10g} to {high / 1e6:.10g} MHz is outside the span of "
                f"{span_hz / 1e6:.4g} MHz round {centre_hz / 1e6:.10g} MHz; leave centre_hz out"
            )
    return (_tune([(low, high, i) for i, (low, high) in enumerate(bands)], centre_hz),)


def _centre(group: Sequence[tuple[float, float, int]], span_hz: float, spike_hz: float) -> int:
    low, high = group[0][0], max(b for _, b, _ in group)
    first, last = math.ceil(high - span_hz / 2), math.floor(low + span_hz / 2)
    gaps = [round((a[1] + b[0]) / 2) for a, b in zip(group, group[1:])]
    for place in (*gaps, first, last):
        clear = all(place + spike_hz <= a or place - spike_hz >= b for a, b, _ in group)
        if clear and first <= place <= last:
            return place
    places = [first + (last - first) * i // _TRIED for i in range(_TRIED + 1)]
    return max(places, key=lambda place: min(abs(place - (a + b) / 2) for a, b, _ in group))


def _tune(group: Sequence[tuple[float, float, int]], centre_hz: int) -> Tune:
    parts = (Part(i, low - centre_hz, high - centre_hz) for low, high, i in group)
    return Tune(centre_hz, tuple(parts))
