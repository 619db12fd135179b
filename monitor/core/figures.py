"""From window sums to field, exposure ratios and verdicts: three figures each."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.blocks import BLOCK_NS
from monitor.core.budget import Budget
from monitor.core.exposure import verdicts
from monitor.core.flags import Flag
from monitor.core.interval import DETECTION, interval
from monitor.core.readings import NS_PER_S
from monitor.core.rows import ExposureRows, FieldRows, WindowRows
from monitor.core.scatter import of_mean
from monitor.core.station import Station
from monitor.core.uncertainty import standard_db
from monitor.core.windows import Sums

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741
B = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Powers:
    """Mean power (W, at the port) per channel (p, c): gaps as zero, valid part, gaps at maximum.

    The detector's own noise is taken off; what is left may be negative, and stays so in sums.
    unsure: standard uncertainty of each channel's zero, W (p, c); scatter: that of the mean, and of
    it noise_scatter, what the noise has by itself, if it varies no less than the signal.
    overloaded (p,): some channel was above its range, so nothing bounds the field from above.
    """

    low: F
    mean: F
    high: F
    unsure: F
    scatter: F
    noise_scatter: F
    overloaded: B


def powers(sums: Sums, averaging_s: int, here: Station) -> Powers:
    """The three mean powers of windows; mean and high are nan where a channel has no valid part.

    Readings off the weak end of the detector's curve count as nothing at all in the low figure.
    """
    whole_ns, chain = averaging_s * NS_PER_S, here.chain
    below = (sums.flags & int(Flag.BELOW_RANGE)) != 0
    # a block more: inside a block the valid time is only known to be at least this
    floor_w_ns = np.where(below, (sums.covered_ns + BLOCK_NS) * here.floor_w, 0.0)
    low = np.maximum(sums.energy_low - floor_w_ns, 0.0) - sums.covered_ns * chain.noise_w
    bare = sums.mean_ns == 0
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = sums.energy_w_ns / sums.mean_ns
        of_noise = np.where(mean > chain.noise_w, chain.noise_w / mean, 1.0)
    missing = np.maximum(whole_ns - sums.covered_ns, 0)
    high = (sums.energy_high + missing * sums.max_w) / whole_ns
    scatter = of_mean(sums, chain.integration_s, chain.bursty)
    return Powers(
        low / whole_ns,
        mean - chain.noise_w,
        np.where(bare, np.nan, high - chain.noise_w),
        _unsure(mean, sums.min_w, here),
        scatter,
        scatter * of_noise * (chain.noise_w > 0.0),
        overloaded(sums),
    )


def overloaded(sums: Sums) -> B:
    """Whether a window (p,) holds readings above the range: then only a lower bound is known."""
    bits = int(Flag.ABOVE_RANGE | Flag.CLIPPED)
    found: B = np.bitwise_or.reduce(sums.flags & bits, axis=1) != 0
    return found


def _unsure(mean_w: F, min_w: F, here: Station) -> F:
    """Of the noise taken off, and of what is below the range: it lies anywhere from 0 to there.

    That is a mean below it. Where no noise is known it is single readings, too: for how much of the
    time they were so weak is not known, and in pauses of the signal they may stand for nothing.
    """
    chain = here.chain
    weakest = np.where(chain.noise_w > 0.0, mean_w, np.minimum(mean_w, min_w))
    under = np.where(weakest < chain.least_w, np.maximum(chain.least_w - chain.noise_w, 0.0), 0.0)
    return np.hypot(chain.noise_u_w, under / math.sqrt(3.0))


@dataclass(frozen=True, slots=True)
class Totals:
    """Sums over the channels (p,), each power times a weight, and what is unsure about them.

    below: the mean is below its own detection limit; low is then 0, mean and high the bound.
    added: standard uncertainty of what adds.
    """

    low: F
    mean: F
    high: F
    added: F
    u_db: F
    below: NDArray[np.bool_]


def totals(
    power: Powers, weights: tuple[F, F, F], budget: Budget, k: float, below: B | None = None
) -> Totals:
    """weights: (c,) each, for the low, the mean and the high figure. k: coverage factor.

    Errors of the zero, and of what sampling misses of signals that all axes receive, add linearly.
    below: as found before by other weights; None to judge it here.
    """
    low, mean = over_channels(power.low, weights[0]), over_channels(power.mean, weights[1])
    high = over_channels(power.high, weights[2])
    unsure = over_channels(power.unsure, weights[1])
    added = np.hypot(unsure, over_channels(power.scatter, weights[1]))
    u_db = standard_db(budget, shares(power, weights[1]))
    limit = DETECTION * np.hypot(unsure, over_channels(power.noise_scatter, weights[1]))
    if below is None:
        below = (mean < limit) & ~power.overloaded
    top = interval(0.0, np.maximum(high, limit), k * u_db, k * added).high
    return Totals(
        np.where(below, 0.0, np.maximum(low, 0.0)),
        np.where(below, top, np.maximum(mean, 0.0)),
        np.where(below, top, np.maximum(high, 0.0)),
        added,
        u_db,
        below,
    )


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


def seen_share(sums: Sums, averaging_s: int) -> F:
    """Share of the window with valid data in the channel that has most of it."""
    share: F = sums.covered_ns.max(axis=1) / float(averaging_s * NS_PER_S)
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
    parts = np.maximum(parts, 0.0) * per_watt
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
    mid, points = here.chain.k_mid, sums.end_ns.size
    found = field_totals(power, here)
    most = over_channels(np.maximum(sums.max_w - here.chain.noise_w, 0.0), mid)
    return FieldRows(
        sums.end_ns,
        np.full(points, averaging_s, np.int64),
        found.low,
        found.mean,
        found.high,
        np.where(np.isnan(found.mean), np.nan, most),
        found.u_db * here.k,
        np.full(points, here.k),
        valid_share(sums, averaging_s),
        sums.observed_ns.min(axis=1) / float(averaging_s * NS_PER_S),
        _marked(sums, averaging_s, found.below),
        found.added * here.k,
    )


def field_totals(power: Powers, here: Station) -> Totals:
    """E squared of windows, and whether it is below its detection limit."""
    low = np.array([k.min() for k in here.chain.k])
    high = np.array([k.max() for k in here.chain.k])
    return totals(power, (low, here.chain.k_mid, high), here.chain.contributions, here.k)


def _marked(sums: Sums, averaging_s: int, below: B) -> I:
    """Flags of the window; below the range is the reported average, never a single reading."""
    bits = window_flags(sums, averaging_s) & ~int(Flag.BELOW_RANGE)
    return np.where(below, bits | int(Flag.BELOW_RANGE), bits)


def field_flags(sums: Sums, averaging_s: int, here: Station) -> I:
    """Flags of the field of windows (p,), the detection limit among them."""
    below = field_totals(powers(sums, averaging_s, here), here).below
    return _marked(sums, averaging_s, below)


def exposures(sums: Sums, averaging_s: int, here: Station) -> ExposureRows:
    """Ratios and verdicts of every scope that has this averaging time, scope after scope.

    A channel cannot tell where in its band the signal lies: the low ratio assumes the smallest
    response over limit, the mean and the high one the largest.
    """
    power = powers(sums, averaging_s, here)
    below = field_totals(power, here).below
    share, bits = valid_share(sums, averaging_s), _marked(sums, averaging_s, below)
    k = here.k_ratio
    columns: list[tuple[I, I, F, F, F, F, I, F]] = []
    for index, scope in enumerate(here.scopes):
        if round(scope.averaging_s) != averaging_s:
            continue
        most = here.coefficients[:, index]
        found = totals(power, (here.least[:, index], most, most), here.budget, k, below)
        decided = verdicts(
            found.low,
            found.mean,
            found.high,
            found.u_db,
            k,
            share,
            bits,
            verified=scope.verified,
            field_region=here.field_region,
            outside_excluded=here.outside_excluded,
            lowest_hz=here.lowest_hz,
            added=found.added,
            seen_share=seen_share(sums, averaging_s),
        ).astype(np.int64)
        scope_index = np.full(share.size, index, np.int64)
        ratios = (found.low, found.mean, found.high, found.u_db * k)
        columns.append((sums.end_ns, scope_index, *ratios, decided, found.added * k))
    if not columns:
        none, nothing = np.empty(0, np.int64), np.empty(0)
        return ExposureRows(none, none, nothing, nothing, nothing, nothing, none, nothing)
    return ExposureRows(*(np.concatenate(column) for column in zip(*columns)))
