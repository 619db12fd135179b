"""The interval for 95 %: an error in dB and one that adds, taken together; detection limits.

An instrument's errors multiply, so they are in dB. What is left of noise after it is taken off, and
what sampling missed of a varying signal, add: near the floor a figure in dB would be untrue.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from monitor.core.flags import UPPER_BOUND

Real = NDArray[np.float64]

DETECTION = 2.0 * 1.6448536269514722
"""Detection limit over the standard uncertainty of a figure that should be zero, with 5 % for
either error (Currie 1968; ISO 11929-1, 2019; both from memory)."""
PER_NEPER_DB = 4.3429448190325175
"""10 log10(e): dB of a power for a small relative change."""


class Interval(NamedTuple):
    """Lower and upper end, (n,), in the unit of the figure; never below zero."""

    low: Real
    high: Real


def interval(low: ArrayLike, high: ArrayLike, db: ArrayLike, added: ArrayLike) -> Interval:
    """From low, less by db and by added, to high, more by both.

    low, high: figures (n,) linear in power. db: half width in dB of what multiplies; added: half
    width of what adds, in the figure's unit; both for the wanted confidence. The two are
    independent, so on either side their widths add in quadrature (GUM 5.1.2).
    """
    below, above = np.asarray(low, np.float64), np.asarray(high, np.float64)
    by = 10.0 ** (np.asarray(db, np.float64) / 10.0)
    more = np.asarray(added, np.float64)
    down = np.hypot(below * (1.0 - 1.0 / by), more)
    up = np.hypot(above * (by - 1.0), more)
    return Interval(np.maximum(below - down, 0.0), above + up)


def reported(
    low: ArrayLike, high: ArrayLike, expanded_db: ArrayLike, added: ArrayLike, flags: ArrayLike
) -> Interval:
    """The interval of a window's figure: from zero to the bound it states where it is below its
    detection limit. expanded_db, added: at 95 %, as in the record; flags: the field's."""
    found = interval(low, high, expanded_db, added)
    bound = (np.asarray(flags, np.int64) & int(UPPER_BOUND)) != 0
    return Interval(np.where(bound, 0.0, found.low), np.where(bound, high, found.high))


def total_db(expanded_db: ArrayLike, mean: ArrayLike, added: ArrayLike, flags: ArrayLike) -> Real:
    """Expanded uncertainty of the mean in dB with what adds (n,); nan below the detection limit.

    First order, for reading and for the cap on U; bounds come from interval().
    """
    figure = np.asarray(mean, np.float64)
    with np.errstate(divide="ignore", invalid="ignore"):
        relative_db = PER_NEPER_DB * np.asarray(added, np.float64) / figure
        total: Real = np.hypot(np.asarray(expanded_db, np.float64), relative_db)
    bound = (np.asarray(flags, np.int64) & int(UPPER_BOUND)) != 0
    return np.where(bound, np.nan, np.where(figure == 0.0, expanded_db, total))
