"""Stations made by hand for tests: a count is a milli-dBm, E squared per watt is given."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from monitor.core.alarms import AlertRule, watches
from monitor.core.budget import Contribution
from monitor.core.calibration import Chain, CountTable
from monitor.core.distributions import Real
from monitor.core.flags import Flag
from monitor.core.limits import Scope
from monitor.core.station import Station, station

FIRST, LAST = -80_000, 10_000


def chain(channels: int = 3, e2_per_w: float = 1e5) -> Chain:
    """A chain at 900 MHz whose counts are milli-dBm from -80 to +10 dBm."""
    counts = np.arange(FIRST, LAST + 1)
    flags = np.where(counts < FIRST + 1000, int(Flag.BELOW_RANGE), 0).astype(np.int32)
    table = CountTable(FIRST, 1e-3 * 10.0 ** (counts / 10_000), flags)
    budget = (Contribution("certificate", 1.0, "normal", shared=True),)
    return Chain(
        tables=(table,) * channels,
        frequencies_hz=(np.array([9e8]),) * channels,
        k=(np.array([e2_per_w]),) * channels,
        k_mid=np.full(channels, e2_per_w),
        contributions=(budget,) * channels,
        flags=0,
        valid_temperature_c=(-40.0, 85.0),
        due_utc_ns=None,
        identity="0" * 64,
        document=b"",
        resolution=0.001,
        bursty=np.zeros(channels, np.bool_),
        noise_w=np.zeros(channels),
        noise_u_w=np.zeros(channels),
        least_w=np.full(channels, 1e-3 * 10.0 ** ((FIRST + 1000) / 10_000)),
    )


SCOPES = (
    Scope("made-up", "1", "general_public", "local", 360.0, True, "test"),
    Scope("made-up", "1", "general_public", "whole_body", 1800.0, True, "test"),
)


def made(
    channels: int = 3,
    *,
    ratio_per_e2: float = 1e-3,
    rules: tuple[AlertRule, ...] = (),
    hold_s: float = 3.0,
    temperature: tuple[tuple[Real, Real] | None, ...] = (),
) -> Station:
    """A station of two scopes with the same limit; E squared of 1 / ratio_per_e2 is the limit."""
    here = replace(chain(channels), temperature=temperature)
    per_watt = np.full((channels, 2), float(here.k_mid[0]) * ratio_per_e2)
    return station(
        here,
        SCOPES,
        per_watt,
        per_watt,
        watches(rules, SCOPES),
        hold_s=hold_s,
        silence_s=30.0,
        field_region="far",
        outside_excluded=True,
    )


def counts_of(e2: np.ndarray, channels: int = 1, e2_per_w: float = 1e5) -> np.ndarray:
    """Counts whose E squared, added over the channels, is e2 to the step of a count."""
    dbm = 10 * np.log10(e2 / channels / e2_per_w / 1e-3)
    column = np.rint(dbm * 1000).astype(np.int32)
    return np.repeat(column[:, None], channels, axis=1)
