"""Times that stand where they do not belong: found over a whole series, the fewest left out."""

from __future__ import annotations

from bisect import bisect_left

import numpy as np
from numpy.typing import NDArray

I = NDArray[np.int64]  # noqa: E741


def misplaced(times: I) -> I:
    """Positions (ascending) of the fewest of times (n,) to leave out, so that the rest increases.

    Of equal times the first stays. A single time far ahead goes, and not all that follow it.
    """
    if times.size == 0 or bool(np.all(times[1:] > times[:-1])):
        return np.empty(0, np.int64)
    latest = np.maximum.accumulate(times)
    soonest = np.minimum.accumulate(times[::-1])[::-1]
    # A time later than all before it and sooner than all after it fits whatever else is kept.
    fits = np.ones(times.size, np.bool_)
    fits[1:] &= times[1:] > latest[:-1]
    fits[:-1] &= times[:-1] < soonest[1:]
    doubtful = np.flatnonzero(~fits)
    keep = np.zeros(doubtful.size, np.bool_)
    keep[_longest(times[doubtful].tolist())] = True
    return np.asarray(doubtful[~keep], np.int64)


def _longest(times: list[int]) -> list[int]:
    """Positions of a longest strictly increasing part; n log n, by piles, from the end.

    tops[i]: the negated latest time with which a part of i + 1 times can begin.
    """
    tops: list[int] = []
    at: list[int] = []
    after = [-1] * len(times)
    for i in range(len(times) - 1, -1, -1):
        pile = bisect_left(tops, -times[i])
        if pile == len(tops):
            tops.append(-times[i])
            at.append(i)
        else:
            tops[pile], at[pile] = -times[i], i
        after[i] = at[pile - 1] if pile else -1
    found: list[int] = []
    i = at[-1]
    while i >= 0:
        found.append(i)
        i = after[i]
    return found
