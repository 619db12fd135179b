"""A span of the past in a few sentences: its largest average, its uncertainty, what is measured."""

from __future__ import annotations

import math

import numpy as np

from dashboard import bounds, past, told, words
from dashboard.models import RecordLike
from dashboard.wish import Wish
from monitor.core import flags
from monitor.record.types import History

MOST_IN_BIN = 20_000


def sentences(
    summary: past.Summary, wish: Wish, found: History, record: RecordLike, now_ns: int
) -> list[str]:
    """What is known of the span, in words."""
    name = words.average(wish.averaging_s)
    if wish.span.start_ns >= now_ns:
        return [f"This span lies ahead: there is no {name} of it yet."]
    if summary.most is None or summary.at_ns is None or summary.index is None:
        return [f"No {name} in this span: no measurement, which {words.NOTHING}."]
    when = words.moment(words.utc_of(summary.at_ns))
    largest = _largest(summary.at_ns, summary.index, wish, found, record)
    lines = [f"Largest {name}: {largest}, ending {when}."]
    u_db = float(found.u_db[summary.index])
    if math.isfinite(u_db):
        of_e = " of E" if wish.show == "ratio" else ""
        lines.append(f"Expanded uncertainty{of_e} there: {words.figure(u_db)} dB.")
    share = words.share(summary.measured_share)
    if summary.gap_count:
        lines.append(
            f"Measured for {share} of the span so far; {summary.gap_count} "
            f"gap{'s' if summary.gap_count > 1 else ''}, {words.duration(summary.gap_s)} in all, "
            f"{'say' if summary.gap_count > 1 else 'says'} nothing about the field."
        )
    else:
        lines.append(f"Measured for {share} of the span so far, without a gap.")
    return lines


def _largest(at_ns: int, index: int, wish: Wish, found: History, record: RecordLike) -> str:
    """The largest average as a value or as the bound that it is."""
    scope = wish.scope if wish.show == "ratio" else None
    if found.bin_ns:
        # A bin tells the extremes of several averages; a bound must be that of one of them.
        around = (at_ns - found.bin_ns, at_ns + found.bin_ns)
        close = record.history(*around, wish.averaging_s, MOST_IN_BIN)
        means = past.figures(close, scope)[1]
        if np.isfinite(means).any():
            found, index = close, int(np.nanargmax(means))
    low, mean, high = (float(figure[index]) for figure in past.figures(found, scope))
    row = {
        "averaging_s": wish.averaging_s,
        "valid_share": float(found.valid_share[index]),
        "flags": flags.words(int(found.flags[index])),
    }
    if wish.show == "e":
        u = {"u_db": found.base_u_db[index], "added_e2": found.added_e2[index]}
        return f"{told.e_words({**row, **u, 'e_low': low, 'e_mean': mean, 'e_high': high}, ())} V/m"
    exposure = {**row, "ratio_low": low, "ratio_mean": mean, "ratio_high": high}
    if scope is not None and scope in found.ratio_u:
        u_db, added = found.ratio_u[scope]
        exposure |= {"u_db": u_db[index], "added_ratio": added[index]}
    return told.of_limit(bounds.ratio(exposure, [row]))


def uncertainty(found: History) -> str:
    """The largest expanded uncertainty of E in the span, for the words below the drawing."""
    known = found.u_db[np.isfinite(found.u_db)]
    return f"{words.figure(float(known.max()))} dB" if known.size else ""
