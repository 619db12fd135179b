"""Blocks: sums of one channel over a fixed stretch of time, added in time order."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from monitor.core.hold import Pieces
from monitor.core.rows import BlockRows

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741

BLOCK_NS = 10_000_000_000
"""Ten seconds: the unit of the record."""


@dataclass(frozen=True, slots=True)
class Blocks:
    """Consecutive blocks from index first on; every array is (b, c).

    Nothing measured is: energy, covered, n and flags 0, max_w 0, min_w infinite.
    """

    first: int
    energy_w_ns: F
    covered_ns: I
    observed_ns: I
    min_w: F
    max_w: F
    n: I
    flags: I

    @property
    def size(self) -> int:
        """Number of blocks."""
        return int(self.n.shape[0])

    def part(self, first: int, last: int) -> Blocks:
        """Rows first to last, the last one left out."""
        arrays = (getattr(self, name)[first:last] for name in _ARRAYS)
        return Blocks(self.first + first, *arrays)


_ARRAYS = tuple(field.name for field in fields(Blocks))[1:]


def empty_blocks(first: int, size: int, channels: int) -> Blocks:
    """Blocks in which nothing was measured."""
    shape = (size, channels)
    zero = np.zeros(shape, np.int64)
    return Blocks(
        first, np.zeros(shape), zero, zero, np.full(shape, np.inf), np.zeros(shape), zero, zero
    )


def join(left: Blocks, right: Blocks) -> Blocks:
    """Blocks of left followed by those of right."""
    pairs = ((getattr(left, name), getattr(right, name)) for name in _ARRAYS)
    return Blocks(left.first, *(np.concatenate(pair) for pair in pairs))


@dataclass(frozen=True, slots=True)
class Trace:
    """The running sums of blocks after each piece, for judgement inside a block.

    row: index into blocks (m,); end_ns (m,); the others (m, c), counted from the block's start.
    """

    row: I
    end_ns: I
    energy_w_ns: F
    covered_ns: I
    observed_ns: I
    min_w: F
    max_w: F
    flags: I


def accumulate(
    opened: Blocks, pieces: Pieces, until: int, look_ns: int | None = None
) -> tuple[Blocks, Trace]:
    """Add pieces to the open block and those after it, up to and including index until.

    look_ns: for how long a reading was really looked at, counted from its beginning; None: for all
    of the time that it holds.
    Sums run in time order from what the open block already holds, so any division of the same
    pieces over calls gives the same bits.
    """
    channels = opened.n.shape[1]
    row = pieces.block - opened.first
    size = until - opened.first + 1
    count = np.bincount(row, minlength=size)
    place = np.arange(row.size) - (np.cumsum(count) - count)[row] + 1
    grid = (size, int(count.max(initial=0)) + 1, channels)
    valid = ~np.isnan(pieces.power_w)
    power = np.where(valid, pieces.power_w, 0.0)
    span = np.where(valid, pieces.span_ns[:, None], 0)
    looked = span if look_ns is None else np.where(valid, _looked(pieces, look_ns), 0)
    at = (row, place)

    energy = np.zeros(grid)
    energy[0, 0], energy[at] = opened.energy_w_ns[0], power * span
    energy = np.add.accumulate(energy, axis=1)
    covered = np.zeros(grid, np.int64)
    covered[0, 0], covered[at] = opened.covered_ns[0], span
    covered = np.add.accumulate(covered, axis=1)
    observed = np.zeros(grid, np.int64)
    observed[0, 0], observed[at] = opened.observed_ns[0], looked
    observed = np.add.accumulate(observed, axis=1)
    high = np.zeros(grid)
    high[0, 0], high[at] = opened.max_w[0], power
    high = np.maximum.accumulate(high, axis=1)
    low = np.full(grid, np.inf)
    low[0, 0], low[at] = opened.min_w[0], np.where(valid, pieces.power_w, np.inf)
    low = np.minimum.accumulate(low, axis=1)
    bits = np.zeros(grid, np.int64)
    bits[0, 0], bits[at] = opened.flags[0], pieces.flags
    bits = np.bitwise_or.accumulate(bits, axis=1)
    n = np.repeat(np.bincount(row[pieces.head], minlength=size)[:, None], channels, axis=1)
    n[0] += opened.n[0]

    last = (energy[:, -1], covered[:, -1], observed[:, -1], low[:, -1], high[:, -1], n, bits[:, -1])
    sums = (energy[at], covered[at], observed[at], low[at], high[at], bits[at])
    return Blocks(opened.first, *last), Trace(row, pieces.end_ns, *sums)


def _looked(pieces: Pieces, look_ns: int) -> I:
    """(m, 1): what of each piece lies within look_ns of its reading's beginning."""
    return np.clip(look_ns - pieces.since_ns, 0, pieces.span_ns)[:, None]


def to_rows(blocks: Blocks, block_ns: int = BLOCK_NS) -> BlockRows:
    """Rows for the record; blocks that saw nothing are left out, extremes of none are nan."""
    seen = np.any((blocks.n > 0) | (blocks.covered_ns > 0), axis=1)
    row, channel = np.nonzero(np.repeat(seen[:, None], blocks.n.shape[1], axis=1))
    at = (row, channel)
    bare = blocks.covered_ns[at] == 0
    return BlockRows(
        (blocks.first + row) * block_ns,
        channel.astype(np.int64),
        blocks.energy_w_ns[at],
        blocks.covered_ns[at],
        blocks.observed_ns[at],
        np.where(bare, np.nan, blocks.min_w[at]),
        np.where(bare, np.nan, blocks.max_w[at]),
        blocks.n[at],
        blocks.flags[at],
    )


def from_rows(rows: BlockRows, first: int, until: int, channels: int) -> Blocks:
    """Blocks first to until (left out) as the record keeps them, equal to the bit."""
    blocks = empty_blocks(first, max(until - first, 0), channels)
    index = rows.start_ns // BLOCK_NS - first
    keep = (index >= 0) & (index < blocks.size) & (rows.channel < channels)
    at = (index[keep], rows.channel[keep])
    filled: list[NDArray[np.generic]] = []
    for name in _ARRAYS:
        array = getattr(blocks, name).copy()
        values = getattr(rows, name)[keep]
        if name in ("min_w", "max_w"):
            values = np.where(np.isnan(values), array[at], values)
        array[at] = values
        filled.append(array)
    return Blocks(first, *filled)  # type: ignore[arg-type]
