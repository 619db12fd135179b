"""Judge windows: each minute for the record, and at every reading for the alert levels."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.alarms import ENOUGH_SHARE, AlertRule, Side, Watch, codes, follow
from monitor.core.blocks import BLOCK_NS, Blocks, Trace
from monitor.core.figures import (
    Powers,
    exposures,
    fields,
    over_channels,
    overloaded,
    powers,
    valid_share,
    windows,
)
from monitor.core.gather import Gathered
from monitor.core.readings import NS_PER_S
from monitor.core.rows import Event
from monitor.core.station import Station
from monitor.core.windows import Sums, at_block_ends, inside_blocks

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741
MINUTE_NS = 60 * NS_PER_S
GAPS = "gaps"
"""Key of the alarm that too little of the time is measured."""
GAPS_RULE = AlertRule("gaps", "", "", "", 0.0, 0.0, delay_s=360.0, return_delay_s=0.0)
"""The delay lets the window fill after a start."""
OVERLOAD = "overload"
"""Key of the alarm that readings lay above the range: the strongest field of all may be a gap."""
OVERLOAD_RULE = AlertRule("overload", "", "", "", 0.0, 0.0, delay_s=0.0, return_delay_s=0.0)
INSTRUMENT_KEYS = (GAPS, OVERLOAD)


@dataclass(frozen=True, slots=True)
class Points:
    """The windows of one averaging time at every point, in time order."""

    sums: Sums
    powers: Powers
    share: F


def judge(
    known: Blocks,
    closed: Blocks,
    trace: Trace,
    skip: int,
    sides: tuple[Side, ...],
    here: Station,
    out: Gathered,
) -> tuple[Side, ...]:
    """Judge all points of newly closed blocks and of the open one; give the new sides.

    known: history (skip rows), closed and the open block; trace: the points inside blocks.
    """
    inner = _inner(trace, known.first + skip)
    after = list(sides)
    for averaging_s in here.averagings_s:
        n = averaging_s * NS_PER_S // BLOCK_NS
        ends = at_block_ends(closed, skip, n, BLOCK_NS, batched=here.batched)
        keep(ends.at((ends.end_ns % MINUTE_NS == 0) & ends.present), averaging_s, here, out)
        if averaging_s == here.averagings_s[0]:
            after[-2:] = _watch_instrument(ends, averaging_s, after[-2:], out)
        watched = [
            (i, watch)
            for i, watch in enumerate(here.watches)
            if round(here.scopes[watch.scope].averaging_s) == averaging_s
        ]
        if not watched:
            continue
        inside = inside_blocks(known, inner, skip, n, BLOCK_NS, batched=here.batched)
        points = _points(inside, ends, averaging_s, here)
        crossed: set[int] = set()
        for i, watch in watched:
            after[i] = _watch(points, watch, after[i], here, crossed, out)
        extra = np.array(sorted(crossed), np.int64)
        extra = extra[points.sums.end_ns[extra] % MINUTE_NS != 0]
        keep(points.sums.at(extra), averaging_s, here, out)
    return tuple(after)


def keep(sums: Sums, averaging_s: int, here: Station, out: Gathered) -> None:
    """Add the rows of these windows to what goes in the record."""
    if sums.end_ns.size:
        out.windows.append(windows(sums, averaging_s))
        out.fields.append(fields(sums, averaging_s, here))
        out.exposures.append(exposures(sums, averaging_s, here))


def _inner(trace: Trace, first: int) -> Trace:
    """The points that do not fall on the end of their block: those are judged as block ends."""
    inside = trace.end_ns < (first + trace.row + 1) * BLOCK_NS
    return Trace(*(getattr(trace, name)[inside] for name in Trace.__slots__))


def _points(inside: Sums, ends: Sums, averaging_s: int, here: Station) -> Points:
    order = np.argsort(np.concatenate([inside.end_ns, ends.end_ns]), kind="stable")
    merged = Sums(
        *(
            np.concatenate([getattr(inside, name), getattr(ends, name)])[order]
            for name in Sums.__slots__
        )
    )
    return Points(merged, powers(merged, averaging_s, here), valid_share(merged, averaging_s))


def _watch(
    points: Points, watch: Watch, side: Side, here: Station, crossed: set[int], out: Gathered
) -> Side:
    low = over_channels(points.powers.low, here.least[:, watch.scope])
    mean = over_channels(points.powers.mean, here.coefficients[:, watch.scope])
    code = codes(low, mean, points.share, overloaded(points.sums), watch.rule)
    followed = follow(side, points.sums.end_ns, code, watch.rule)
    crossed.update(followed.crossed)
    for at, raised in followed.changes:
        crossed.add(at)
        figures = float(low[at]), float(mean[at]), float(points.share[at])
        out.events.append(_event(int(points.sums.end_ns[at]), raised, figures, watch))
    return followed.side


def _watch_instrument(
    ends: Sums, averaging_s: int, before: list[Side], out: Gathered
) -> list[Side]:
    """Sides of gaps and overload after these windows.

    Silence needs one unbroken pause; many short ones, or one dead axis, blind as well.
    """
    share = valid_share(ends, averaging_s)
    after = []
    for key, rule, bad, side in (
        (GAPS, GAPS_RULE, share < ENOUGH_SHARE, before[0]),
        (OVERLOAD, OVERLOAD_RULE, overloaded(ends), before[1]),
    ):
        followed = follow(side, ends.end_ns, np.where(bad, 1, -1).astype(np.int8), rule)
        for at, raised in followed.changes:
            body: dict[str, object] = {"raised": raised, "valid_share": float(share[at])}
            out.events.append(Event(int(ends.end_ns[at]), "alarm", key, body))
        after.append(followed.side)
    return after


def _event(at_ns: int, raised: bool, figures: tuple[float, float, float], watch: Watch) -> Event:
    """exposure_ratio is the figure that crossed: the mean where enough is valid, else the low."""
    low, mean, share = figures
    by_mean = share >= ENOUGH_SHARE and math.isfinite(mean)
    body: dict[str, object] = {
        "raised": raised,
        "exposure_ratio": mean if by_mean else low,
        "figure": "mean of the valid part" if by_mean else "gaps as zero",
        "ratio_low": low,
        "ratio_mean": mean if math.isfinite(mean) else None,
        "valid_share": share,
        "level": watch.rule.ratio if raised else watch.rule.returns_at,
        "scope": watch.scope,
    }
    return Event(at_ns, "alarm", watch.key, body)
