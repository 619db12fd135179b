"""Instruments that differ as their error budget says: each seed is another one."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from simulators import draws
from simulators.detector import Board, Contribution, load

BAND_HZ = (7.0e8, 2.7e9)
AXES = 3


@dataclass(frozen=True)
class Instrument:
    """One drawn instrument. errors_db (3,): how much each axis reads too high, dB of power.

    band_db: the share of errors_db that stands for an unknown frequency within the band (all
    axes alike); it belongs to a test at the band's middle factor, not to a scene whose sources
    have frequencies of their own.
    """

    errors_db: NDArray[np.float64]
    band_db: float


def draw(
    seed: int,
    board: Board | None = None,
    *,
    contributions: Sequence[Contribution] | None = None,
    band_hz: tuple[float, float] | None = BAND_HZ,
) -> Instrument:
    """An instrument whose errors follow the board's budget (or the contributions given).

    A shared contribution is drawn once for all axes, another once for each. With band_hz the
    chain's variation over that band is drawn too, rectangular and shared; None leaves it out.
    Raises ValueError for a distribution that is not known.
    """
    board = board if board is not None else load()
    source = draws.generator(seed, draws.ERRORS, 0)
    errors_db = np.zeros(AXES)
    for line in contributions if contributions is not None else board.contributions:
        errors_db += _errors(line, source)
    band_db = 0.0
    if band_hz is not None:
        half = board.spread_db(*band_hz)
        band_db = float(source.uniform(-half, half))
    return Instrument(errors_db + band_db, band_db)


def _errors(line: Contribution, source: np.random.Generator) -> NDArray[np.float64]:
    size = 1 if line.shared else AXES
    if line.distribution == "normal":
        drawn = line.value_db * source.standard_normal(size)
    elif line.distribution == "expanded":
        drawn = line.value_db / line.k * source.standard_normal(size)
    elif line.distribution == "rectangular":
        drawn = source.uniform(-line.value_db, line.value_db, size)
    elif line.distribution == "triangular":
        drawn = line.value_db * (source.random(size) - source.random(size))
    elif line.distribution == "u_shaped":
        drawn = line.value_db * np.sin(2.0 * np.pi * source.random(size))
    else:
        raise ValueError(f"{line.name}: no distribution {line.distribution!r}")
    return drawn
