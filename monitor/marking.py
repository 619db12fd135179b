"""Flags that the daemon knows of and no front end can: put on readings before they are judged."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from monitor.core.calibration import Chain
from monitor.core.flags import Flag
from monitor.core.readings import MISSING, NS_PER_S, Batch, DeviceStatus

DAY_NS = 86_400 * NS_PER_S
DUE_SOON_DAYS = 60
"""So long before its due date a calibration is announced (our choice: a laboratory's queue)."""


@dataclass(frozen=True, slots=True)
class Standing:
    """What a run knows of its calibration at the start and holds for all of its readings.

    bits: flags. names: what the device may call itself by the calibration file; empty: anything.
    """

    bits: int = 0
    names: frozenset[str] = frozenset()


NOTHING = Standing()


def marked(
    batch: Batch,
    status: DeviceStatus,
    chain: Chain,
    *,
    simulated: bool,
    synchronised: bool,
    offset_ns: int | None,
    standing: Standing = NOTHING,
) -> Batch:
    """The batch with flags for simulation, clock, temperature, device and age of the calibration.

    offset_ns: UTC minus boot time, None while it is not known.
    """
    bits = standing.bits | (int(Flag.SIMULATED) if simulated else 0)
    bits |= 0 if synchronised else int(Flag.CLOCK_UNSYNCHRONISED)
    bits |= device_flag(status.name, standing.names)
    flags = batch.flags | np.int32(bits) | temperature_flags(batch, status, chain)
    if chain.due_utc_ns is not None and offset_ns is not None:
        flags |= due_flags(batch.times_ns + offset_ns, chain.due_utc_ns)
    return replace(batch, flags=flags.astype(np.int32))


def due_flags(utc_ns: NDArray[np.int64], due_utc_ns: int) -> NDArray[np.int32]:
    """Per time (n,): due soon within DUE_SOON_DAYS of the due date, overdue after it."""
    overdue = utc_ns > due_utc_ns
    soon = ~overdue & (utc_ns > due_utc_ns - DUE_SOON_DAYS * DAY_NS)
    bits = np.where(overdue, Flag.CALIBRATION_OVERDUE, np.where(soon, Flag.CALIBRATION_DUE_SOON, 0))
    return bits.astype(np.int32)


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
    return np.asarray(bits, np.int32)


def temperature_span_c(chain: Chain) -> tuple[float, float]:
    """Lowest and highest temperature that the calibration and every table of it cover."""
    tables = [table[0] for table in chain.temperature if table is not None]
    low, high = chain.valid_temperature_c
    return max([low, *(float(c[0]) for c in tables)]), min([high, *(float(c[-1]) for c in tables)])


def device_flag(name: str, calibrated: frozenset[str]) -> int:
    """A device that calls itself otherwise than the one that was calibrated.

    One that has not named itself is not accused: whether it must is for its protocol.
    """
    return int(Flag.ELEMENT_CHANGED) if name and calibrated and name not in calibrated else 0
