"""Flags that the daemon knows of and no front end can: put on readings before they are judged."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from monitor.core.calibration import Chain
from monitor.core.flags import Flag
from monitor.core.readings import Batch, DeviceStatus


def marked(
    batch: Batch,
    status: DeviceStatus,
    chain: Chain,
    *,
    simulated: bool,
    synchronised: bool,
    offset_ns: int | None,
) -> Batch:
    """The batch with flags for simulation, clock, temperature and the age of the calibration.

    offset_ns: UTC minus boot time, None while it is not known.
    """
    bits = int(Flag.SIMULATED) if simulated else 0
    bits |= 0 if synchronised else int(Flag.CLOCK_UNSYNCHRONISED)
    bits |= temperature_flag(status.temperature_c, chain.valid_temperature_c)
    flags = batch.flags | np.int32(bits)
    if chain.due_utc_ns is not None and offset_ns is not None:
        overdue = batch.times_ns + offset_ns > chain.due_utc_ns
        flags = np.where(overdue, flags | np.int32(Flag.CALIBRATION_OVERDUE), flags)
    return replace(batch, flags=flags.astype(np.int32))


def temperature_flag(board_c: float | None, valid_c: tuple[float, float]) -> int:
    """Outside the calibrated range, or not known although the range has an end."""
    low, high = valid_c
    if board_c is None:
        limited = math.isfinite(low) or math.isfinite(high)
        return int(Flag.TEMPERATURE_UNKNOWN) if limited else 0
    return 0 if low <= board_c <= high else int(Flag.OUT_OF_TEMPERATURE)
