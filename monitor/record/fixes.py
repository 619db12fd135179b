"""Which clock fix tells a boot's UTC: the rule of view boot_utc, quick enough for ten years."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from monitor.record.types import ClockFix

SURE_NS = 86_400_000_000_000
"""A fix with less uncertainty than a day is of a clock that something has set."""
_MOST_NS = 2**62 - 1

I = NDArray[np.int64]  # noqa: E741


def best(fixes: Sequence[ClockFix]) -> ClockFix | None:
    """The fix whose offset (utc_ns - boot_ns) holds for the whole boot; None without any."""
    if not fixes:
        return None
    ordered = sorted(fixes, key=lambda fix: (fix.boot_ns, fix.source))
    boot_ns, offset, error = np.array(
        [(fix.boot_ns, fix.utc_ns - fix.boot_ns, fix.uncertainty_ns) for fix in ordered], np.int64
    ).T
    return ordered[winner(boot_ns, offset, error)]


def winner(boot_ns: I, offset_ns: I, uncertainty_ns: I) -> int:
    """Position of the fix that holds; at least one, ordered by boot time and source, shape (n,).

    A fix that a later, sure one contradicts by more than both uncertainties is dropped: the clock
    was set in between. Of the rest, the latest whose uncertainty is at most twice the smallest.
    """
    error = np.minimum(uncertainty_ns, _MOST_NS)
    sure = uncertainty_ns < SURE_NS
    low, high = offset_ns - error, offset_ns + error
    later = np.searchsorted(boot_ns, boot_ns, side="right")
    at_least = _from_the_end(np.maximum, np.where(sure, low, -(2**63)), -(2**63))[later]
    at_most = _from_the_end(np.minimum, np.where(sure, high, 2**63 - 1), 2**63 - 1)[later]
    kept = (high >= at_least) & (low <= at_most)
    good = np.flatnonzero(kept & (error <= 2 * error[kept].min()))
    good = good[boot_ns[good] == boot_ns[good[-1]]]
    return int(good[np.argmin(error[good])])


def _from_the_end(extreme: np.ufunc, values: I, none: int) -> I:
    """Extreme of the values from each position on, and none after the last: (n + 1,)."""
    found: I = extreme.accumulate(np.r_[values, np.int64(none)][::-1])[::-1]
    return found
