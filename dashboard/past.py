"""What the history page says: summary, table rows and levels of a span. Pure."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import timedelta

import numpy as np
from numpy.typing import NDArray

from dashboard.chart import Mark, Series
from dashboard.span import Span
from dashboard.words import figure, utc_of
from monitor.core.alarms import ENOUGH_SHARE
from monitor.core.flags import LOWER_BOUND, UPPER_BOUND
from monitor.record.types import WINDOW_EVERY_NS, History

F = NDArray[np.float64]
NS = 1_000_000_000
_ROW_MINUTES = (10, 30, 60, 180, 360, 1440, 7 * 1440, 28 * 1440, 91 * 1440, 365 * 1440)
MAX_ROWS = 36
DUE_NS = 2 * WINDOW_EVERY_NS + 10 * NS
"""A new average is in the record at the latest so long after the one before."""


@dataclass(frozen=True, slots=True)
class Row:
    """A line of the table: a part of the span; figures are None where there is no measurement.

    most_thin, least_thin: too little of that average's time is valid. most_below, least_below: it
    is what that average stays below. most_lower, least_lower: the average may be higher than it.
    """

    part: Span
    least: float | None
    most: float | None
    most_at_ns: int | None
    valid_share: float
    gap_s: float
    most_thin: bool = False
    least_thin: bool = False
    most_below: bool = False
    least_below: bool = False
    most_lower: bool = False
    least_lower: bool = False


@dataclass(frozen=True, slots=True)
class Summary:
    """The span in a few figures: the largest average, when, and how much was measured."""

    most: float | None
    at_ns: int | None
    index: int | None
    measured_share: float
    gap_s: float
    gap_count: int


def series_of(history: History, scope: int | None, now_ns: int) -> Series:
    """The field in V/m (scope None), or the exposure ratio of a scope, as a series."""
    low, mean, high = figures(history, scope)
    gaps = gaps_until(history.gaps, now_ns)
    return Series(
        history.utc_ns, low, mean, high, history.valid_share, gaps, history.bin_ns,
        history.coverage, _all_below(history), (history.flags & int(LOWER_BOUND)) != 0,
    )  # fmt: skip


def _all_below(history: History) -> NDArray[np.bool_]:
    """Where every average of a point is below its detection limit: none of them then has a U.

    A point that stands for several has the flags of any of them, and the largest of their U.
    """
    below: NDArray[np.bool_] = (history.flags & int(UPPER_BOUND)) != 0
    below &= np.isnan(history.u_db) & np.isfinite(history.e_mean)
    return below


def figures(history: History, scope: int | None) -> tuple[F, F, F]:
    """Lowest, mean and highest: E in V/m (scope None), or the exposure ratio of a scope."""
    if scope is None:
        return history.e_low, history.e_mean, history.e_high
    nothing = np.full(history.utc_ns.size, np.nan)
    return history.ratios.get(scope, (nothing, nothing, nothing))


def gaps_until(gaps: Sequence[tuple[int, int]], now_ns: int) -> list[tuple[int, int]]:
    """The gaps up to now; what has not happened yet is none, and an average may be due still."""
    begun = [(start, min(end, now_ns)) for start, end in gaps if start < now_ns]
    return [(start, end) for start, end in begun if end < now_ns or end - start > DUE_NS]


def gap_seconds(gaps: Sequence[tuple[int, int]], start_ns: int, end_ns: int) -> float:
    """Seconds of [start, end) that lie in gaps."""
    return sum(max(0, min(end, end_ns) - max(start, start_ns)) for start, end in gaps) / NS


def measured_share(series: Series, start_ns: int, end_ns: int) -> float:
    """Part of [start, end) with valid readings. Short pauses are no gaps, but they count here.

    The last moments may still be on their way into the record: they are not held against it.
    """
    if not series.coverage.start_ns.size:  # only the gaps are known
        return max(0.0, 1.0 - gap_seconds(series.gaps, start_ns, end_ns) * NS / (end_ns - start_ns))
    until = series.coverage.until_ns
    if until and end_ns - until <= DUE_NS:
        end_ns = max(min(end_ns, until), start_ns + 1)
    return series.coverage.share(start_ns, end_ns)


def summary(series: Series, span: Span, now_ns: int) -> Summary:
    """Summary of a series over the part of the span that has passed."""
    end_ns = max(span.start_ns + NS, min(span.end_ns, now_ns))
    gap_s = gap_seconds(series.gaps, span.start_ns, end_ns)
    length_s = (end_ns - span.start_ns) / NS
    measured = measured_share(series, span.start_ns, end_ns)
    inside = sum(1 for a, b in series.gaps if a < end_ns and b > span.start_ns)
    if not np.isfinite(series.mean).any():
        return Summary(None, None, None, 0.0, length_s, inside)
    index = int(np.nanargmax(series.mean))
    return Summary(
        float(series.mean[index]), int(series.utc_ns[index]), index, measured, gap_s, inside
    )


def rows(series: Series, span: Span, now_ns: int) -> list[Row]:
    """At most MAX_ROWS equal parts of the span that has begun, each with its figures."""
    step = next(
        (timedelta(minutes=m) for m in _ROW_MINUTES if span.seconds / 60 / m <= MAX_ROWS),
        timedelta(seconds=math.ceil(span.seconds / MAX_ROWS)),
    )
    found: list[Row] = []
    start = span.start
    while start < span.end:
        part = Span(start, min(start + step, span.end))
        if part.start_ns >= now_ns:
            break
        found.append(_row(series, part, now_ns))
        start += step
    return found


def _row(series: Series, part: Span, now_ns: int) -> Row:
    end_ns = min(part.end_ns, now_ns)
    inside = (series.utc_ns > part.start_ns) & (series.utc_ns <= part.end_ns)
    inside &= np.isfinite(series.mean)
    gap_s = gap_seconds(series.gaps, part.start_ns, end_ns)
    measured = measured_share(series, part.start_ns, end_ns)
    if not inside.any():
        return Row(part, None, None, None, 0.0, gap_s)
    means = series.mean[inside]
    thin = ~(series.valid_share[inside] >= ENOUGH_SHARE)
    nowhere = np.zeros(means.size, np.bool_)
    below = series.below[inside] if series.below.size else nowhere
    lower = series.lower[inside] if series.lower.size else nowhere
    at, least = int(np.argmax(means)), int(np.argmin(means))
    return Row(
        part,
        float(means[least]),
        float(means[at]),
        int(series.utc_ns[inside][at]),
        measured,
        gap_s,
        bool(thin[at]),
        bool(thin[least]),
        bool(below[at]),
        bool(below[least]),
        bool(lower[at]),
        bool(lower[least]),
    )


def equivalent_limit(history: History, scope: int, spread: float = 0.05) -> float | None:
    """E in V/m at which the mixture as measured would reach the scope's limit.

    None where there is no figure, or where it varies over the span by more than spread, because
    the limit then depends on which frequencies were on the air.
    """
    if scope not in history.ratios:
        return None
    ratio = history.ratios[scope][1]
    usable = np.isfinite(ratio) & np.isfinite(history.e_mean) & (ratio > 0) & (history.e_mean > 0)
    if not usable.any():
        return None
    limits = history.e_mean[usable] / np.sqrt(ratio[usable])
    low, high = float(limits.min()), float(limits.max())
    return low if high <= low * (1 + spread) else None


def marks(levels: Sequence[Mapping[str, object]], limit: float | None, in_e: bool) -> list[Mark]:
    """The limit (V/m where in_e, else a ratio) and the alert levels of a scope as marks.

    A level at the limit itself has no line of its own: the ledge is there.
    """
    if limit is None:
        return []
    found = [Mark(limit, f"limit {figure(limit, 3)} V/m" if in_e else "limit", "limit")]
    for ratio in sorted({float(str(level["ratio"])) for level in levels} - {1.0}):
        value = limit * math.sqrt(ratio) if in_e else ratio
        label = f"{figure(value, 3)} V/m" if in_e else f"{ratio:g}"
        found.append(Mark(value, f"alert {label}", "alert"))
    return found


def gap_words(gaps: Sequence[tuple[int, int]], span: Span, at_most: int = 12) -> list[str]:
    """The longest gaps within the span in words, in the order of time."""
    cut = [(max(a, span.start_ns), min(b, span.end_ns)) for a, b in gaps]
    longest = sorted((g for g in cut if g[1] > g[0]), key=lambda g: g[0] - g[1])[:at_most]
    return [
        f"{utc_of(a):%Y-%m-%d %H:%M} to {utc_of(b):%Y-%m-%d %H:%M} UTC" for a, b in sorted(longest)
    ]
