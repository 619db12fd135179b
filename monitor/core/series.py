"""Rolling averages of an outside series, by the same hold, blocks and windows as the live chain."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.blocks import Blocks, accumulate, empty_blocks, join
from monitor.core.errors import ConfigError
from monitor.core.hold import Segments, complete, cut, no_segments
from monitor.core.windows import at_block_ends

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741
CHUNK = 65_536


@dataclass(frozen=True, slots=True)
class RollingAverages:
    """Windows [end - averaging, end); end_ns from the first time on; nan where nothing is valid."""

    end_ns: I
    e2_mean: F
    valid_share: F
    e2_max: F


def rolling_e2(
    times_ns: I, e2: F, averaging_ns: int, every_ns: int, hold_ns: int
) -> RollingAverages:
    """Time-weighted mean of E squared over a sliding window, at first time + k * every.

    times_ns (n,) strictly increasing; e2 (n,) V2/m2, nan where invalid. A reading holds until the
    next, at most hold_ns. The last window ends no later than the last reading's hold.
    """
    if times_ns.size == 0 or min(averaging_ns, every_ns, hold_ns) <= 0:
        raise ConfigError("averages need at least one reading and positive durations")
    if np.any(np.diff(times_ns) <= 0):
        raise ConfigError("averages need times that increase from line to line")
    block_ns = math.gcd(averaging_ns, every_ns)
    n, step = averaging_ns // block_ns, every_ns // block_ns
    start = int(times_ns[0])
    history = empty_blocks(-n, n, 1)
    opened = empty_blocks(0, 1, 1)
    pending = no_segments(1)
    found: list[tuple[I, F, I, F]] = []
    for first in range(0, times_ns.size, CHUNK):
        times = times_ns[first : first + CHUNK] - start
        now = int(times[-1])
        if first + CHUNK >= times_ns.size:
            now += hold_ns
        power = e2[first : first + CHUNK, None]
        flags = np.zeros(power.shape, np.int64)
        segments, pending = complete(pending, times, power, flags, now, hold_ns)
        opened, history = _advance(opened, history, segments, now, block_ns, n, step, found)
    end, energy, covered, high = (np.concatenate(column) for column in zip(*found))
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = energy / covered
    share = covered / averaging_ns
    return RollingAverages(end + start, mean, share, np.where(covered > 0, high, np.nan))


def _advance(
    opened: Blocks,
    history: Blocks,
    segments: Segments,
    now: int,
    block_ns: int,
    n: int,
    step: int,
    found: list[tuple[I, F, I, F]],
) -> tuple[Blocks, Blocks]:
    """Close the blocks that ended before now and keep their windows at every step."""
    blocks, _ = accumulate(opened, cut(segments, block_ns), now // block_ns)
    closed = join(history, blocks.part(0, blocks.size - 1))
    sums = at_block_ends(closed, n, n, block_ns)
    keep = (sums.end_ns // block_ns) % step == 0
    found.append(
        (
            sums.end_ns[keep],
            sums.energy_w_ns[keep, 0],
            sums.covered_ns[keep, 0],
            sums.max_w[keep, 0],
        )
    )
    return blocks.part(blocks.size - 1, blocks.size), closed.part(closed.size - n, closed.size)
