"""Measurement uncertainty after the GUM (JCGM 100:2008), in dB of a power ratio.

Every figure is 10 log of a ratio of powers, so it holds for P, for S and for E squared alike.
"""

from __future__ import annotations

import numpy as np

from monitor.core.budget import Budget, independent
from monitor.core.distributions import Real, factor


def standard_db(contributions: Budget, shares: Real) -> Real:
    """Combined standard uncertainty (n,), dB, of a sum of E squared over channels.

    shares: (n, c), each channel's part of the sum. First order (GUM 5.1.2 and, for the shared
    errors with correlation +1, GUM 5.2.2 note 1): a shared error adds over the channels, weighted
    by share; independent ones add in squares. nan where a share is nan.
    """
    variance = np.zeros(shares.shape[0])
    for error in independent(contributions):
        # Channel by channel, not as a matrix product: equal to the bit for any division in time.
        effect = np.zeros(shares.shape[0])
        for channel in np.flatnonzero(error.effects):
            effect += shares[:, channel] * error.effects[channel]
        variance += effect * effect
    return np.sqrt(variance)


def coverage_factor(contributions: Budget) -> float:
    """Coverage factor k for 95 %, from the distribution of the combined error.

    Taken for equal shares and for each channel alone, whichever is largest: what the field does to
    the shares cannot be known beforehand. 1.960 where everything is normal and exactly known
    (GUM G.1.3), larger where degrees of freedom are few (GUM G.3.2).
    """
    channels = len(contributions)
    shares = [equal_shares(channels), *np.eye(channels)]
    errors = independent(contributions)
    return max(factor([error.at(row) for error in errors]) for row in shares)


def equal_shares(channels: int) -> Real:
    """Every channel with the same part of the sum, (c,)."""
    return np.full(channels, 1.0 / channels)


def expanded_db(contributions: Budget, shares: Real) -> tuple[Real, float]:
    """Expanded uncertainty (n,), dB, at 95 %, and its coverage factor."""
    k = coverage_factor(contributions)
    return k * standard_db(contributions, shares), k
