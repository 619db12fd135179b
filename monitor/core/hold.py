"""From readings to segments: a reading holds until the next one, at most the hold time."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741


@dataclass(frozen=True, slots=True)
class Segments:
    """Spans of constant power, in time order: start_ns, end_ns (m,); power_w, flags (m, c).

    power_w is nan where the channel had no valid reading.
    """

    start_ns: I
    end_ns: I
    power_w: F
    flags: I

    @property
    def n(self) -> int:
        """Number of segments."""
        return int(self.start_ns.size)

    def part(self, first: int, last: int) -> Segments:
        """Segments first to last, the last one left out."""
        s = slice(first, last)
        return Segments(self.start_ns[s], self.end_ns[s], self.power_w[s], self.flags[s])


def no_segments(channels: int) -> Segments:
    """No segment at all."""
    none = np.empty(0, np.int64)
    return Segments(none, none, np.empty((0, channels)), np.empty((0, channels), np.int64))


def complete(
    pending: Segments, times_ns: I, power_w: F, flags: I, now_ns: int, hold_ns: int
) -> tuple[Segments, Segments]:
    """Segments that are certain, and the reading that still waits for its end (0 or 1 rows).

    pending: what the last call left waiting; times_ns (n,), increasing and later than it.
    Nothing else came before now_ns. The result of many small calls equals that of one call.
    """
    times = np.concatenate([pending.start_ns, times_ns])
    if times.size == 0:
        return pending, pending
    power = np.concatenate([pending.power_w, power_w])
    bits = np.concatenate([pending.flags, flags])
    ends = times + hold_ns
    np.minimum(ends[:-1], times[1:], out=ends[:-1])
    known = Segments(times, ends, power, bits)
    last = times.size if now_ns >= ends[-1] else times.size - 1
    return known.part(0, last), known.part(last, times.size)


@dataclass(frozen=True, slots=True)
class Pieces:
    """Segments cut at the block grid: block, end_ns, span_ns, head (m,); power_w, flags (m, c).

    head marks the piece with which a reading begins; since_ns (m,): how long before the piece.
    """

    block: I
    end_ns: I
    span_ns: I
    head: NDArray[np.bool_]
    power_w: F
    flags: I
    since_ns: I

    def part(self, first: int, last: int) -> Pieces:
        """Pieces first to last, the last one left out."""
        return Pieces(*(getattr(self, name)[first:last] for name in Pieces.__slots__))


def cut(segments: Segments, block_ns: int) -> Pieces:
    """Cut segments where a block ends, so that each piece lies in one block."""
    first = segments.start_ns // block_ns
    count = (segments.end_ns - 1) // block_ns - first + 1
    if count.size == 0 or int(count.max()) == 1:
        span = segments.end_ns - segments.start_ns
        head = np.ones(first.size, np.bool_)
        none = np.zeros(first.size, np.int64)
        return Pieces(first, segments.end_ns, span, head, segments.power_w, segments.flags, none)
    row = np.repeat(np.arange(first.size), count)
    offset = np.arange(row.size) - np.repeat(np.cumsum(count) - count, count)
    block = first[row] + offset
    start = np.maximum(segments.start_ns[row], block * block_ns)
    end = np.minimum(segments.end_ns[row], (block + 1) * block_ns)
    power, flags = segments.power_w[row], segments.flags[row]
    since = start - segments.start_ns[row]
    return Pieces(block, end, end - start, offset == 0, power, flags, since)
