"""The recess and its ledge: where each part of the picture stands. Pure geometry, no markup.

The floor of the recess is a ratio of 0, the ledge a ratio of 1, in one straight scale between
and above; the ledge is always the limit.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from dashboard.bounds import Ratio

WIDTH, HEIGHT = 400, 452
LEFT, RIGHT = 70, 330
HEAD_Y, LEDGE_Y, FLOOR_Y = 44, 148, 408
LEDGE_THICK = 14
TOP_RATIO = (FLOOR_Y - HEAD_Y) / (FLOOR_Y - LEDGE_Y)
"""The ratio at the lintel; what is above it is named in words."""
LABEL_STEP = 19
LABEL_HEIGHT, LABEL_DEPTH = 16, 7
"""How far a label reaches above and below where it stands."""


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
    controlled, so the recess fills. over: the limit is known to be exceeded. beyond: the level
    stands above the lintel. band: (top, bottom) y of the interval; ends: whether a cap closes it
    there, or it goes on unbounded. unknown: (top, bottom) y of the space of which nothing may be
    claimed, neither taken nor free. label_y, space_y: where the words about the level and about
    the space above it stand.
    """

    level_y: float | None
    band: tuple[float, float] | None
    filled: bool
    shut: bool
    over: bool
    beyond: bool
    notches: tuple[Notch, ...]
    ends: tuple[bool, bool] = (True, True)
    unknown: tuple[float, float] | None = None
    label_y: float = 0.0
    space_y: float | None = None


def y_of(ratio: float) -> float:
    """The height at which a ratio stands, cut to the recess."""
    y = FLOOR_Y - (FLOOR_Y - LEDGE_Y) * ratio
    return round(min(FLOOR_Y, max(HEAD_Y, y)), 2)


def notches(
    levels: Sequence[Mapping[str, object]], level_y: float | None = None
) -> tuple[Notch, ...]:
    """The alert levels below the ledge, from the top down, labels at least a line apart.

    level_y: the line of the level, which no label may stand on.
    """
    known: dict[float, list[str]] = {}
    for level in levels:
        known.setdefault(float(str(level["ratio"])), []).append(str(level["name"]))
    found: list[Notch] = []
    free = float(LEDGE_Y + LEDGE_THICK + LABEL_STEP)
    for ratio, names in sorted(known.items(), reverse=True):
        if 0 < ratio < 1:
            label_y = _beside(max(y_of(ratio) + 5, free), level_y, free)
            found.append(Notch(y_of(ratio), label_y, ratio, tuple(dict.fromkeys(names))))
            free = label_y + LABEL_STEP
    return tuple(found)


def _beside(label_y: float, level_y: float | None, free: float) -> float:
    """A label's place moved off the level's line: below it, or above it at the floor."""
    if level_y is None or not label_y - LABEL_HEIGHT < level_y < label_y + LABEL_DEPTH:
        return label_y
    below, above = level_y + LABEL_HEIGHT, level_y - LABEL_DEPTH
    return above if below > FLOOR_Y and above >= free else below


def draw(
    ratio: Ratio | None,
    *,
    filled: bool,
    levels: Sequence[Mapping[str, object]] = (),
) -> Picture:
    """The picture of one scope's exposure ratio; boarded up where there is none."""
    stands = None if ratio is None else ratio.stands
    marks = notches(levels, None if stands is None else y_of(stands))
    if ratio is None or stands is None:
        return Picture(None, None, filled, True, False, False, marks)
    level_y = y_of(stands)
    unknown = _unknown(ratio, level_y, filled)
    return Picture(
        level_y=level_y,
        band=_band(ratio),
        filled=filled,
        shut=False,
        over=ratio.exceeds,
        beyond=stands > TOP_RATIO,
        notches=marks,
        ends=(ratio.top is not None, ratio.bottom is not None),
        unknown=unknown,
        label_y=_label_y(level_y),
        space_y=_space_y(ratio, level_y, unknown) if filled else None,
    )


def _band(ratio: Ratio) -> tuple[float, float] | None:
    """None where the whole interval lies above the lintel."""
    if ratio.bottom is None and ratio.top is None:
        return None
    top = float(HEAD_Y) if ratio.top is None else y_of(ratio.top)
    bottom = float(FLOOR_Y) if ratio.bottom is None else y_of(ratio.bottom)
    return (top, bottom) if top < bottom else None


def _unknown(ratio: Ratio, level_y: float, filled: bool) -> tuple[float, float] | None:
    """Between level and ledge where nothing is decided; up to the interval's top where it is."""
    if ratio.exceeds:
        return None
    if level_y <= LEDGE_Y:
        found = (level_y, float(LEDGE_Y))
    elif not filled:
        return None
    elif ratio.left is None or ratio.top is None:
        found = (float(LEDGE_Y), level_y)
    else:
        found = (max(float(LEDGE_Y), y_of(ratio.top)), level_y)
    return found if found[0] < found[1] else None


def _space_y(ratio: Ratio, level_y: float, unknown: tuple[float, float] | None) -> float | None:
    """In the middle of the free space, or of the unknown where nothing may be called free."""
    bottom = level_y
    if ratio.left is not None and unknown is not None:
        bottom = unknown[0]
    return (LEDGE_Y + bottom) / 2 + 6 if bottom - LEDGE_Y > 4 * LABEL_STEP else None


def _label_y(level_y: float) -> float:
    """Above the level's line, or below it where the ledge or the lintel is near."""
    near_ledge = LEDGE_Y < level_y < LEDGE_Y + LEDGE_THICK + LABEL_STEP
    near_lintel = level_y < HEAD_Y + LABEL_STEP
    return level_y + LABEL_STEP if near_ledge or near_lintel else level_y - 8
