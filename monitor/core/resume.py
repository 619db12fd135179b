"""Going on within a boot: the windows are refilled exactly from what the record kept."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from monitor.core.alarms import Side
from monitor.core.blocks import BLOCK_NS, Blocks, Trace, empty_blocks, from_rows, join
from monitor.core.gather import Gathered, nothing
from monitor.core.hold import Pieces, complete, cut, no_segments
from monitor.core.judgement import judge
from monitor.core.pipeline import State, close, convert, history_blocks, sides, start
from monitor.core.readings import NS_PER_S, Batch, joined
from monitor.core.rows import BlockRows
from monitor.core.silence import KEY, Hearing
from monitor.core.station import Station

LATE_BLOCKS = 12
"""Rows may reach the record so many blocks after the raw counts that they are made of."""


def since_ns(last_ns: int, here: Station) -> int:
    """From where the record's blocks and raw counts are needed, given its last reading."""
    blocks = last_ns // BLOCK_NS - history_blocks(here) - LATE_BLOCKS
    return blocks * BLOCK_NS - here.hold_ns


def resume(
    here: Station, rows: BlockRows, raw: Sequence[Batch], boot_ns: int, raised: frozenset[str]
) -> tuple[State, Gathered]:
    """The state after the last reading kept, equal to the bit to the one that was lost, and the
    blocks and windows that had not reached the record.

    rows, raw: from since_ns on. boot_ns: where to begin if there is no reading. raised: keys of
    the alarms that stood; their delays begin anew.
    """
    batches = [batch for batch in raw if batch.n]
    if not batches:
        return start(here, boot_ns, raised), nothing()
    kept = joined(batches)
    times = kept.times_ns
    power_w, flags = convert(kept, here)
    last = int(times[-1])
    segments, pending = complete(
        no_segments(here.channels), times, power_w, flags, last, here.hold_ns
    )
    first, keep, channels = last // BLOCK_NS, history_blocks(here), here.channels
    base = _first_missing(rows, int(times[0]) // BLOCK_NS, first)
    whole = times[~np.all(np.isnan(power_w), axis=1)]
    heard = int(whole[-1]) if whole.size else int(times[0])
    state = State(
        pending,
        empty_blocks(base, 1, channels),
        from_rows(rows, base - keep, base, channels),
        last,
        last,
        _stood(from_rows(rows, base - keep, base, channels), here, raised),
        Hearing(heard, KEY in raised),
    )
    out = nothing()
    state = close(state, _from_block(cut(segments, BLOCK_NS), base), first, here, out)
    out.events.clear()  # they went with the raw counts
    return replace(state, sides=_as_told(state.sides, here, raised)), out


def _stood(history: Blocks, here: Station, raised: frozenset[str]) -> tuple[Side, ...]:
    """Where each watch stood at the end of history, so that no delay begins anew.

    Judged from where the shortest window has filled after the first reading.
    """
    full = here.averagings_s[0] * NS_PER_S // BLOCK_NS
    seen = np.flatnonzero(history.n.sum(axis=1))
    begun = int(seen[0]) if seen.size else history.size
    history = history.part(begun, history.size)
    if history.size <= full:
        return sides(here, (history.first + history.size) * BLOCK_NS, raised)
    none = np.empty((0, here.channels))
    nowhere = np.empty(0, np.int64)
    counts = none.astype(np.int64)
    trace = Trace(nowhere, nowhere, none, counts, counts, none, none, counts)
    known = join(history, empty_blocks(history.first + history.size, 1, here.channels))
    begin = sides(here, (history.first + full) * BLOCK_NS, raised)
    return judge(known, history, trace, full, begin, here, nothing())


def _as_told(after: tuple[Side, ...], here: Station, raised: frozenset[str]) -> tuple[Side, ...]:
    """The sides with the alarms that people were told of: their events are in the record."""
    told = sides(here, 0, raised)
    return tuple(replace(side, raised=t.raised) for side, t in zip(after, told))


def _first_missing(rows: BlockRows, begin: int, opened: int) -> int:
    """The first block after those in the record; begin: that of the first reading."""
    known = int(rows.start_ns.max()) // BLOCK_NS + 1 if rows.start_ns.size else begin
    return max(min(known, opened), opened - LATE_BLOCKS)


def _from_block(pieces: Pieces, first: int) -> Pieces:
    keep = pieces.block >= first
    return Pieces(*(getattr(pieces, name)[keep] for name in Pieces.__slots__))
