"""What fieldsill explain tells of temperature: what the readings had, and what was taken off."""

from __future__ import annotations

from typing import Any

import numpy as np

from monitor.core.readings import MISSING
from monitor.retrace import Basis, Kept

Document = dict[str, Any]


def of_readings(kept: Kept) -> Document:
    """Lowest and highest temperature of the window's readings, and how many have none."""
    known = _known(kept)
    return {
        "min_c": float(known.min() / 10) if known.size else None,
        "max_c": float(known.max() / 10) if known.size else None,
        "readings_without": sum(batch.n for batch in kept.raw) - int(known.size),
    }


def taken_off(kept: Kept, basis: Basis | None, index: int) -> Document:
    """By how much one channel's readings were too high, dB; None where nothing was taken off."""
    known = _known(kept)
    correction = basis.here.corrections[index] if basis and index < basis.here.channels else None
    if correction is None or not known.size:
        return {"temperature_db_min": None, "temperature_db_max": None}
    db = 10.0 * np.log10(correction.factors(known))
    return {"temperature_db_min": float(db.min()), "temperature_db_max": float(db.max())}


def line_of_readings(told: Document) -> str:
    """The first for people."""
    if told["min_c"] is None:
        return "the instrument's temperature: not told"
    missing = told["readings_without"]
    without = f", not told with {missing} readings" if missing else ""
    return f"the instrument's temperature: {told['min_c']:.1f} to {told['max_c']:.1f} °C{without}"


def words_of_channel(channel: Document) -> str:
    """The second for people: empty where nothing was taken off."""
    if channel["temperature_db_min"] is None:
        return ""
    low, high = channel["temperature_db_min"], channel["temperature_db_max"]
    return f"; {low:.2f} to {high:.2f} dB taken off each reading for its temperature"


def _known(kept: Kept) -> np.ndarray:
    told = [batch.temperature_dc[batch.temperature_dc != MISSING] for batch in kept.raw]
    return np.concatenate([np.empty(0, np.int32), *told])
