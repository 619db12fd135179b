"""Random numbers that depend on their place in the series, never on how it is cut into pieces.

Each stream of numbers is laid out in cells of fixed length. A cell comes from a counter-based
generator (Philox) keyed by the seed and the stream, with the cell's number in the counter, so
any stretch can be drawn at any time, in any order, and comes out the same.
"""

from __future__ import annotations

from collections.abc import Iterator
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

CELL = 3600
"""Rows in one cell."""

READINGS, MINUTES, BURSTS, NOISE, ERRORS, BOARD = range(6)
"""The streams of one seed; two streams share no numbers."""


def generator(seed: int, stream: int, place: int) -> np.random.Generator:
    """The generator of one cell. Raises ValueError for a negative seed."""
    if seed < 0:
        raise ValueError("the seed must be 0 or more")
    key = np.array([seed, stream], np.uint64)
    counter = np.array([0, place % 2**64, 0, 0], np.uint64)
    return np.random.Generator(np.random.Philox(key=key, counter=counter))


@lru_cache(maxsize=16)
def _cell(seed: int, stream: int, cell: int, width: int, normal: bool) -> NDArray[np.float64]:
    source = generator(seed, stream, cell)
    shape = (CELL, width)
    drawn = source.standard_normal(shape) if normal else source.random(shape)
    drawn.setflags(write=False)
    return drawn


def _rows(
    seed: int, stream: int, first: int, n: int, width: int, normal: bool
) -> Iterator[NDArray[np.float64]]:
    at, end = first, first + n
    while at < end:
        cell, row = divmod(at, CELL)
        take = min(end - at, CELL - row)
        yield _cell(seed, stream, cell, width, normal)[row : row + take]
        at += take


def uniforms(seed: int, stream: int, first: int, n: int, width: int) -> NDArray[np.float64]:
    """Rows first..first+n of a stream: float64 (n, width) in [0, 1)."""
    parts = list(_rows(seed, stream, first, n, width, False))
    return np.concatenate(parts) if parts else np.empty((0, width))


def normals(seed: int, stream: int, first: int, n: int, width: int) -> NDArray[np.float64]:
    """Rows first..first+n of a stream: float64 (n, width), mean 0 and deviation 1."""
    parts = list(_rows(seed, stream, first, n, width, True))
    return np.concatenate(parts) if parts else np.empty((0, width))
