"""Propagation of distributions by drawing (JCGM 101:2008): the twin of the analytic budget."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from monitor.core.budget import Budget, independent
from monitor.core.distributions import CONFIDENCE, Real, draw

FEWEST_DRAWS = 1_000
MOST_DRAWS = 10_000_000
_AT_ONCE = 200_000


@dataclass(frozen=True, slots=True)
class Spread:
    """What the draws show, dB: mean and deviation of the error, and its intervals for 95 %.

    expanded_db: half width of the interval that is symmetric about no error, as a figure is shown.
    shortest_db: the shortest interval (JCGM 101, 5.3.4).
    """

    draws: int
    mean_db: float
    deviation_db: float
    expanded_db: float
    shortest_db: tuple[float, float]


def errors_db(budget: Budget, shares: Real, draws: int, seed: int) -> Real:
    """Errors (draws,) of a sum of powers, dB: each channel off by its own, then added as powers.

    shares: (c,), the channels' true parts of the sum. The same seed gives the same errors.
    """
    rng = np.random.default_rng(seed)
    lines = independent(budget)
    out = np.empty(draws)
    for start in range(0, draws, _AT_ONCE):
        size = min(_AT_ONCE, draws - start)
        per_channel = np.zeros((size, len(budget)))
        for line in lines:
            drawn = draw(line.shape, size, line.degrees_of_freedom, rng)
            per_channel += drawn[:, None] * line.effects
        power = 10.0 ** (per_channel / 10.0) @ shares
        out[start : start + size] = 10.0 * np.log10(power / shares.sum())
    return out


def spread(errors: Real, confidence: float = CONFIDENCE) -> Spread:
    """Summary of errors (n,) in dB."""
    ordered = np.sort(errors)
    inside = round(confidence * ordered.size)
    widths = ordered[inside:] - ordered[: ordered.size - inside]
    at = int(np.argmin(widths))
    return Spread(
        ordered.size,
        float(ordered.mean()),
        float(ordered.std()),
        float(np.quantile(np.abs(ordered), confidence)),
        (float(ordered[at]), float(ordered[at + inside])),
    )
