"""Flags for temperature: each reading by its own, else by the device's."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from monitor.core.calibration import Chain
from monitor.core.flags import Flag
from monitor.core.readings import MISSING, Batch, DeviceStatus
from monitor.marking import marked
from tests.core.stations import chain

OUT, UNKNOWN = int(Flag.OUT_OF_TEMPERATURE), int(Flag.TEMPERATURE_UNKNOWN)
INFINITE = (float("-inf"), float("inf"))


def batch(temperature_dc: list[int]) -> Batch:
    n = len(temperature_dc)
    counts = np.full((n, 1), -30_000, np.int32)
    times = np.arange(n, dtype=np.int64)
    return Batch(times, counts, np.zeros(n, np.int32), n, np.array(temperature_dc, np.int32))


def flags(came: Batch, status_c: float | None, by: Chain) -> list[int]:
    status = DeviceStatus(True, temperature_c=status_c)
    found = marked(came, status, by, simulated=False, synchronised=True, offset_ns=None)
    assert found.temperature_dc.tolist() == came.temperature_dc.tolist()
    return found.flags.tolist()


def test_each_reading_is_judged_by_its_own_temperature() -> None:
    by = replace(chain(1), valid_temperature_c=(-10.0, 50.0))
    came = batch([-101, -100, 500, 501, MISSING])
    assert flags(came, 20.0, by) == [OUT, 0, 0, OUT, UNKNOWN]
    free = replace(by, valid_temperature_c=INFINITE)
    assert flags(came, 20.0, free) == [0] * 5


@pytest.mark.parametrize(("status_c", "bits"), [(20.0, 0), (51.0, OUT), (None, UNKNOWN)])
def test_the_devices_temperature_stands_in_where_no_reading_has_one(
    status_c: float | None, bits: int
) -> None:
    by = replace(chain(1), valid_temperature_c=(-10.0, 50.0))
    assert flags(batch([MISSING] * 3), status_c, by) == [bits] * 3


def test_beyond_a_temperature_table_the_calibration_does_not_reach() -> None:
    """The correction holds the table's end there, which nobody has measured."""
    table = np.array([0.0, 40.0]), np.array([-1.0, 1.0])
    by = replace(chain(2), valid_temperature_c=INFINITE, temperature=(None, table))
    assert flags(batch([-1, 0, 400, 401, MISSING]), 20.0, by) == [OUT, 0, 0, OUT, UNKNOWN]
