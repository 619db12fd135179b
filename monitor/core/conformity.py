"""How likely it is that a true value keeps a limit (JCGM 106:2012), for a normal error."""

from __future__ import annotations

import math

from monitor.core.errors import ConfigError
from monitor.core.quantities import db_from_power_ratio

_HALVINGS = 64
_FARTHEST = 40.0


def _below(z: float) -> float:
    """Standard normal cumulative distribution; good far out on the low side, too."""
    return 0.5 * math.erfc(-z / math.sqrt(2.0))


def conformance(value: float, u: float, low: float = -math.inf, high: float = math.inf) -> float:
    """Probability that the true value lies within low and high, 0 to 1 (JCGM 106, 7.2 to 7.4).

    value: the best estimate, with the standard uncertainty u, both in the unit of the limits. With
    u = 0: whether it lies within, the limits included. nan where value or u is.
    """
    if math.isnan(value) or math.isnan(u):
        return math.nan
    if u == 0.0:
        return float(low <= value <= high)
    # From the nearer side, so that a small probability is not a difference of two near to 1.
    above, below = (low - value) / u, (high - value) / u
    if above > 0.0:
        return _below(-above) - _below(-below)
    return _below(below) - _below(above)


def multiplier(probability: float) -> float:
    """Standard uncertainties between limit and value for that probability (JCGM 106, table 1).

    Negative below one half. ConfigError unless 0 < probability < 1.
    """
    if not 0.0 < probability < 1.0:
        raise ConfigError(f"probability {probability:g}: must lie between 0 and 1")
    if probability > 0.5:
        return -multiplier(1.0 - probability)
    low, high = -_FARTHEST, 0.0
    for _ in range(_HALVINGS):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if _below(middle) < probability else (low, middle)
    return 0.5 * (low + high)


def acceptance_limit(limit: float, u: float, probability: float) -> float:
    """The largest value that keeps an upper limit with that probability (JCGM 106, 8.3.2)."""
    return limit - multiplier(probability) * u


def ratio_conformance(exposure_ratio: float, u_db: float) -> float:
    """Probability that a true exposure ratio is at most 1, the error normal in dB; u_db standard.

    Of a ratio of 0 or less (noise taken off): 1. nan where either is nan.
    """
    if exposure_ratio <= 0.0:
        return math.nan if math.isnan(u_db) else 1.0
    if math.isnan(exposure_ratio):
        return math.nan
    return conformance(db_from_power_ratio(exposure_ratio), u_db, high=0.0)
