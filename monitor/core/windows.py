"""True sliding windows over blocks, added by doubling: no prefix sums, no drift."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from monitor.core.blocks import Blocks, Trace

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741
Array = NDArray[Any]


BATCHES = 4
"""A window is looked at in overlapping quarters, where a signal may stay high or low for long."""


@dataclass(frozen=True, slots=True)
class Sums:
    """What windows ending at end_ns (p,) hold; the others (p, c).

    energy_low, energy_high: bounds where the window cuts its oldest block, else equal to energy.
    covered_ns: valid time, the least it can be; mean_ns: valid time that energy_w_ns is for.
    min_w: smallest reading, infinite where there is none.
    present: something was read in the window, valid or not. turns_w2: sum of the squared
    differences of neighbouring blocks' means, W2, over pairs of them; n: readings. batch_w2: sum
    of the squared deviations of overlapping batches' means, W2, over batches of them; 0 batches
    where nobody asked.
    """

    end_ns: I
    energy_w_ns: F
    energy_low: F
    energy_high: F
    mean_ns: F
    covered_ns: I
    observed_ns: I
    min_w: F
    max_w: F
    flags: I
    present: NDArray[np.bool_]
    turns_w2: F
    pairs: I
    n: I
    batch_w2: F
    batches: I

    def at(self, index: Array) -> Sums:
        """The windows of index (positions or a mask)."""
        return Sums(*(getattr(self, name)[index] for name in Sums.__slots__))


def _back(values: Array, rows: int, neutral: float) -> Array:
    """Values moved rows later; neutral before the first."""
    if rows == 0:
        return values
    moved = np.full_like(values, neutral)
    if rows < len(values):
        moved[rows:] = values[:-rows]
    return moved


def last_n(
    values: Array, n: int, add: Callable[[Array, Array], Array], neutral: float = 0
) -> Array:
    """Combination of the n rows that end with each row, always in the same association.

    Rows before the first count as neutral, which must be so for add.
    """
    total: Array | None = None
    reach, width, level = 0, 1, values
    while width <= n:
        if n & width:
            part = _back(level, reach, neutral)
            total = part if total is None else add(total, part)
            reach += width
        if width * 2 <= n:
            level = add(level, _back(level, width, neutral))
        width *= 2
    return np.full_like(values, neutral) if total is None else total


def _turns(blocks: Blocks) -> tuple[F, I]:
    """Squared difference of each block's mean power from the one before, W2, and where it counts.

    A block that only holds an earlier reading tells nothing new.
    """
    covered = blocks.covered_ns > 0
    mean = np.where(covered, blocks.energy_w_ns, 0.0) / np.maximum(blocks.covered_ns, 1)
    counts = np.zeros(covered.shape, np.int64)
    counts[1:] = covered[1:] & covered[:-1] & (blocks.n[1:] > 0)
    turn = np.zeros(mean.shape)
    turn[1:] = (mean[1:] - mean[:-1]) ** 2
    return np.where(counts != 0, turn, 0.0), counts


def _batches(blocks: Blocks, n: int, asked: bool) -> tuple[F, I]:
    """Deviations of batches of n // BATCHES blocks from the mean of the n blocks they lie in.

    The sum of their squares, W2, and how many there are, for the window that ends with each row.
    """
    size, shape = n // BATCHES, blocks.energy_w_ns.shape
    if not asked or size < 1:
        return np.zeros(shape), np.zeros(shape, np.int64)
    energy, covered = blocks.energy_w_ns, blocks.covered_ns
    part_ns, all_ns = last_n(covered, size, np.add), last_n(covered, n, np.add)
    whole = last_n(energy, n, np.add) / np.maximum(all_ns, 1)
    part = last_n(energy, size, np.add) / np.maximum(part_ns, 1)
    here = (part_ns > 0).astype(np.int64)
    steps = n - size + 1
    count = last_n(here, steps, np.add)
    first = last_n(part * here, steps, np.add)
    second = last_n(part * part * here, steps, np.add)
    return np.maximum(second - 2.0 * whole * first + count * whole * whole, 0.0), count


def at_block_ends(
    blocks: Blocks, skip: int, n: int, block_ns: int, *, batched: bool = False
) -> Sums:
    """Windows of n blocks that end with each block from row skip on.

    skip rows of history come first: at least n - 1, or everything since the start. batched: look at
    batches of blocks, too.
    """
    energy = last_n(blocks.energy_w_ns, n, np.add)[skip:]
    covered = last_n(blocks.covered_ns, n, np.add)[skip:]
    rows = np.arange(skip, blocks.size)
    turn, counts = _turns(blocks)
    deviations, batches = _batches(blocks, n, batched)
    return Sums(
        (blocks.first + rows + 1) * block_ns,
        energy,
        energy,
        energy,
        covered.astype(np.float64),
        covered,
        last_n(blocks.observed_ns, n, np.add)[skip:],
        last_n(blocks.min_w, n, np.minimum, np.inf)[skip:],
        last_n(blocks.max_w, n, np.maximum)[skip:],
        last_n(blocks.flags, n, np.bitwise_or)[skip:],
        np.any(last_n(blocks.n + blocks.covered_ns, n, np.add)[skip:], axis=1),
        last_n(turn, n - 1, np.add)[skip:],
        last_n(counts, n - 1, np.add)[skip:],
        last_n(blocks.n, n, np.add)[skip:],
        deviations[skip:],
        batches[skip:],
    )


def inside_blocks(
    blocks: Blocks, trace: Trace, skip: int, n: int, block_ns: int, *, batched: bool = False
) -> Sums:
    """Windows that end inside a block, at each point of trace: closed blocks plus the open one.

    trace.row counts from row skip; n rows of history come first. The oldest block is cut, and where
    in it its readings lay is not known: energy_w_ns and mean_ns share it by time (an estimate);
    covered_ns takes the least that can be left of it, energy_low and energy_high its largest
    reading out of the window or in it. high plus the missing time at max_w bounds from above.
    """
    row = trace.row + skip
    before, oldest = row - 1, row - n
    left_ns = ((blocks.first + row + 1) * block_ns - trace.end_ns)[:, None]
    share = left_ns / block_ns
    old_energy, old_max = blocks.energy_w_ns[oldest], blocks.max_w[oldest]
    old_covered = blocks.covered_ns[oldest]
    kept_ns = np.maximum(old_covered - (block_ns - left_ns), 0)
    seen_ns = np.maximum(blocks.observed_ns[oldest] - (block_ns - left_ns), 0)
    seen_ns += last_n(blocks.observed_ns, n - 1, np.add)[before] + trace.observed_ns
    whole = last_n(blocks.energy_w_ns, n - 1, np.add)[before] + trace.energy_w_ns
    whole_ns = last_n(blocks.covered_ns, n - 1, np.add)[before] + trace.covered_ns
    high = np.maximum(last_n(blocks.max_w, n - 1, np.maximum)[before], trace.max_w)
    high = np.maximum(high, old_max)
    weakest = last_n(blocks.min_w, n - 1, np.minimum, np.inf)[before]
    weakest = np.minimum(np.minimum(weakest, trace.min_w), blocks.min_w[oldest])
    bits = last_n(blocks.flags, n - 1, np.bitwise_or)[before] | trace.flags
    turn, counts = _turns(blocks)
    deviations, batches = _batches(blocks, n - 1, batched)
    gone = np.maximum(old_energy - (block_ns - left_ns) * old_max, 0.0)
    return Sums(
        trace.end_ns,
        whole + share * old_energy,
        whole + gone,
        whole + np.minimum(np.minimum(old_energy, left_ns * old_max), kept_ns * high),
        whole_ns + share * old_covered,
        whole_ns + kept_ns,
        seen_ns,
        weakest,
        high,
        bits | blocks.flags[oldest],
        np.ones(row.size, np.bool_),
        last_n(turn, max(n - 2, 0), np.add)[before],
        last_n(counts, max(n - 2, 0), np.add)[before],
        last_n(blocks.n, n - 1, np.add)[before],
        deviations[before],
        batches[before],
    )
