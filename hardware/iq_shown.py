"""What the daemon has to show of a receiver: the newest coarse spectra, the newest levels."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from hardware.iq_levels import COUNTS_PER_DB
from hardware.iq_levels import counts as counts_of
from monitor.core.quantities import average_power

MOST_READINGS = 10_000
"""Without a spectrum to go with, older readings are forgotten."""

_Reading = tuple[int, int, Sequence[int], int]


class Shown:
    """Gathers readings until a spectrum comes; view may be read from any thread.

    view: "places", the newest spectrum of each place of the tuner as iq_picture.py tells it;
    "readings", their number, the boot times of their begin and end, and of each channel the mean
    power and the strongest reading, in counts, with the flags of all; None before there are any.
    """

    def __init__(self) -> None:
        self._readings: list[_Reading] = []
        self._places: dict[int, Mapping[str, Any]] = {}
        self.view: Mapping[str, Any] = {"places": [], "readings": None}

    def note(self, start_ns: int, end_ns: int, counts: Sequence[int], flags: int) -> None:
        """A reading came, of what was heard from start_ns to end_ns (boot time)."""
        self._readings.append((start_ns, end_ns, counts, flags))
        del self._readings[:-MOST_READINGS]

    def take(self, picture: Mapping[str, Any]) -> None:
        """A spectrum came: what is shown is renewed."""
        self._places[int(picture["place"])] = picture
        readings = self.view["readings"]
        if self._readings:
            readings = _summed(self._readings)
            self._readings = []
        places = [self._places[place] for place in sorted(self._places)]
        self.view = {"places": places, "readings": readings}


def _summed(readings: Sequence[_Reading]) -> dict[str, object]:
    powers = 10.0 ** (np.array([one[2] for one in readings]) / (10.0 * COUNTS_PER_DB))
    return {
        "n": len(readings),
        "start_ns": readings[0][0],
        "end_ns": readings[-1][1],
        "mean": counts_of(average_power(powers)).tolist(),
        "flags": int(np.bitwise_or.reduce([one[3] for one in readings])),
        "max": counts_of(powers.max(axis=0)).tolist(),
    }
