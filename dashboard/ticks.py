"""Where the marks of an axis stand: round figures, and the calendar's own steps. Pure."""

from __future__ import annotations

import math
from datetime import datetime, timedelta

from dashboard.span import Span, day, month
from dashboard.words import figure

Tick = tuple[float, str]

MINUTE = timedelta(minutes=1)
_STEPS = [MINUTE * n for n in (1, 2, 5, 10, 15, 30, 60, 120, 180, 240, 360, 720)]
_DAYS = (1, 2, 7, 14)
_MONTHS = (1, 2, 3, 6, 12, 24, 60, 120, 240)


def straight(top: float, at_most: int = 6) -> list[Tick]:
    """Round figures from 0 up to top, at most so many above 0."""
    if not (math.isfinite(top) and top > 0):
        return [(0.0, "0")]
    raw = top / at_most
    magnitude = 10.0 ** math.floor(math.log10(raw))
    step = next(m * magnitude for m in (1, 2, 5, 10) if m * magnitude >= raw * (1 - 1e-9))
    count = math.floor(top / step + 1e-9)
    return [(0.0, "0")] + [(i * step, _trim(i * step)) for i in range(1, count + 1)]


def decades(low: float, high: float) -> list[Tick]:
    """Marks of a logarithmic axis: 1, 2, 5 over up to two decades, else powers of ten."""
    span = math.log10(high / low)
    steps = (1.0, 2.0, 5.0) if span <= 2.05 else (1.0,)
    every = max(1, math.ceil(span / 8))
    marks: list[Tick] = []
    for exponent in range(math.floor(math.log10(low)), math.ceil(math.log10(high)) + 1, every):
        for step in steps:
            value = step * 10.0**exponent
            if low * (1 - 1e-9) <= value <= high * (1 + 1e-9):
                marks.append((value, _trim(value)))
    return marks


def _trim(value: float) -> str:
    text = figure(value, 6)
    return text.rstrip("0").rstrip(".") if "." in text else text


def calendar(span: Span, at_most: int) -> list[tuple[datetime, str]]:
    """UTC moments that the calendar makes round, at most so many, with their labels."""
    length = span.end - span.start
    for step in _STEPS:
        if length / step <= at_most:
            return _clock(span, step)
    for days in _DAYS:
        if length / timedelta(days=days) <= at_most:
            return _dates(span, days)
    months = length / timedelta(days=30.44)
    step_months = next((n for n in _MONTHS if months / n <= at_most), _MONTHS[-1])
    return _months(span, step_months)


def _clock(span: Span, step: timedelta) -> list[tuple[datetime, str]]:
    moment = day(span.start).start
    moment += step * math.ceil((span.start - moment) / step)
    found = []
    while moment <= span.end:
        midnight = moment.hour == moment.minute == 0
        found.append((moment, f"{moment.day} {moment:%b}" if midnight else f"{moment:%H:%M}"))
        moment += step
    return found


def _dates(span: Span, days: int) -> list[tuple[datetime, str]]:
    moment = day(span.start).start
    if moment < span.start:
        moment += timedelta(days=1)
    if days % 7 == 0:
        moment += timedelta(days=-moment.weekday() % 7)
    found = []
    while moment <= span.end:
        found.append((moment, f"{moment.day} {moment:%b}"))
        moment += timedelta(days=days)
    return found


def _months(span: Span, step: int) -> list[tuple[datetime, str]]:
    moment = month(span.start).start
    if moment < span.start:
        moment = month(span.start).end
    found = []
    while moment <= span.end:
        index = moment.year * 12 + moment.month - 1
        if index % step == 0:
            plain = f"{moment:%Y}" if step >= 12 or moment.month == 1 else f"{moment:%b}"
            found.append((moment, plain))
        moment = month(moment).end
    return found
