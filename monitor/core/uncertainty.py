"""Measurement uncertainty after the GUM (JCGM 100:2008), in dB of a power ratio.

Every figure is 10 log of a ratio of powers, so it holds for P, for S and for E squared alike.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import CalibrationError

Real = NDArray[np.float64]

DISTRIBUTIONS = ("normal", "rectangular", "triangular", "u_shaped", "expanded")
CONFIDENCE = 0.95

_CELLS_PER_U = 256
"""Grid cells per combined standard uncertainty; the factor is then good to about 1e-4."""
_DIVISOR = {"rectangular": math.sqrt(3.0), "triangular": math.sqrt(6.0), "u_shaped": math.sqrt(2.0)}
"""Half width over standard deviation: GUM 4.3.7, 4.3.9; U-shaped (arcsine): GUM H.1.3.4."""


@dataclass(frozen=True, slots=True)
class Contribution:
    """One line of an uncertainty budget, for one channel.

    value_db >= 0: the standard deviation (normal), the half width (rectangular, triangular,
    u_shaped) or the expanded uncertainty that a certificate gives with its factor k (expanded).
    shared: one and the same error, by name, in all channels that list it. kind: a word on where
    it comes from (antenna, cable, detector, ...), for reading only.
    """

    name: str
    value_db: float
    distribution: str
    k: float = 2.0
    shared: bool = False
    kind: str = ""

    def __post_init__(self) -> None:
        """CalibrationError for a value, a factor or a distribution that means nothing."""
        if self.distribution not in DISTRIBUTIONS:
            raise CalibrationError(
                f"{self.name}: {self.distribution!r} is not one of {', '.join(DISTRIBUTIONS)}"
            )
        if not (math.isfinite(self.value_db) and self.value_db >= 0):
            raise CalibrationError(f"{self.name}: {self.value_db} dB; must be zero or more")
        if not (math.isfinite(self.k) and self.k > 0):
            raise CalibrationError(f"{self.name}: k = {self.k}; must be positive")

    @property
    def u_db(self) -> float:
        """Standard uncertainty, dB."""
        if self.distribution == "expanded":
            return self.value_db / self.k
        return self.value_db / _DIVISOR.get(self.distribution, 1.0)


Budget = Sequence[Sequence[Contribution]]
"""The lines of each channel, channel by channel."""


def standard_db(contributions: Budget, shares: Real) -> Real:
    """Combined standard uncertainty (n,), dB, of a sum of E squared over channels.

    shares: (n, c), each channel's part of the sum. First order (GUM 5.1.2 and, for the shared
    errors with correlation +1, GUM 5.2.2 note 1): a shared error adds over the channels, weighted
    by share; independent ones add in squares. nan where a share is nan.
    """
    variance = np.zeros(shares.shape[0])
    for _, u_db in _errors(contributions):
        # Channel by channel, not as a matrix product: equal to the bit for any division in time.
        effect = np.zeros(shares.shape[0])
        for channel in np.flatnonzero(u_db):
            effect += shares[:, channel] * u_db[channel]
        variance += effect * effect
    return np.sqrt(variance)


def coverage_factor(contributions: Budget) -> float:
    """Coverage factor k for 95 %, from the distribution of the combined error.

    Taken for equal shares and for each channel alone, whichever is largest: what the field does to
    the shares cannot be known beforehand. 1.960 where everything is normal (GUM G.1.3).
    """
    channels = len(contributions)
    shares = [np.full(channels, 1.0 / channels), *np.eye(channels)]
    errors = _errors(contributions)
    return max(_factor([(name, float(row @ u_db)) for name, u_db in errors]) for row in shares)


def expanded_db(contributions: Budget, shares: Real) -> tuple[Real, float]:
    """Expanded uncertainty (n,), dB, at 95 %, and its coverage factor."""
    k = coverage_factor(contributions)
    return k * standard_db(contributions, shares), k


def _errors(contributions: Budget) -> list[tuple[str, Real]]:
    """Each independent error: the shape of its distribution, and its u in dB per channel (c,)."""
    channels = len(contributions)
    shared: dict[str, tuple[str, Real]] = {}
    errors: list[tuple[str, Real]] = []
    for channel, lines in enumerate(contributions):
        for line in lines:
            shape = "normal" if line.distribution == "expanded" else line.distribution
            u_db = np.zeros(channels)
            if line.shared:
                known, u_db = shared.setdefault(line.name, (shape, u_db))
                if known != shape:
                    raise CalibrationError(f"{line.name}: shared, but as {known} and as {shape}")
            else:
                errors.append((shape, u_db))
            u_db[channel] += line.u_db
    return [*shared.values(), *errors]


def _u_shaped(x: Real) -> Real:
    return np.asarray(0.5 + np.arcsin(x) / math.pi)


def _triangular(x: Real) -> Real:
    return np.asarray(0.5 + x - 0.5 * x * np.abs(x))


def _rectangular(x: Real) -> Real:
    return np.asarray(0.5 + 0.5 * x)


_CUMULATIVE: Mapping[str, Callable[[Real], Real]] = {
    "rectangular": _rectangular,
    "triangular": _triangular,
    "u_shaped": _u_shaped,
}
"""Cumulative distribution over x in half widths, -1 to 1 (JCGM 101:2008, 6.4)."""


def _factor(errors: Sequence[tuple[str, float]]) -> float:
    """k for 95 % of a sum of independent errors (shape, u): numeric convolution (JCGM 101, 5.4).

    Bounded errors enter as the exact masses of the cells of a grid and the normal ones by their
    characteristic function; the transform of the product is the mass of the sum.
    """
    u_all = math.sqrt(sum(u * u for _, u in errors))
    if u_all == 0.0:
        return 1.959963984540054
    bounded = [(shape, u / u_all) for shape, u in errors if shape != "normal" and u > 0]
    sigma = math.sqrt(sum((u / u_all) ** 2 for shape, u in errors if shape == "normal"))
    reach = sum(u * _DIVISOR[shape] for shape, u in bounded) + 8.0 * sigma + 1.0
    n = 2 ** math.ceil(math.log2(2.0 * reach * _CELLS_PER_U))
    step = 1.0 / _CELLS_PER_U
    angle = 2.0 * math.pi * np.fft.rfftfreq(n, step)
    transform = np.exp(-0.5 * (sigma * angle) ** 2).astype(np.complex128)
    edges = (np.arange(n + 1) - n // 2 - 0.5) * step
    for shape, u in bounded:
        inside = np.clip(edges / (u * _DIVISOR[shape]), -1.0, 1.0)
        mass = np.diff(_CUMULATIVE[shape](inside))
        transform *= np.fft.rfft(np.fft.ifftshift(mass))
    mass = np.fft.irfft(transform, n)
    within = np.concatenate(([0.0], mass[0] + 2.0 * np.cumsum(mass[: n // 2]) - 2.0 * mass[0]))
    limits = np.concatenate(([0.0], (np.arange(n // 2) + 0.5) * step))
    return float(np.interp(CONFIDENCE, within, limits))
