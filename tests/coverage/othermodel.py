"""A second world, whose errors are not those of the budget: what physics does, not what lines say.

Certificates are off as they say (nobody can know better). Everything else differs:

- the antenna: three dipoles not quite at right angles and not quite equal, with cross-axis
  leakage of any phase, so that the error depends on where the field points;
- the antenna factor bends between its two calibrated frequencies, each axis by its own amount;
- the detector's curve bends between its points, each axis by its own amount, to either side;
- reflections between antenna and detector over a cable: their phase runs with frequency, and the
  signal is a few carriers somewhere within 200 MHz;
- a gain that follows the air with a lag of about 20 minutes: a day's course, and sun and clouds;
- a modulation error that is the greater the more the envelope varies;
- the detector's noise is off independently on every axis.

Each is about as large as the line that the budget has for it (the bend of the antenna factor has
none), for a world with smaller errors would prove nothing; its shape and its dependence differ.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

Real = NDArray[np.float64]
AXES = 3
CERTIFICATES_DB = 0.65
"""Standard deviation: 0.6 dB for the antenna, 0.25 dB for the detector, as the file's certificates
say; a third of it is spread over four laboratories' steps instead of a normal law."""
MISALIGNED = 0.045
"""Standard deviation of each entry of the antenna's matrix, real and imaginary part."""
BEND_DB = 0.2
"""Standard deviation of the detector's bend half way between points."""
ANTENNA_BEND_DB = 0.15
WALK_PER_K_DB = 0.025
"""Standard deviation over instruments of the gain's change with temperature, dB/K."""
CREST_DB = {"carrier": 0.2, "noise": 0.5, "bursts": 0.6, "mixed": 0.5}
"""Largest modulation error of a class, either sign."""


class Front(NamedTuple):
    """Antenna and cable: E squared of each axis over the true one (n, 3), dB off included."""

    share: Real
    bend: Real
    zero: Real


def front(signal: str, n: int, rng: np.random.Generator) -> Front:
    """Share of the true E squared that each axis gives as power, bends in dB and zeros (n, 3)."""
    off_db = _certificates_db(n, rng)[:, None] + rng.normal(0.0, ANTENNA_BEND_DB, (n, AXES))
    off_db += _reflections_db(n, rng)
    off_db += CREST_DB[signal] * rng.uniform(-1.0, 1.0, (n, 1))
    share = _antenna(n, rng) * 10.0 ** (off_db / 10.0)
    bend = rng.normal(0.0, BEND_DB, (n, AXES))
    return Front(share, bend, rng.standard_normal((n, AXES)))


def _certificates_db(n: int, rng: np.random.Generator) -> Real:
    steps = rng.choice([-1.0, -0.4, 0.4, 1.0], n) / np.sqrt(0.58)
    mixed = np.sqrt(2.0 / 3.0) * rng.standard_normal(n) + np.sqrt(1.0 / 3.0) * steps
    return np.asarray(CERTIFICATES_DB * mixed)


def _antenna(n: int, rng: np.random.Generator) -> Real:
    """Power of three axes over E squared (n, 3) for an E vector of any direction and ellipse."""
    field = rng.standard_normal((n, AXES)) + 1j * rng.standard_normal((n, 1)) * rng.standard_normal(
        (n, AXES)
    )
    field /= np.sqrt((np.abs(field) ** 2).sum(axis=1, keepdims=True))
    stray = rng.normal(0.0, MISALIGNED, (n, AXES, AXES, 2))
    matrix = np.eye(AXES) + stray[..., 0] + 1j * stray[..., 1]
    return np.asarray(np.abs(np.einsum("nij,nj->ni", matrix, field)) ** 2)


def _reflections_db(n: int, rng: np.random.Generator) -> Real:
    """Mean over three carriers of |1 - both reflections over the cable's way| squared, dB."""
    both = rng.uniform(0.12, 0.26, (n, AXES, 1)) * rng.uniform(0.12, 0.26, (n, AXES, 1))
    way_s = rng.uniform(4e-9, 8e-9, (n, AXES, 1))  # there and back, 0.4 to 0.8 m of cable
    carriers_hz = 1.1e9 + rng.uniform(0.0, 2e8, (n, 1, 3))
    phase = 2.0 * np.pi * (carriers_hz * way_s + rng.random((n, AXES, 1)))
    power = np.abs(1.0 - both * np.exp(1j * phase)) ** -2.0
    return np.asarray(10.0 * np.log10(power.mean(axis=2)))


LAG_S = 1200.0
DAY_S = 86400.0


def gain_db(at_s: Real, n: int, rng: np.random.Generator) -> Real:
    """Gain over the readings (n, r), dB: of temperatures that the instrument reaches with a lag.

    Two sinusoids, of the day and of sun and clouds within 20 to 90 minutes, each after a first
    order lag: smaller by the root of 1 + x squared and later by arctan x, x = 2 pi lag / period.
    """
    lag_s = rng.uniform(0.8, 1.2, (n, 1)) * LAG_S
    warm = rng.uniform(-8.0, 8.0, (n, 1)) * np.ones((1, at_s.size))
    for period_s, most_k in (
        (np.full((n, 1), DAY_S), rng.uniform(2.0, 9.0, (n, 1))),
        (rng.uniform(1200.0, 5400.0, (n, 1)), rng.uniform(0.0, 12.0, (n, 1))),
    ):
        x = 2.0 * np.pi * lag_s / period_s
        phase = 2.0 * np.pi * (at_s / period_s + rng.random((n, 1))) - np.arctan(x)
        warm = warm + most_k / np.sqrt(1.0 + x**2) * np.sin(phase)
    return np.asarray(rng.normal(0.0, WALK_PER_K_DB, (n, 1)) * warm)
