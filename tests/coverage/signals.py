"""Signals whose true six-minute mean is known: power at readings, relative to that of the draw.

Every function takes instants (r,), s, a number of draws and a generator, and gives a Sent: power
at those instants (n, r), f4, and the true mean over the window (n,).

The signal varies much faster than it is read, so two readings have nothing in common but the slow
part (load, fading) that is written out here; the truth is the mean of that slow part.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from monitor.core.averaging_law import DB_PER_NEPER_OF_POWER, NOISE_CORRECTION_DB

WINDOW_S = 360.0
Power = NDArray[np.float32]
Real = NDArray[np.float64]


class Sent(NamedTuple):
    """Power at the readings (n, r) and its true mean over the window (n,)."""

    power: Power
    mean: Real


Signal = Callable[[Real, int, np.random.Generator], Sent]


def carrier(at_s: Real, n: int, rng: np.random.Generator) -> Sent:
    """A constant envelope."""
    return Sent(np.ones((n, at_s.size), np.float32), np.ones(n))


def noise(at_s: Real, n: int, rng: np.random.Generator) -> Sent:
    """Gaussian noise, much wider than a reading is short: exponential power, nothing slow."""
    return Sent(_exponential(n, at_s.size, rng), np.ones(n))


def bursts(at_s: Real, n: int, rng: np.random.Generator) -> Sent:
    """Noise-like power that is on for a tenth to four fifths of the time, at random instants."""
    duty = np.exp(rng.uniform(np.log(0.1), np.log(0.8), n))
    power = _exponential(n, at_s.size, rng)
    power *= rng.random((n, at_s.size), np.float32) < duty[:, None].astype(np.float32)
    power /= duty[:, None].astype(np.float32)
    return Sent(power, np.ones(n))


def mixed(at_s: Real, n: int, rng: np.random.Generator) -> Sent:
    """Carrier, noise and bursts in random parts."""
    parts = rng.dirichlet([2.0, 2.0, 2.0], n).astype(np.float32)
    power = bursts(at_s, n, rng).power * parts[:, :1]
    power += _exponential(n, at_s.size, rng) * parts[:, 1:2] + parts[:, 2:]
    return Sent(power, np.ones(n))


def _exponential(n: int, readings: int, rng: np.random.Generator) -> Power:
    return rng.standard_exponential((n, readings), np.float32)


CLASSES: dict[str, Signal] = {"carrier": carrier, "noise": noise, "bursts": bursts, "mixed": mixed}


def load(at_s: Real, n: int, rng: np.random.Generator) -> tuple[Real, Real]:
    """Load (n, r) from 0 to 1 that changes within 1 to 5 minutes, and its mean (n,).

    A logistic function of a stationary process whose correlation falls exponentially
    (Ornstein-Uhlenbeck), in steps of 2 s.
    """
    step_s, steps = 2.0, 180
    keep = np.exp(-step_s / rng.uniform(60.0, 300.0, n))
    state, level = rng.standard_normal(n), np.empty((n, steps))
    centre = rng.uniform(-1.5, 1.0, n)
    for i in range(steps):
        level[:, i] = 1.0 / (1.0 + np.exp(-(centre + 1.2 * state)))
        state = keep * state + np.sqrt(1.0 - keep**2) * rng.standard_normal(n)
    return level[:, (at_s / step_s).astype(np.intp)], level.mean(axis=1)


def _tails(n: int, readings: int, rng: np.random.Generator) -> Power:
    """Power with tails far heavier than those of noise: noise whose own mean is lognormal."""
    spread = rng.uniform(0.3, 1.0, (n, 1)).astype(np.float32)
    power = rng.standard_normal((n, readings), np.float32)
    power *= spread
    power -= spread**2 / 2
    np.exp(power, out=power)
    power *= _exponential(n, readings, rng)
    return power


def loaded_noise(at_s: Real, n: int, rng: np.random.Generator) -> Sent:
    """Heavy tails on a level that follows the load of minutes, never wholly off."""
    here, mean = load(at_s, n, rng)
    return Sent(_tails(n, at_s.size, rng) * (0.3 + here).astype(np.float32), 0.3 + mean)


def loaded_bursts(at_s: Real, n: int, rng: np.random.Generator) -> Sent:
    """On at random with a probability that follows the load of minutes, heavy tails while on."""
    here, mean = load(at_s, n, rng)
    power = _tails(n, at_s.size, rng)
    power *= rng.random((n, at_s.size), np.float32) < here.astype(np.float32)
    return Sent(power, mean)


def loaded_mixed(at_s: Real, n: int, rng: np.random.Generator) -> Sent:
    """A carrier, loaded noise and loaded bursts in random parts."""
    parts = rng.dirichlet([2.0, 2.0, 2.0], n)
    a, b = loaded_noise(at_s, n, rng), loaded_bursts(at_s, n, rng)
    one, two, three = (parts[:, i : i + 1].astype(np.float32) for i in range(3))
    return Sent(one * a.power + two * b.power + three, (parts * _columns(a.mean, b.mean)).sum(1))


def _columns(a: Real, b: Real) -> Real:
    return np.stack([a, b, np.ones_like(a)], axis=1)


LOADED: dict[str, Signal] = {
    "carrier": carrier,
    "noise": loaded_noise,
    "bursts": loaded_bursts,
    "mixed": loaded_mixed,
}


class Logs(NamedTuple):
    """Signals as a detector that averages logs sees them: states (n, s) of power over its true
    mean, the share of the time spent in each (n, s), and how far the log of a state falls short
    of its power for fluctuations within it, dB."""

    states: Real
    shares: Real
    short_db: float


def logs(name: str, n: int, rng: np.random.Generator) -> Logs:
    """One of CLASSES, where each reading is a log averaged over many bursts of it.

    Bursts and mixtures without fluctuations within a state: those would only lower the figure.
    """
    if name in ("carrier", "noise"):
        short_db = NOISE_CORRECTION_DB if name == "noise" else 0.0
        return Logs(np.ones((n, 1)), np.ones((n, 1)), short_db)
    duty = np.exp(rng.uniform(np.log(0.1), np.log(0.8), n))
    part = np.ones(n) if name == "bursts" else rng.uniform(0.1, 0.9, n)
    states = np.stack([1.0 - part + part / duty, 1.0 - part], axis=1)
    return Logs(states, np.stack([duty, 1.0 - duty], axis=1), 0.0)


LOG_SCATTER_DB = DB_PER_NEPER_OF_POWER * np.pi / np.sqrt(6.0)
"""Standard deviation of the log of exponential power, dB: pi / root 6 nepers."""
