"""Distributions of errors and of their sum: the coverage factor.

An error is (shape, u, degrees of freedom). With finite degrees of freedom v its u is itself known
from a sample of that size, so the error is its shape times the root of v over a chi-squared of v:
Student's t for a normal shape (JCGM 101:2008, 6.4.9). For the bounded shapes the same law is this
house's choice; it widens them as JCGM 101, 6.4.3, does where the limits are not exactly known.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from monitor.core.tabulated import Tabulated

Real = NDArray[np.float64]

CONFIDENCE = 0.95
NORMAL_K = 1.959963984540054
"""The factor for 95 % of a normal distribution."""
DIVISOR: Mapping[str, float] = {
    "normal": 1.0,
    "rectangular": math.sqrt(3.0),
    "triangular": math.sqrt(6.0),
    "u_shaped": math.sqrt(2.0),
}
"""Half width over standard deviation: GUM 4.3.7, 4.3.9; U-shaped (arcsine): GUM H.1.3.4."""
Shape = str | Tabulated
"""A word of DIVISOR, or a table."""
FEWEST_DEGREES = 1.0
"""Two readings; with less a spread says nothing."""

_CELLS_PER_U = 256
"""Grid cells per combined standard uncertainty; the factor is then good to about 1e-4."""
_MOST_CELLS = 2**17
"""Long tails (few degrees of freedom) get wider cells instead of more of them."""

_FINER_AT_EDGES = 16
"""A bounded distribution ends abruptly: its factor is then good to about 1e-3 in the worst case."""

Error = tuple[Shape, float, float]
"""Shape, standard uncertainty, degrees of freedom (math.inf: u is exactly known)."""


def scale_weights(degrees_of_freedom: float, finer: int = 1) -> tuple[Real, Real]:
    """Scales root(v / chi squared of v) and their weights, f8 (j,) each; one scale for infinite v.

    Equal steps in the logarithm of chi squared, where the sum over a smooth law converges
    exponentially; finer: how many times smaller, for one with edges. The weights add up to 1.
    """
    v = degrees_of_freedom
    if math.isinf(v):
        return np.ones(1), np.ones(1)
    spread = math.sqrt(2.0 / v)
    step = min(0.5, spread / 2.0) / finer
    y = np.arange(-(42.0 / v + 7.0 * spread), 7.0 * spread + step, step)
    log_weight = 0.5 * v * (y - np.expm1(y))
    weight = np.exp(log_weight - log_weight.max())
    kept = weight > 1e-12
    return np.exp(-0.5 * y[kept]), weight[kept] / weight[kept].sum()


def factor(errors: Sequence[Error], confidence: float = CONFIDENCE) -> float:
    """k for a share of a sum of independent errors, by numeric convolution (JCGM 101, 5.4).

    k is in units of the root of the sum of u squared. Bounded errors enter as the exact masses of
    the cells of a grid and the normal ones by their characteristic function; the transform of the
    product is the mass of the sum. Without any uncertainty: the normal factor for 95 %.
    """
    u_all = math.sqrt(sum(u * u for _, u, _ in errors))
    if u_all == 0.0:
        return NORMAL_K
    scaled = [(shape, u / u_all, v) for shape, u, v in errors if u > 0]
    n, step = _grid(scaled)
    angle = np.asarray(2.0 * math.pi * np.fft.rfftfreq(n, step), np.float64)
    transform = _normals(scaled, angle)
    edges = np.asarray((np.arange(n + 1) - n // 2 - 0.5) * step, np.float64)
    known: dict[Error, NDArray[np.complex128]] = {}
    for error in scaled:
        if error[0] != "normal":
            if error not in known:
                mass = sum((w * m for w, m in _masses(*error, edges)), np.zeros(n))
                known[error] = np.fft.rfft(np.fft.ifftshift(mass))
            transform *= known[error]
    mass = np.fft.irfft(transform, n)
    either = mass[1 : n // 2] + mass[: n // 2 : -1]  # as far above as below: tables may be skew
    within = np.concatenate(([0.0], mass[0] + np.cumsum(np.concatenate(([0.0], either)))))
    limits = np.concatenate(([0.0], (np.arange(n // 2) + 0.5) * step))
    return float(np.interp(confidence, within, limits))


def _grid(errors: Sequence[Error]) -> tuple[int, float]:
    """Number of cells, a power of two, and their width, u in units of the whole.

    Tails of few degrees of freedom need room: what leaves the grid at one end comes back at the
    other, and must not matter there.
    """
    bounded = sum(u * _reach(shape) for shape, u, v in errors if shape != "normal")
    sigma = math.sqrt(sum(u**2 for shape, u, v in errors if shape == "normal" and math.isinf(v)))
    tails = sum(16.0 * u * 64.0 ** (1.0 / v) for _, u, v in errors if math.isfinite(v))
    reach = bounded + 8.0 * sigma + 1.0 + tails
    n = 2 ** math.ceil(math.log2(2.0 * reach * _CELLS_PER_U))
    if n > _MOST_CELLS:
        return _MOST_CELLS, 2.0 * reach / _MOST_CELLS
    return n, 1.0 / _CELLS_PER_U


def _normals(errors: Sequence[Error], angle: Real) -> NDArray[np.complex128]:
    """Characteristic function (m,) of the sum of the normal errors and of the t ones."""
    exact = [u for shape, u, v in errors if shape == "normal" and math.isinf(v)]
    sigma = math.sqrt(sum(u**2 for u in exact))
    transform = np.exp(-0.5 * (sigma * angle) ** 2)
    for shape, u, v in errors:
        if shape == "normal" and math.isfinite(v):
            student = np.zeros(angle.size)
            for scale, weight in zip(*scale_weights(v)):
                student += weight * np.exp(-0.5 * (scale * u * angle) ** 2)
            transform *= student
    return transform.astype(np.complex128)


def _reach(shape: Shape) -> float:
    """The largest error of a bounded shape over its standard deviation."""
    return shape.reach if isinstance(shape, Tabulated) else DIVISOR[shape]


def _masses(shape: Shape, u: float, v: float, edges: Real) -> Iterator[tuple[float, Real]]:
    """Weight and masses of the cells of a bounded error, for each of its scales."""
    for scale, weight in zip(*scale_weights(v, _FINER_AT_EDGES)):
        if isinstance(shape, Tabulated):
            cumulative = shape.cumulative(edges / (scale * u))
        else:
            cumulative = _CUMULATIVE[shape](np.clip(edges / (scale * u * DIVISOR[shape]), -1, 1))
        yield float(weight), np.diff(cumulative)


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


def draw(shape: Shape, size: int, degrees_of_freedom: float, rng: np.random.Generator) -> Real:
    """Errors (size,) of standard uncertainty 1, at random (JCGM 101:2008, 6.4).

    Those of a table by the inverse of its cumulative distribution (JCGM 101:2008, C.2).
    """
    unit = 1.0 if isinstance(shape, Tabulated) else DIVISOR[shape]
    if isinstance(shape, Tabulated):
        drawn = shape.at(rng.uniform(0.0, 1.0, size))
    elif shape == "normal":
        drawn = rng.standard_normal(size)
    elif shape == "rectangular":
        drawn = rng.uniform(-1.0, 1.0, size)
    elif shape == "triangular":
        drawn = rng.triangular(-1.0, 0.0, 1.0, size)
    else:
        drawn = np.sin(rng.uniform(-math.pi, math.pi, size))
    if math.isfinite(degrees_of_freedom):
        chi2 = rng.chisquare(degrees_of_freedom, size)
        drawn = drawn * np.sqrt(degrees_of_freedom / chi2)
    return np.asarray(drawn * unit)
