"""Time that two boots both measured, as when a grown series is read again, counts once."""

from __future__ import annotations

import numpy as np

from monitor.record.coverage import Coverage, once

H = 3600 * 1_000_000_000


def test_overlapping_stretches_countonce() -> None:
    start = np.array([0, 0, H], np.int64)
    end = np.array([H, H, 2 * H], np.int64)
    measured = np.array([H / 2, H / 2, H / 4])
    found = Coverage(*once(start, end, measured), until_ns=2 * H)
    assert found.measured_s(0, H) == 1800
    assert found.measured_s(0, 2 * H) == 2700
    assert found.share(0, 2 * H) == 0.375
