"""The way of the data: counts, power, segments, blocks, windows, ratios, alarms. Pure."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from monitor.core.alarms import Side
from monitor.core.blocks import BLOCK_NS, Blocks, Trace, accumulate, empty_blocks, join, to_rows
from monitor.core.gather import Gathered, nothing
from monitor.core.hold import Pieces, Segments, complete, cut, no_segments
from monitor.core.judgement import INSTRUMENT_KEYS, judge
from monitor.core.readings import NS_PER_S, Batch
from monitor.core.silence import KEY as SILENCE
from monitor.core.silence import Hearing, listen
from monitor.core.station import Station
from monitor.core.windows import Sums, at_block_ends, inside_blocks

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741

MOST_CELLS = 1_000_000
"""Blocks times readings in the fullest block that are laid out at once."""


@dataclass(frozen=True, slots=True)
class State:
    """Everything that the next step needs.

    pending: the reading that still holds; opened: the open block; history: the closed blocks of
    the longest averaging time; front_ns: up to where all is known; last_ns: last reading.
    """

    pending: Segments
    opened: Blocks
    history: Blocks
    front_ns: int
    last_ns: int
    sides: tuple[Side, ...]
    hearing: Hearing
    late: int = 0


def start(here: Station, boot_ns: int, raised: frozenset[str] = frozenset()) -> State:
    """The state of a boot that begins with empty windows. raised: keys of alarms that stand."""
    block, keep = boot_ns // BLOCK_NS, history_blocks(here)
    return State(
        no_segments(here.channels),
        empty_blocks(block, 1, here.channels),
        empty_blocks(block - keep, keep, here.channels),
        boot_ns,
        boot_ns - 1,
        sides(here, boot_ns, raised),
        Hearing(boot_ns, SILENCE in raised),
    )


def sides(here: Station, at_ns: int, raised: frozenset[str]) -> tuple[Side, ...]:
    """Where each watch stands when nothing is known but which alarms are raised; those of the
    instrument come last."""
    keys = [*(watch.key for watch in here.watches), *INSTRUMENT_KEYS]
    return tuple(Side(0, at_ns, key in raised, key in raised) for key in keys)


def step(state: State, batch: Batch, here: Station) -> tuple[State, Gathered]:
    """Take readings in; give the new state and what belongs in the record."""
    came, batch = batch.n, accepted(state, batch)
    times = batch.times_ns
    power_w, flags = convert(batch, here)
    segments, pending = complete(state.pending, times, power_w, flags, batch.now_ns, here.hold_ns)
    front = int(pending.start_ns[0]) if pending.n else max(batch.now_ns, state.front_ns)
    hearing, heard = listen(
        state.hearing,
        times[~np.all(np.isnan(power_w), axis=1)],
        max(front, batch.now_ns),
        here.silence_ns,
    )
    out = nothing()
    out.events.extend(heard)
    for stretch, until_ns in _stretches(state, segments, front):
        state = _advance(state, stretch, until_ns, here, out)
    last = int(times[-1]) if times.size else state.last_ns
    late = state.late + came - batch.n
    return replace(state, pending=pending, last_ns=last, hearing=hearing, late=late), out


def accepted(state: State, batch: Batch) -> Batch:
    """The readings of a batch that step takes: not before what is already judged."""
    kept = (batch.times_ns >= state.front_ns) & (batch.times_ns > state.last_ns)
    if kept.all():
        return batch
    return batch.part(kept, batch.now_ns)


def convert(batch: Batch, here: Station) -> tuple[F, I]:
    """Power in W (n, c), nan where there is none, and flags (n, c).

    A channel with a temperature table reads right at every known temperature of the table.
    """
    power = np.empty(batch.counts.shape)
    bits = np.empty(batch.counts.shape, np.int64)
    for channel, table in enumerate(here.chain.tables):
        power[:, channel], bits[:, channel] = table.convert(batch.counts[:, channel])
    for correction in {one for one in here.corrections if one is not None}:
        factors = correction.factors(batch.temperature_dc)
        for channel, own in enumerate(here.corrections):
            if own is correction:
                power[:, channel] /= factors
    return power, bits | batch.flags[:, None] | here.chain.flags


def history_blocks(here: Station) -> int:
    """Blocks of the longest averaging time."""
    return max(here.averagings_s) * NS_PER_S // BLOCK_NS


def _stretches(state: State, segments: Segments, front_ns: int) -> Iterator[tuple[Segments, int]]:
    """Segments divided at pauses longer than the longest window, each with the time it runs to."""
    pause_ns = state.history.size * BLOCK_NS
    before = np.concatenate([[state.opened.first * BLOCK_NS], segments.end_ns[:-1]])
    cuts = np.flatnonzero(segments.start_ns - before > pause_ns) if segments.n else np.empty(0)
    bounds = [0, *(int(c) for c in cuts), segments.n]
    for first, last in zip(bounds, bounds[1:]):
        until = front_ns if last == segments.n else int(segments.start_ns[last])
        yield segments.part(first, last), until


def _advance(
    state: State, segments: Segments, until_ns: int, here: Station, out: Gathered
) -> State:
    """Close blocks up to until_ns; a pause is followed until every window is empty, then left."""
    pieces = cut(segments, BLOCK_NS)
    until = until_ns // BLOCK_NS
    busy = int(pieces.block[-1]) if pieces.block.size else state.opened.first
    drained = busy + state.history.size + 1
    state = close(state, pieces, min(until, drained), here, out)
    if until > drained:
        keep, channels = state.history.size, here.channels
        state = replace(
            state,
            opened=empty_blocks(until, 1, channels),
            history=empty_blocks(until - keep, keep, channels),
        )
    return replace(state, front_ns=until_ns)


def close(state: State, pieces: Pieces, until: int, here: Station, out: Gathered) -> State:
    """Add pieces, close the blocks before index until, judge every point on the way.

    No piece lies before the open block. What belongs in the record goes into out.
    """
    size = until - state.opened.first + 1
    crowd = int(np.bincount(pieces.block - state.opened.first).max()) if pieces.block.size else 0
    if size * crowd > MOST_CELLS and pieces.block[-1] > pieces.block[0]:
        middle = int(np.searchsorted(pieces.block, (pieces.block[0] + pieces.block[-1] + 1) // 2))
        left, right = pieces.part(0, middle), pieces.part(middle, pieces.block.size)
        state = close(state, left, int(right.block[0]), here, out)
        return close(state, right, until, here, out)
    blocks, trace = accumulate(state.opened, pieces, until, here.look_ns)
    known = join(state.history, blocks)
    closed = known.part(0, known.size - 1)
    if blocks.size > 1:
        out.blocks.append(to_rows(blocks.part(0, blocks.size - 1)))
    after = judge(known, closed, trace, state.history.size, state.sides, here, out)
    keep = state.history.size
    return replace(
        state,
        opened=known.part(known.size - 1, known.size),
        history=closed.part(closed.size - keep, closed.size),
        sides=after,
    )


def live(state: State, averaging_s: int, here: Station) -> Sums:
    """The window that ends at the front, one point: what the pages show as now."""
    n, keep = averaging_s * NS_PER_S // BLOCK_NS, state.history.size
    front = state.front_ns
    if front <= state.opened.first * BLOCK_NS:
        return at_block_ends(state.history, keep - 1, n, BLOCK_NS, batched=here.batched)
    opened = state.opened
    point = Trace(
        np.zeros(1, np.int64),
        np.array([front], np.int64),
        opened.energy_w_ns,
        opened.covered_ns,
        opened.observed_ns,
        opened.min_w,
        opened.max_w,
        opened.flags,
    )
    known = join(state.history, opened)
    return inside_blocks(known, point, keep, n, BLOCK_NS, batched=here.batched)
