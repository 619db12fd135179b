"""Flags that the daemon knows of and no front end can: put on readings before they are judged."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from monitor.core.calibration import Chain
from monitor.core.flags import Flag
from monitor.core.readings import MISSING, Batch, DeviceStatus


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
    flags = batch.flags | np.int32(bits) | temperature_flags(batch, status, chain)
    if chain.due_utc_ns is not None and offset_ns is not None:
        overdue = batch.times_ns + offset_ns > chain.due_utc_ns
        flags = np.where(overdue, flags | np.int32(Flag.CALIBRATION_OVERDUE), flags)
    return replace(batch, flags=flags.astype(np.int32))


def temperature_flags(batch: Batch, status: DeviceStatus, chain: Chain) -> NDArray[np.int32]:
    """Outside what the calibration covers, or not known although that has an end; (n,).

    Of each reading by its own temperature; by the device's where the batch tells none.
    """
    low, high = temperature_span_c(chain)
    if np.all(batch.temperature_dc == MISSING):
        told_c = math.nan if status.temperature_c is None else status.temperature_c
        celsius = np.full(batch.n, told_c)
    else:
        own_c = batch.temperature_dc / 10
        celsius = np.where(batch.temperature_dc == MISSING, np.nan, own_c)
    limited = math.isfinite(low) or math.isfinite(high)
    unknown = np.isnan(celsius) & limited
    outside = (celsius < low) | (celsius > high)
    bits = unknown * int(Flag.TEMPERATURE_UNKNOWN) + outside * int(Flag.OUT_OF_TEMPERATURE)
    return bits.astype(np.int32)


def temperature_span_c(chain: Chain) -> tuple[float, float]:
    """Lowest and highest temperature that the calibration and every table of it cover."""
    tables = [table[0] for table in chain.temperature if table is not None]
    low, high = chain.valid_temperature_c
    return max([low, *(float(c[0]) for c in tables)]), min([high, *(float(c[-1]) for c in tables)])
