"""Going on within a boot: the windows are refilled exactly from what the record kept."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from monitor.core.blocks import BLOCK_NS, accumulate, empty_blocks, from_rows
from monitor.core.hold import Pieces, complete, cut, no_segments
from monitor.core.pipeline import State, convert, history_blocks, sides, start
from monitor.core.readings import Batch
from monitor.core.rows import BlockRows
from monitor.core.silence import KEY, Hearing
from monitor.core.station import Station


def since_ns(last_ns: int, here: Station) -> int:
    """From where the record's blocks and raw counts are needed, given its last reading."""
    return (last_ns // BLOCK_NS - history_blocks(here)) * BLOCK_NS - here.hold_ns


def resume(
    here: Station, rows: BlockRows, raw: Sequence[Batch], boot_ns: int, raised: frozenset[str]
) -> State:
    """The state after the last reading kept, equal to the bit to the one that was lost.

    rows, raw: from since_ns on. boot_ns: where to begin if there is no reading. raised: keys of
    the alarms that stood; their delays begin anew.
    """
    batches = [batch for batch in raw if batch.n]
    if not batches:
        return start(here, boot_ns, raised)
    times = np.concatenate([batch.times_ns for batch in batches])
    counts = np.concatenate([batch.counts for batch in batches])
    bits = np.concatenate([batch.flags for batch in batches])
    power_w, flags = convert(counts, bits, here)
    last = int(times[-1])
    first, keep = last // BLOCK_NS, history_blocks(here)
    segments, pending = complete(
        no_segments(here.channels), times, power_w, flags, last, here.hold_ns
    )
    pieces = _from_block(cut(segments, BLOCK_NS), first)
    opened, _ = accumulate(empty_blocks(first, 1, here.channels), pieces, first)
    whole = times[~np.all(np.isnan(power_w), axis=1)]
    heard = int(whole[-1]) if whole.size else int(times[0])
    return State(
        pending,
        opened,
        from_rows(rows, first - keep, first, here.channels),
        last,
        last,
        sides(here, last, raised),
        Hearing(heard, KEY in raised),
    )


def _from_block(pieces: Pieces, first: int) -> Pieces:
    keep = pieces.block >= first
    return Pieces(*(getattr(pieces, name)[keep] for name in Pieces.__slots__))
