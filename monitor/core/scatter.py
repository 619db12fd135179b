"""What sampling misses of a varying signal: standard uncertainty of a window's mean power.

From neighbouring blocks' means: half their mean squared difference is the variance of one block's
mean (von Neumann 1941, from memory), whatever goes on within blocks, correlated or not; a slow
change of the field itself, which the readings follow, hardly enters. Averaging reduces this part of
the uncertainty and no other.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from monitor.core.distributions import NORMAL_K
from monitor.core.readings import NS_PER_S
from monitor.core.windows import BATCHES, Sums

Real = NDArray[np.float64]

FEWEST_PAIRS = 2
"""With fewer a spread says nothing; the mean then lies anywhere from 0 to the maximum."""
WORTH = 2.0 / 3.0
"""Degrees of freedom for each pair: pairs share blocks (from memory, for normal errors)."""


def of_mean(sums: Sums, integration_s: float, bursty: NDArray[np.bool_]) -> Real:
    """(p, c), W. integration_s: time over which each reading is a mean of power itself; readings
    that leave no time between them miss nothing. bursty (c,): see Chain; there what stays high or
    low for many blocks may be the readings keeping step with the signal, and counts as doubt."""
    spread_w = _skewed(sums, np.where(bursty, _of_batches(sums), _of_pairs(sums)))
    with np.errstate(divide="ignore", invalid="ignore"):
        # by the channel with most valid time: n counts readings that are none on another one, too
        covered_ns = sums.covered_ns.max(axis=1, keepdims=True)
        spacing_s = covered_ns / NS_PER_S / np.maximum(sums.n, 1)
        missed = np.clip(1.0 - integration_s / spacing_s, 0.0, 1.0)
    u_w = np.where(sums.pairs < FEWEST_PAIRS, sums.max_w / math.sqrt(3.0), spread_w)
    return np.where(sums.covered_ns > 0, u_w * np.sqrt(missed), 0.0)


def _of_pairs(sums: Sums) -> Real:
    """By neighbouring blocks."""
    pairs = sums.pairs.astype(np.float64)
    with np.errstate(divide="ignore", invalid="ignore"):
        variance = sums.turns_w2 / (2.0 * pairs * (pairs + 1.0))
        degrees = np.minimum(WORTH * pairs, _events(sums))
        return np.asarray(np.sqrt(variance) * student_ratio(degrees))


def _of_batches(sums: Sums) -> Real:
    """By overlapping batches of a quarter of the window (Meketon and Schmeiser 1984, from memory).

    The mean of m batches of b blocks out of n = m + b - 1: variance b / (n - b) / m times the sum
    of squares, about 1.5 n / b degrees of freedom.
    """
    with np.errstate(divide="ignore", invalid="ignore"):
        m = sums.batches.astype(np.float64)
        b = (m - 1.0) / (BATCHES - 1.0)
        variance = sums.batch_w2 / m * b / (m - 1.0)
        degrees = np.minimum(1.5 * BATCHES, _events(sums))
        return np.asarray(np.sqrt(variance) * student_ratio(degrees))


def _events(sums: Sums) -> Real:
    """Degrees of freedom where few strong readings make up the mean: as many as they would be, were
    each as strong as the strongest (our choice; held by drawing). Two at the least, where
    student_ratio ends."""
    with np.errstate(divide="ignore", invalid="ignore"):
        strongest = sums.max_w * sums.mean_ns / np.maximum(sums.n, 1)
        return np.asarray(np.maximum(sums.energy_w_ns / strongest, 2.0))


def _skewed(sums: Sums, u_w: Real) -> Real:
    """For a power cannot be below zero: half as wide as the interval of a lognormal law of the same
    relative u, mean times sinh(k r) / k. Not beyond a mean anywhere up to the maximum, unless u is.
    """
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        mean_w = sums.energy_w_ns / sums.mean_ns
        wide_w = mean_w * np.sinh(NORMAL_K * u_w / mean_w) / NORMAL_K
    most_w = np.maximum(u_w, sums.max_w / math.sqrt(3.0))
    return np.where(u_w > 0.0, np.minimum(wide_w, most_w), u_w)


def student_ratio(degrees_of_freedom: Real) -> Real:
    """Student's t over the normal factor, both for 95 %: a spread from few values is too small too
    often (GUM G.3.2). By Abramowitz and Stegun 26.7.5, from memory; 3 % low at 2 degrees."""
    z, v = NORMAL_K, degrees_of_freedom
    first = (z**2 + 1.0) / 4.0
    second = (5.0 * z**4 + 16.0 * z**2 + 3.0) / 96.0
    third = (3.0 * z**6 + 19.0 * z**4 + 17.0 * z**2 - 15.0) / 384.0
    ratio: Real = 1.0 + first / v + second / v**2 + third / v**3
    return ratio
