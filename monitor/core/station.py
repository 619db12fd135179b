"""What stays fixed while a station measures: chain, limits, alert levels, times."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.alarms import Watch
from monitor.core.averaging_law import UNDECLARED, Averaging
from monitor.core.budget import Contribution
from monitor.core.calibration import BAND_KIND, Chain, CountTable
from monitor.core.flags import Flag
from monitor.core.limits import Scope
from monitor.core.readings import NS_PER_S
from monitor.core.temperature import Correction, corrections_of
from monitor.core.uncertainty import coverage_factor

F = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Station:
    """All that judging needs to know, fixed while the daemon runs.

    coefficients: f8 (c, s), exposure ratio per W at the port, channel by scope, the largest over
    the band; least: the smallest. budget: the chain's without the response over the band, which
    these two span; k_ratio: its coverage factor. outside_excluded: signals outside the bands are
    kept out by filter or shown by survey to be none. averagings_s:
    every averaging time kept, whole multiples of a block. floor_w: f8 (c,), what a reading below
    the range counts as. lowest_hz: lower end of what the channels receive. corrections: per channel
    what temperature does to its power, or None. look_ns: for how long a reading was really looked
    at, ns; None where for all the time until the next one.
    """

    chain: Chain
    scopes: tuple[Scope, ...]
    coefficients: F
    least: F
    averagings_s: tuple[int, ...]
    watches: tuple[Watch, ...]
    hold_ns: int
    silence_ns: int
    field_region: str
    outside_excluded: bool
    k: float
    budget: tuple[tuple[Contribution, ...], ...]
    k_ratio: float
    floor_w: F
    lowest_hz: float
    corrections: tuple[Correction | None, ...]
    look_ns: int | None = None

    @property
    def batched(self) -> bool:
        """Whether a channel carries bursts: what sampling misses of them may last for blocks."""
        return bool(np.any(self.chain.bursty))

    @property
    def channels(self) -> int:
        """Number of channels."""
        return len(self.chain.tables)


def station(
    chain: Chain,
    scopes: tuple[Scope, ...],
    coefficients: F,
    least: F,
    watches: tuple[Watch, ...],
    *,
    hold_s: float,
    silence_s: float,
    field_region: str,
    outside_excluded: bool,
    averaging: Averaging = UNDECLARED,
) -> Station:
    """A station that keeps 360 s and 1800 s and whatever else its scopes ask for.

    averaging: what its front end declares.
    """
    budget = tuple(
        tuple(line for line in lines if line.kind != BAND_KIND) for lines in chain.contributions
    )
    corrections = corrections_of(chain)
    averagings = {360, 1800, *(round(scope.averaging_s) for scope in scopes)}
    return Station(
        chain,
        scopes,
        coefficients,
        least,
        tuple(sorted(averagings)),
        watches,
        round(hold_s * NS_PER_S),
        round(silence_s * NS_PER_S),
        field_region,
        outside_excluded,
        coverage_factor(chain.contributions),
        budget,
        coverage_factor(budget),
        np.array(
            [_floor_w(table, correction) for table, correction in zip(chain.tables, corrections)]
        ),
        min(float(grid.min()) for grid in chain.frequencies_hz),
        corrections,
        round(averaging.seconds * NS_PER_S) if averaging.sparse else None,
    )


def _floor_w(table: CountTable, correction: Correction | None) -> float:
    """The largest power below the range, at the temperature where it is taken for the most."""
    below = (table.flags & int(Flag.BELOW_RANGE)) != 0
    floor_w = float(np.nanmax(np.where(below, table.power_w, 0.0), initial=0.0))
    return floor_w if correction is None else floor_w / min(1.0, float(correction.factor.min()))
