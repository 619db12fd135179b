"""Whether band levels move as the gain does when it is stepped on purpose, and no otherwise.

A signal moves by the step. A product of third order moves by three times as much, a receiver that
is driven too hard by less, and so does a line born behind the amplifier (common practice, no
source).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from monitor.core.distributions import Real

KIND = "gain check"
"""Of the event that holds each check's figures."""
KEY = "receiver suspected"
"""Of the alarm."""
PAIRS = 5
"""How often the gain is stepped and set back."""
T_95 = 2.776
"""Student's t for four degrees of freedom, 95 % (JCGM 100:2008, table G.2: 2.78)."""
SHARED = math.sqrt(4.0 / 3.0)
"""Neighbouring differences share a stretch: a correlation of 1/6, which the scatter hides."""
CALIBRATED_DB, NOMINAL_DB = 0.5, 1.5
"""How far a step may be off: where both steps are calibrated, and where the tuner's nominal gains
are all that is known. Our choice."""
LEAST_DB = -200.0
CLEAR_DB = 10.0
"""So far above the noise a level must be: noise of the converters does not move with the gain, and
10 dB above it that takes less than half a dB off the move (our choice)."""


@dataclass(frozen=True, slots=True)
class Moved:
    """Per channel, dB: (c,) by how much levels moved and the half width for 95 %."""

    db: Real
    u_db: Real


def moved(levels_db: Real) -> Moved:
    """Levels (2 n + 1, c) in dB of stretches in turn at the first gain and at the other one.

    Each is compared with the mean of its neighbours, so that a steady drift cancels.
    """
    own, other = levels_db[0::2], levels_db[1::2]
    steps = other - (own[:-1] + own[1:]) / 2.0
    scatter = steps.std(axis=0, ddof=1) / math.sqrt(len(steps))
    return Moved(steps.mean(axis=0), T_95 * SHARED * scatter)


@dataclass(frozen=True, slots=True)
class Found:
    """Of one channel. said: 'as the gain', 'more', 'less' or 'too weak to tell'."""

    said: str
    moved_db: float
    u_db: float
    step_db: float

    @property
    def suspected(self) -> bool:
        """Whether the level does not behave as a signal's."""
        return self.said in ("more", "less")


def judged(
    moved_db: float,
    u_db: float,
    step_db: float,
    *,
    calibrated: bool,
    least_dbfs: float,
    floor_dbfs: float,
) -> Found:
    """What a move says. step_db: by how much the gain moved, calibrated or nominal. least_dbfs: the
    weaker of the two levels; floor_dbfs: the noise at the higher gain, nan where not known."""
    if not least_dbfs - floor_dbfs >= CLEAR_DB:
        return Found("too weak to tell", moved_db, u_db, step_db)
    allowed_db = (CALIBRATED_DB if calibrated else NOMINAL_DB) + u_db
    over_db = (moved_db - step_db) * math.copysign(1.0, step_db)
    said = "more" if over_db > allowed_db else "less" if over_db < -allowed_db else "as the gain"
    return Found(said, moved_db, u_db, step_db)


def stretch_db(powers: Real) -> Real:
    """Level (c,) in dB of a stretch, of its readings' powers (n, c); LEAST_DB at the least."""
    return np.asarray(10.0 * np.log10(np.maximum(powers.mean(axis=0), 10.0 ** (LEAST_DB / 10.0))))


def both_db(levels_db: Real) -> tuple[Real, Real]:
    """Levels (c,) at the first gain and at the other one, of stretches (2 n + 1, c)."""
    return levels_db[0::2].mean(axis=0), levels_db[1::2].mean(axis=0)
