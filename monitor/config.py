"""The site file: what stands where, which limits apply, when to raise an alarm."""

from __future__ import annotations

import os
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from monitor.core.alarms import AlertRule
from monitor.core.errors import ConfigError, DeviceError
from monitor.core.keys import Table
from monitor.core.quantities import frequency_hz


@dataclass(frozen=True, slots=True)
class Band:
    """A part of the spectrum, Hz."""

    name: str
    low_hz: float
    high_hz: float


@dataclass(frozen=True, slots=True)
class Channel:
    """One column of raw counts: an axis (x, y, z or '' where there is one only) in one band."""

    name: str
    axis: str
    band: str


@dataclass(frozen=True, slots=True)
class Site:
    """A site file, read and checked. Paths are absolute; sensor_options are the front end's own."""

    path: Path
    name: str
    place: str
    simulated: bool
    occupancy: str
    field_region: str
    record_path: Path
    commit_s: float
    sensor_kind: str
    hold_s: float
    calibration: Path
    sensor_options: Mapping[str, object]
    channels: tuple[Channel, ...]
    bands: Mapping[str, Band]
    limit_sets: tuple[str, ...]
    alerts: tuple[AlertRule, ...]
    silence_after_s: float
    host: str
    port: int

    @property
    def control_path(self) -> Path:
        """The control socket, beside the record."""
        return self.record_path.with_suffix(".sock")
