"""The tracked noise floor of a front end beside its calibration, as alarms of the daemon."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from monitor.core import noise_floor
from monitor.core.distributions import Real
from monitor.core.readings import MISSING, DeviceStatus
from monitor.core.rows import BlockRows, Event
from monitor.core.station import Station


class NoiseWatch:
    """Follows closed blocks and floors. raised: keys of the alarms that stand at the start."""

    def __init__(self, here: Station, names: Sequence[str], raised: frozenset[str]) -> None:
        self._here, self._names = here, tuple(names)
        self._state = noise_floor.start(here.channels, raised)

    def look(self, blocks: Sequence[BlockRows], status: DeviceStatus) -> list[Event]:
        """Alarms that began or ended with these blocks; none of a front end without tracking."""
        events: list[Event] = []
        if not status.floors:
            return events
        floor_w = self.floor_w(status)
        for rows in blocks:
            self._state, found = noise_floor.step(
                self._state, rows, floor_w, self._here.chain, self._names
            )
            events += found
        return events

    def floor_w(self, status: DeviceStatus) -> Real:
        """Floor per channel (c,), W at the port, corrected for temperature as readings are; nan
        where it is not known."""
        celsius = status.temperature_c
        tenths = np.array([MISSING if celsius is None else round(celsius * 10)], np.int32)
        found = np.full(self._here.channels, np.nan)
        for channel, count in enumerate(status.floors):
            power_w, _ = self._here.chain.tables[channel].convert(np.array([count], np.int32))
            correction = self._here.corrections[channel]
            factor = 1.0 if correction is None else float(correction.factors(tenths)[0])
            found[channel] = power_w[0] / factor
        return found
