"""Uncertainties of stored windows, widened by a drift that a later calibration found.

Stored rows stay as they are; what is read of them says by how much they were widened.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from monitor.core.caldrift import widened_db
from monitor.record.uses import Calibrations, F, I, Segment, drift_over

_K = (
    "SELECT k FROM fields WHERE derivation = 0 AND boot = ? AND end_ns > ? AND end_ns <= ? "
    "ORDER BY end_ns LIMIT 1"
)
FALLBACK_K = 2.0


def widened(
    db: sqlite3.Connection, held: Calibrations, boot: int, after_ns: I, until_ns: I, u_db: F
) -> tuple[F, F]:
    """Expanded uncertainties (n,), dB, of rows of a boot, and the drifts, dB, that widened them.

    held: of the whole record. after_ns, until_ns: (n,), boot time that each row speaks of. A row
    that only touches the data of a drifted calibration is widened whole.
    """
    segments = held.drifted(boot)
    drift_db = drift_over(segments, after_ns, until_ns)
    if not drift_db.any():
        return u_db, drift_db
    return widened_db(u_db, _factors(db, boot, segments, after_ns, until_ns), drift_db), drift_db


def raised(figure: F, bound: NDArray[np.bool_], drift_db: F) -> F:
    """Figures (n,) of power, raised by the whole drift where they are a bound that is stated.

    Such a bound holds its uncertainty already, so the line of a drift cannot widen it afterwards.
    """
    return np.where(bound, figure * 10.0 ** (drift_db / 10.0), figure)


def _factors(
    db: sqlite3.Connection, boot: int, segments: Sequence[Segment], after_ns: I, until_ns: I
) -> F:
    """Each row's coverage factor: the one of its segment's windows, which have one chain."""
    out = np.zeros(after_ns.size)
    for segment in segments:
        found = db.execute(_K, (boot, segment.start_ns, segment.end_ns)).fetchone()
        k = FALLBACK_K if found is None or found[0] is None else float(found[0])
        touches = (after_ns < segment.end_ns) & (until_ns > segment.start_ns)
        out[touches] = np.maximum(out[touches], k)
    return out
