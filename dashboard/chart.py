"""The curve of averages over a span: where every part of the drawing stands. No markup.

Coordinates are those of the drawing (y downward). The curve is broken at every gap and at every
figure that is not there; an average with too small a valid share is drawn as a broken line.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from dashboard import ticks
from dashboard.span import Span
from monitor.core.alarms import ENOUGH_SHARE
from monitor.record.coverage import Coverage

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741

MAX_DECADES = 6
SPREAD_NS = 3 * 60_000_000_000
"""Two averages further apart than this have no line between them, unless reduced to bins."""


@dataclass(frozen=True, slots=True)
class Series:
    """What is drawn: times (UTC ns) and figures of shape (n,); nan where there is no figure.

    coverage: how much of any part of the span was measured. below: where the figure is what the
    average stays below; lower: where the average may be higher than it; empty where that is
    nowhere.
    """

    utc_ns: I
    low: F
    mean: F
    high: F
    valid_share: F
    gaps: Sequence[tuple[int, int]]
    bin_ns: int = 0
    coverage: Coverage = field(default_factory=Coverage)
    below: NDArray[np.bool_] = field(default_factory=lambda: np.empty(0, np.bool_))
    lower: NDArray[np.bool_] = field(default_factory=lambda: np.empty(0, np.bool_))


@dataclass(frozen=True, slots=True)
class Mark:
    """A level drawn across: kind 'limit' (the ledge) or 'alert'."""

    value: float
    text: str
    kind: str


@dataclass(frozen=True, slots=True)
class Frame:
    """The drawing's outer size and the plot's edges in it."""

    width: int
    height: int
    left: int = 58
    right: int = 12
    top: int = 26
    bottom: int = 34

    @property
    def x1(self) -> int:
        """Right edge of the plot."""
        return self.width - self.right

    @property
    def y1(self) -> int:
        """Lower edge of the plot."""
        return self.height - self.bottom


@dataclass(frozen=True, slots=True)
class Chart:
    """A drawing, ready for a template."""

    frame: Frame
    line: str
    partial: str
    band: str
    dots: list[tuple[float, float]]
    gaps: list[tuple[float, float]]
    x_ticks: list[tuple[float, str]]
    y_ticks: list[tuple[float, str]]
    marks: list[tuple[float, float, Mark]]
    outside: list[Mark]
    now_x: float | None


@dataclass(frozen=True, slots=True)
class Scale:
    """Figures to y; logarithmic or straight from 0."""

    frame: Frame
    low: float
    high: float
    logarithmic: bool

    def y(self, values: F) -> F:
        """Heights of the figures, cut to the plot."""
        if self.logarithmic:
            safe = np.clip(values, self.low, self.high)
            part = np.log(safe / self.low) / math.log(self.high / self.low)
        else:
            part = np.clip(values / self.high, 0.0, 1.0)
        return self.frame.y1 - (self.frame.y1 - self.frame.top) * part

    def y1(self, value: float) -> float:
        """Height of one figure."""
        return round(float(self.y(np.array([value]))[0]), 1)

    def marks(self) -> list[tuple[float, str]]:
        """Heights and labels of the axis."""
        found = (
            ticks.decades(self.low, self.high)
            if self.logarithmic
            else ticks.straight(self.high, max(3, (self.frame.y1 - self.frame.top) // 45))
        )
        return [(self.y1(value), text) for value, text in found]


def scale_for(frame: Frame, series: Series, marks: Sequence[Mark], logarithmic: bool) -> Scale:
    """A scale that holds every figure; a logarithmic one also every mark."""
    every = np.concatenate([series.mean, series.high])
    found = every[np.isfinite(every) & (every > 0)]
    values = [m.value for m in marks if m.value > 0 and math.isfinite(m.value)]
    top = float(found.max()) if found.size else 0.0
    if not logarithmic:
        near = [v for v in values if v <= 2.5 * top or not found.size]
        return Scale(frame, 0.0, (max([top, *near]) or 1.0) * 1.08, False)
    high = (max([top, *values]) or 1.0) * 1.25
    means = series.mean[np.isfinite(series.mean) & (series.mean > 0)]
    bottom = min([*values, float(means.min()) if means.size else high / 100])
    return Scale(frame, max(bottom / 1.6, high / 10**MAX_DECADES), high, True)


def draw(
    series: Series,
    span: Span,
    marks: Sequence[Mark],
    frame: Frame,
    logarithmic: bool,
    now_ns: int,
) -> Chart:
    """The drawing of a series over a span; a span that is not over yet shows where now is."""
    scale = scale_for(frame, series, marks, logarithmic)
    x = _x(series.utc_ns, span, frame)
    full = np.isfinite(series.mean)
    enough = full & (series.valid_share >= ENOUGH_SHARE)
    pieces = _pieces(series, full)
    y = scale.y(series.mean)
    inside = [m for m in marks if m.value <= scale.high]
    return Chart(
        frame=frame,
        line=_path(x, y, pieces, enough),
        partial=_path(x, y, pieces, ~enough),
        band=_band(x, scale.y(series.low), scale.y(series.high), pieces),
        dots=[(round(float(x[a]), 1), round(float(y[a]), 1)) for a, b in pieces if b - a == 1],
        gaps=_gap_boxes(series, span, frame),
        x_ticks=_x_ticks(span, frame),
        y_ticks=scale.marks(),
        marks=_place(inside, scale),
        outside=[m for m in marks if m.value > scale.high],
        now_x=float(_x(np.array([now_ns]), span, frame)[0].round(1))
        if span.start_ns < now_ns < span.end_ns
        else None,
    )


def pennants(began: Sequence[tuple[int, int]], span: Span, frame: Frame) -> list[tuple[float, str]]:
    """(x, number) of alarms that began, given (UTC ns, number); '' where it has no room."""
    placed: list[tuple[float, str]] = []
    free = 0.0
    for utc_ns, number in sorted(began):
        x = round(float(_x(np.array([utc_ns]), span, frame)[0]), 1)
        room = x >= free and x <= frame.x1 - 24
        placed.append((x, str(number) if room else ""))
        free = x + 28 if room else free
    return placed


def _x(utc_ns: I, span: Span, frame: Frame) -> F:
    part = (utc_ns - span.start_ns) / (span.end_ns - span.start_ns)
    return frame.left + (frame.x1 - frame.left) * np.clip(part, 0.0, 1.0)


def _x_ticks(span: Span, frame: Frame) -> list[tuple[float, str]]:
    room = max(3, (frame.x1 - frame.left) // 72)
    found = ticks.calendar(span, room)
    plot = frame.x1 - frame.left
    return [
        (round(frame.left + plot * ((moment - span.start) / (span.end - span.start)), 1), text)
        for moment, text in found
    ]


def _pieces(series: Series, full: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """Runs [a, b) of points that a line may join: no gap, no missing figure between them."""
    n = series.utc_ns.size
    if n == 0:
        return []
    joined = full[1:] & full[:-1]
    joined &= np.diff(series.utc_ns) <= max(SPREAD_NS, 3 * series.bin_ns)
    for start, end in series.gaps:
        joined &= ~((series.utc_ns[:-1] < end) & (series.utc_ns[1:] > start))
    edges = np.concatenate([[0], np.flatnonzero(~joined) + 1, [n]])
    return [(int(a), int(b)) for a, b in zip(edges[:-1], edges[1:], strict=True) if full[a]]


def _path(x: F, y: F, pieces: list[tuple[int, int]], wanted: NDArray[np.bool_]) -> str:
    """Path of those strokes whose end point is wanted; the pen moves on over the others."""
    parts: list[str] = []
    for a, b in pieces:
        pen_down = False
        for i in range(a + 1, b):
            if not wanted[i]:
                pen_down = False
                continue
            if not pen_down:
                parts.append(f"M{x[i - 1]:.1f} {y[i - 1]:.1f}")
                pen_down = True
            parts.append(f"L{x[i]:.1f} {y[i]:.1f}")
    return "".join(parts)


def _band(x: F, top: F, bottom: F, pieces: list[tuple[int, int]]) -> str:
    """Closed outlines between the lower and the upper figure."""
    parts: list[str] = []
    for a, b in pieces:
        if b - a < 2:
            continue
        there = " ".join(f"{x[i]:.1f} {top[i]:.1f}" for i in range(a, b))
        back = " ".join(f"{x[i]:.1f} {bottom[i]:.1f}" for i in range(b - 1, a - 1, -1))
        parts.append(f"M{there} {back}Z")
    return "".join(parts).replace("nan", "0")


def _gap_boxes(series: Series, span: Span, frame: Frame) -> list[tuple[float, float]]:
    """(x, width) of the gaps within the span; a short one is kept wide enough to be seen."""
    boxes: list[tuple[float, float]] = []
    for start, end in series.gaps:
        ends = np.array([max(start, span.start_ns), min(end, span.end_ns)], np.int64)
        if ends[1] <= ends[0]:
            continue
        a, b = _x(ends, span, frame)
        boxes.append((round(float(a), 1), round(max(2.0, float(b - a)), 1)))
    return boxes


def _place(marks: Sequence[Mark], scale: Scale) -> list[tuple[float, float, Mark]]:
    """(y, y of the label, mark) from the top down; labels a line apart."""
    placed: list[tuple[float, float, Mark]] = []
    free = 0.0
    for mark in sorted(marks, key=lambda m: -m.value):
        y = scale.y1(mark.value)
        label_y = max(y - 5, free)
        placed.append((y, round(label_y, 1), mark))
        free = label_y + 16
    return placed
