"""From window sums to field, exposure ratios and verdicts: three figures each."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.blocks import BLOCK_NS
from monitor.core.exposure import verdicts
from monitor.core.flags import Flag
from monitor.core.readings import NS_PER_S
from monitor.core.rows import ExposureRows, FieldRows, WindowRows
from monitor.core.station import Station
from monitor.core.uncertainty import standard_db
from monitor.core.windows import Sums

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741


@dataclass(frozen=True, slots=True)
class Powers:
    """Mean power (W, at the port) per channel (p, c): gaps as zero, valid part, gaps at maximum."""

    low: F
    mean: F
    high: F


def powers(sums: Sums, averaging_s: int, here: Station) -> Powers:
    """The three mean powers of windows; mean and high are nan where a channel has no valid part.

    Where readings lay below the range, the low figure counts all of them as nothing at all.
    """
    whole_ns = averaging_s * NS_PER_S
    below = (sums.flags & int(Flag.BELOW_RANGE)) != 0
    # a block more: inside a block the valid time is only known to be at least this
    floor_w_ns = np.where(below, (sums.covered_ns + BLOCK_NS) * here.floor_w, 0.0)
    low = np.maximum(sums.energy_low - floor_w_ns, 0.0)
    bare = sums.mean_ns == 0
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = sums.energy_w_ns / sums.mean_ns
    missing = np.maximum(whole_ns - sums.covered_ns, 0)
    high = (sums.energy_high + missing * sums.max_w) / whole_ns
    return Powers(low / whole_ns, mean, np.where(bare, np.nan, high))


def over_channels(power_w: F, per_watt: F) -> F:
    """Sum over channels (p,) in a fixed order, so that any batch gives the same bits."""
    total: F = power_w[:, 0] * per_watt[0]
    for channel in range(1, power_w.shape[1]):
        total = total + power_w[:, channel] * per_watt[channel]
    return total


def valid_share(sums: Sums, averaging_s: int) -> F:
    """Share of the window with valid data in every channel: that of the poorest channel."""
    share: F = sums.covered_ns.min(axis=1) / float(averaging_s * NS_PER_S)
    return share


def window_flags(sums: Sums, averaging_s: int) -> I:
    """Flags of any channel in the window, and gap where a part is not valid."""
    bits: I = np.bitwise_or.reduce(sums.flags, axis=1)
    gap = sums.covered_ns.min(axis=1) < averaging_s * NS_PER_S
    return np.where(gap, bits | int(Flag.GAP), bits)


def windows(sums: Sums, averaging_s: int) -> WindowRows:
    """Window rows, channel after channel for each end."""
    points, channels = sums.energy_w_ns.shape
    bare = (sums.covered_ns == 0).ravel()
    return WindowRows(
        np.repeat(sums.end_ns, channels),
        np.full(points * channels, averaging_s, np.int64),
        np.tile(np.arange(channels), points),
        sums.energy_w_ns.ravel(),
        sums.covered_ns.ravel(),
        sums.observed_ns.ravel(),
        np.where(bare, np.nan, sums.max_w.ravel()),
        sums.flags.ravel(),
    )


def shares(power: Powers, per_watt: F) -> F:
    """Each channel's part (p, c) of the sum; of what is known where a channel has no valid part."""
    dead = np.any(np.isnan(power.mean), axis=1)
    parts = np.where(np.repeat(dead[:, None], power.mean.shape[1], axis=1), power.low, power.mean)
    parts = parts * per_watt
    total = over_channels(parts, np.ones(parts.shape[1]))[:, None]
    with np.errstate(invalid="ignore", divide="ignore"):
        return np.where(total > 0, parts / total, 1.0 / parts.shape[1])


def fields(sums: Sums, averaging_s: int, here: Station) -> FieldRows:
    """Field rows: E squared summed over the channels.

    Over its band a channel's E squared per watt is a range: the lower figure takes its smallest,
    the upper its largest, the mean the middle in dB. e2_max adds the channels' largest readings,
    by the middle too; they may not have come together.
    """
    power = powers(sums, averaging_s, here)
    low = np.array([k.min() for k in here.chain.k])
    high = np.array([k.max() for k in here.chain.k])
    mid = here.chain.k_mid
    mean = over_channels(power.mean, mid)
    whole_ns = averaging_s * NS_PER_S
    return FieldRows(
        sums.end_ns,
        np.full(sums.end_ns.size, averaging_s, np.int64),
        over_channels(power.low, low),
        mean,
        over_channels(power.high, high),
        np.where(np.isnan(mean), np.nan, over_channels(sums.max_w, mid)),
        standard_db(here.chain.contributions, shares(power, mid)) * here.k,
        np.full(sums.end_ns.size, here.k),
        valid_share(sums, averaging_s),
        sums.observed_ns.min(axis=1) / float(whole_ns),
        window_flags(sums, averaging_s),
    )


def verdict_flags(sums: Sums, averaging_s: int) -> I:
    """Flags that bear on a verdict. The low figure has left readings below the range out, so they
    do not forbid "exceeds"."""
    return window_flags(sums, averaging_s) & ~int(Flag.BELOW_RANGE)


def exposures(sums: Sums, averaging_s: int, here: Station) -> ExposureRows:
    """Ratios and verdicts of every scope that has this averaging time, scope after scope.

    A channel cannot tell where in its band the signal lies: the low ratio assumes the smallest
    response over limit, the mean and the high one the largest.
    """
    power = powers(sums, averaging_s, here)
    share, bits = valid_share(sums, averaging_s), verdict_flags(sums, averaging_s)
    columns: list[tuple[I, I, F, F, F, F, I]] = []
    for index, scope in enumerate(here.scopes):
        if round(scope.averaging_s) != averaging_s:
            continue
        most = here.coefficients[:, index]
        low = over_channels(power.low, here.least[:, index])
        mean, high = over_channels(power.mean, most), over_channels(power.high, most)
        u_db = standard_db(here.budget, shares(power, most))
        decided = verdicts(
            low,
            mean,
            high,
            u_db,
            here.k_ratio,
            share,
            bits,
            verified=scope.verified,
            field_region=here.field_region,
            outside_excluded=here.outside_excluded,
            lowest_hz=here.lowest_hz,
        )
        scope_index = np.full(low.size, index, np.int64)
        expanded_db = u_db * here.k_ratio
        columns.append(
            (sums.end_ns, scope_index, low, mean, high, expanded_db, decided.astype(np.int64))
        )
    if not columns:
        none, nothing = np.empty(0, np.int64), np.empty(0)
        return ExposureRows(none, none, nothing, nothing, nothing, nothing, none)
    return ExposureRows(*(np.concatenate(column) for column in zip(*columns)))
