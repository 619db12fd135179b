"""One window worked out again from the raw counts, equal to the bit to what was judged live."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import fields as columns
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from monitor.core.blocks import BLOCK_NS
from monitor.core.figures import exposures, fields, windows
from monitor.core.gather import nothing, stack
from monitor.core.pipeline import live, start, step
from monitor.core.readings import NS_PER_S, Batch, empty_batch
from monitor.core.rows import ExposureRows, FieldRows, WindowRows
from monitor.core.station import Station

Rows = TypeVar("Rows", WindowRows, FieldRows, ExposureRows)
Mask = NDArray[np.bool_]
Window = tuple[WindowRows, FieldRows, ExposureRows]


def raw_span_ns(end_ns: int, averaging_s: int, here: Station) -> tuple[int, int]:
    """From when to when raw counts are needed for the window of averaging_s that ends at end_ns."""
    first = end_ns - averaging_s * NS_PER_S - here.hold_ns
    return (first // BLOCK_NS - 1) * BLOCK_NS, end_ns + here.hold_ns + 2 * BLOCK_NS


def window_again(
    here: Station, raw: Sequence[Batch], end_ns: int, averaging_s: int
) -> Window | None:
    """The rows of that window; None where the counts do not reach its end.

    raw: every batch within raw_span_ns. A window at a full minute is one that judging keeps; any
    other was kept because a level was crossed by the reading that ends there.
    """
    begin_ns, until_ns = raw_span_ns(end_ns, averaging_s, here)
    state, out = start(here, begin_ns), nothing()
    for batch in [*raw, empty_batch(here.channels, until_ns)]:
        state, found = step(state, batch, here)
        out.extend(found)
    window, field, exposure = stack(out.windows), stack(out.fields), stack(out.exposures)
    if window is not None and field is not None and np.any(_of(field, end_ns, averaging_s)):
        judged = exposure if exposure is not None else _empty_exposures()
        return (
            taken(window, _of(window, end_ns, averaging_s)),
            taken(field, _of(field, end_ns, averaging_s)),
            taken(judged, (judged.end_ns == end_ns) & _scope_of(judged, averaging_s, here)),
        )
    return _inside(here, raw, begin_ns, end_ns, averaging_s)


def taken(rows: Rows, mask: Mask) -> Rows:
    """The rows of a mask."""
    return type(rows)(*(getattr(rows, column.name)[mask] for column in columns(rows)))


def _inside(
    here: Station, raw: Sequence[Batch], begin_ns: int, end_ns: int, averaging_s: int
) -> Window | None:
    """The window up to a reading: nothing after it is known yet."""
    state = start(here, begin_ns)
    for batch in raw:
        n = int(np.searchsorted(batch.times_ns, end_ns, "right"))
        if n:
            part = batch.part(slice(n), int(batch.times_ns[n - 1]))
            state, _ = step(state, part, here)
    if state.front_ns != end_ns:
        return None
    sums = live(state, averaging_s, here)
    return (
        windows(sums, averaging_s),
        fields(sums, averaging_s, here),
        exposures(sums, averaging_s, here),
    )


def _of(rows: WindowRows | FieldRows, end_ns: int, averaging_s: int) -> Mask:
    mask: Mask = (rows.end_ns == end_ns) & (rows.averaging_s == averaging_s)
    return mask


def _scope_of(rows: ExposureRows, averaging_s: int, here: Station) -> Mask:
    mine = [round(scope.averaging_s) == averaging_s for scope in here.scopes]
    return np.asarray(mine, np.bool_)[rows.scope]


def _empty_exposures() -> ExposureRows:
    none, nothing_ = np.empty(0, np.int64), np.empty(0)
    return ExposureRows(none, none, nothing_, nothing_, nothing_, nothing_, none, nothing_)
