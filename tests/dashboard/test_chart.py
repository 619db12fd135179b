"""The curve: where the figures stand, and that nothing is drawn across a gap."""

from __future__ import annotations

import re
from datetime import UTC, datetime, timedelta

import numpy as np
import pytest

from dashboard import chart, ticks
from dashboard.chart import Frame, Mark, Series
from dashboard.span import Span, day

S = 1_000_000_000
SPAN = day(datetime(2025, 3, 1, tzinfo=UTC))
FRAME = Frame(1000, 400)


def _series(minutes: list[int], values: list[float], gaps=(), share: float = 1.0) -> Series:
    t = np.array([SPAN.start_ns + m * 60 * S for m in minutes], np.int64)
    mean = np.array(values, float)
    spans = [(SPAN.start_ns + a * 60 * S, SPAN.start_ns + b * 60 * S) for a, b in gaps]
    return Series(t, mean * 0.9, mean, mean * 1.1, np.full(t.size, share), spans)


def _draw(series: Series, marks=(), logarithmic: bool = False, now_h: float = 30.0) -> chart.Chart:
    now_ns = SPAN.start_ns + int(now_h * 3600) * S
    return chart.draw(series, SPAN, marks, FRAME, logarithmic, now_ns)


def _points(path: str) -> list[tuple[float, float]]:
    return [(float(x), float(y)) for x, y in re.findall(r"[ML]([\d.]+) ([\d.]+)", path)]


def test_points_stand_where_time_and_figure_put_them() -> None:
    drawn = _draw(_series([720, 721], [1.0, 2.0]))
    top = max(2.0 * 1.1, 0.0) * 1.08
    (x, y), (_, y2) = _points(drawn.line)
    assert x == pytest.approx(FRAME.left + (FRAME.x1 - FRAME.left) / 2, abs=0.06)
    for found, value in ((y, 1.0), (y2, 2.0)):
        assert found == pytest.approx(FRAME.y1 - (FRAME.y1 - FRAME.top) * value / top, abs=0.06)


def test_nothing_is_drawn_across_a_gap() -> None:
    drawn = _draw(_series([10, 11, 12, 13], [1, 1, 1, 1], gaps=[(11, 11)]))
    assert drawn.line.count("M") == 1
    cut = _draw(_series([10, 11, 90, 91], [1, 1, 1, 1], gaps=[(11, 89)]))
    assert cut.line.count("M") == 2
    assert cut.band.count("M") == 2
    ((x, width),) = cut.gaps
    left, right = (FRAME.left + (FRAME.x1 - FRAME.left) * m / 1440 for m in (11, 89))
    assert (x, width) == (pytest.approx(left, abs=0.1), pytest.approx(right - left, abs=0.15))


def test_a_missing_figure_breaks_the_line_and_is_never_zero() -> None:
    drawn = _draw(_series([10, 11, 12, 13, 14], [1, 1, float("nan"), 1, 1]))
    assert drawn.line.count("M") == 2
    assert "nan" not in drawn.line + drawn.band
    assert all(y < FRAME.y1 for _, y in _points(drawn.line))


def test_a_lone_average_is_a_dot() -> None:
    assert len(_draw(_series([10, 100, 101], [1, 1, 1])).dots) == 1


def test_a_short_gap_is_still_wide_enough_to_be_seen() -> None:
    ((_, width),) = _draw(_series([10, 14], [1, 1], gaps=[(10, 11)])).gaps
    assert width >= 2.0


def test_small_valid_share_is_drawn_apart() -> None:
    drawn = _draw(_series([10, 11, 12], [1, 1, 1], share=0.5))
    assert drawn.line == ""
    assert len(_points(drawn.partial)) == 3


def test_the_limit_is_drawn_where_its_value_is_and_none_is_lost() -> None:
    marks = [Mark(1.0, "limit", "limit"), Mark(0.5, "alert 0.5", "alert")]
    high = _draw(_series([10, 11], [0.001, 0.002]), marks, logarithmic=True)
    assert [m.text for _, _, m in high.marks] == ["limit", "alert 0.5"]
    assert high.outside == []
    y_limit, y_alert = (y for y, _, _ in high.marks)
    assert FRAME.top <= y_limit < y_alert < FRAME.y1
    low = _draw(_series([10, 11], [0.001, 0.002]), marks)
    assert {m.text for m in low.outside} == {"limit", "alert 0.5"}


def test_a_peak_is_inside_the_drawing_on_both_scales() -> None:
    for logarithmic in (True, False):
        drawn = _draw(_series([10, 11, 12], [1, 500, 1]), logarithmic=logarithmic)
        assert min(y for _, y in _points(drawn.line)) > FRAME.top


@pytest.mark.parametrize("values", [[], [0.0, 0.0], [float("nan")] * 2])
@pytest.mark.parametrize("logarithmic", [True, False])
def test_nothing_to_draw_is_no_error(values: list[float], logarithmic: bool) -> None:
    drawn = _draw(_series(list(range(10, 10 + len(values))), values), logarithmic=logarithmic)
    assert drawn.frame is FRAME
    assert drawn.y_ticks


def test_now_is_shown_only_within_the_span() -> None:
    assert _draw(_series([1, 2], [1, 1]), now_h=12).now_x == pytest.approx(
        FRAME.left + (FRAME.x1 - FRAME.left) / 2, abs=0.1
    )
    assert _draw(_series([1, 2], [1, 1]), now_h=30).now_x is None


@pytest.mark.parametrize(
    ("length", "labels"),
    [
        (timedelta(minutes=10), ["00:02", "00:04"]),
        (timedelta(days=1), ["02:00", "04:00"]),
        (timedelta(days=7), ["1 Mar", "2 Mar"]),
        (timedelta(days=365), ["Apr", "May"]),
        (timedelta(days=3650), ["2026", "2027"]),
    ],
)
def test_calendar_marks_are_round_and_few(length: timedelta, labels: list[str]) -> None:
    span = Span(SPAN.start, SPAN.start + length)
    found = ticks.calendar(span, 14)
    assert 3 <= len(found) <= 15
    assert all(span.start <= moment <= span.end for moment, _ in found)
    assert set(labels) <= {text for _, text in found}


def test_axis_marks() -> None:
    assert ticks.straight(1.0)[-1] == (1.0, "1")
    assert [text for _, text in ticks.decades(0.09, 2.2)] == ["0.1", "0.2", "0.5", "1", "2"]
    assert len(ticks.decades(1e-6, 1e3)) <= 9
