"""The recess and its ledge: where each part of the picture stands. Pure geometry, no markup.

The floor of the recess is a ratio of 0, the ledge a ratio of 1, in one straight scale between
and above; the ledge is always the limit.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

WIDTH, HEIGHT = 400, 452
LEFT, RIGHT = 70, 330
HEAD_Y, LEDGE_Y, FLOOR_Y = 44, 148, 408
LEDGE_THICK = 14
TOP_RATIO = (FLOOR_Y - HEAD_Y) / (FLOOR_Y - LEDGE_Y)
"""The ratio at the lintel; what is above it is named in words."""
LABEL_STEP = 19


@dataclass(frozen=True, slots=True)
class Notch:
    """An alert level cut into the jamb; label_y keeps labels off each other and off the ledge."""

    y: float
    label_y: float
    ratio: float
    names: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Picture:
    """One drawn recess; y grows downward. level_y is None where there is no measurement.

    shut: the recess is boarded up, nothing may be read from it. filled: the occupancy is
    controlled, so the recess fills. band: (top, bottom) y of the interval of the figure.
    label_y, left_y: where the words about the level and about what is left stand.
    """

    level_y: float | None
    band: tuple[float, float] | None
    filled: bool
    shut: bool
    over: bool
    beyond: bool
    notches: tuple[Notch, ...]
    left_ratio: float | None
    label_y: float = 0.0
    left_y: float | None = None


def y_of(ratio: float) -> float:
    """The height at which a ratio stands, cut to the recess."""
    y = FLOOR_Y - (FLOOR_Y - LEDGE_Y) * ratio
    return round(min(FLOOR_Y, max(HEAD_Y, y)), 2)


def interval(ratio_low: float, ratio_high: float, u_db: float | None) -> tuple[float, float]:
    """The interval of a ratio: gaps either way, widened by the expanded uncertainty in dB."""
    factor = 10.0 ** ((u_db or 0.0) / 10.0)
    return ratio_low / factor, ratio_high * factor


def notches(levels: Sequence[Mapping[str, object]]) -> tuple[Notch, ...]:
    """The alert levels below the ledge, from the top down, labels at least a line apart."""
    known: dict[float, list[str]] = {}
    for level in levels:
        known.setdefault(float(str(level["ratio"])), []).append(str(level["name"]))
    found: list[Notch] = []
    free = float(LEDGE_Y + LEDGE_THICK + LABEL_STEP)
    for ratio, names in sorted(known.items(), reverse=True):
        if 0 < ratio < 1:
            label_y = max(y_of(ratio) + 5, free)
            found.append(Notch(y_of(ratio), label_y, ratio, tuple(dict.fromkeys(names))))
            free = label_y + LABEL_STEP
    return tuple(found)


def draw(
    exposure: Mapping[str, object] | None,
    *,
    filled: bool,
    u_db: float | None = None,
    levels: Sequence[Mapping[str, object]] = (),
) -> Picture:
    """The picture of one scope's exposure ratio; boarded up where there is none."""
    mean = ratio_of(exposure, "ratio_mean")
    marks = notches(levels)
    if exposure is None or mean is None:
        return Picture(None, None, filled, True, False, False, marks, None)
    low, high = ratio_of(exposure, "ratio_low"), ratio_of(exposure, "ratio_high")
    upper = mean if high is None else high
    bottom, top = interval(mean if low is None else low, upper, u_db)
    return Picture(
        level_y=y_of(mean),
        band=(y_of(top), y_of(bottom)),
        filled=filled,
        shut=False,
        over=mean > 1,
        beyond=mean > TOP_RATIO,
        notches=marks,
        left_ratio=max(0.0, 1.0 - upper),
        label_y=_label_y(y_of(mean)),
        left_y=(LEDGE_Y + y_of(mean)) / 2 if y_of(mean) - LEDGE_Y > 4 * LABEL_STEP else None,
    )


def _label_y(level_y: float) -> float:
    """Above the level's line, or below it where the ledge or the lintel is near."""
    near_ledge = LEDGE_Y < level_y < LEDGE_Y + LEDGE_THICK + LABEL_STEP
    near_lintel = level_y < HEAD_Y + LABEL_STEP
    return level_y + LABEL_STEP if near_ledge or near_lintel else level_y - 8


def ratio_of(exposure: Mapping[str, object] | None, key: str) -> float | None:
    """A finite figure of an exposure, else None."""
    value = None if exposure is None else exposure.get(key)
    if isinstance(value, (int, float)) and math.isfinite(value):
        return float(value)
    return None
