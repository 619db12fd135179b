"""What ties a receiver's settings to its calibration: the gain step that both must mean."""

from __future__ import annotations

import re

from monitor.calfile import detector_of
from monitor.calparts import CalibrationFile
from monitor.config import Site
from monitor.core.errors import ConfigError
from monitor.detectorkinds import ScaleSource

_DB = re.compile(r"\s*([+-]?\d+(?:\.\d+)?)\s*(?:dB)?\s*")
SAME_DB = 0.05
"""Gains are set in tenths of a dB."""


def gain_named(name: str, gain_db: float) -> bool:
    """Whether a step's name is this gain: '19.7' or '19.7 dB'."""
    found = _DB.fullmatch(name)
    return found is not None and abs(float(found[1]) - gain_db) <= SAME_DB


def refuse_other_gain(site: Site, file: CalibrationFile, gain_db: float) -> None:
    """ConfigError unless every channel is calibrated in dBFS, at the gain that is set.

    A calibration with one figure for all (dbfs_to_dbm) names no step, so there is nothing to
    compare. A step is named by its gain in dB.
    """
    for i, channel in enumerate(site.channels, 1):
        source = detector_of(file, channel).source
        if not isinstance(source, ScaleSource) or source.quantity != "dbfs":
            raise ConfigError(
                f"{site.calibration.name}: detector.quantity: the receiver's levels are dBFS, this "
                'calibration is of something else; write kind = "scale", quantity = "dbfs"'
            )
        name = channel.gain or source.steps[0].gain
        if not name:
            continue
        if not gain_named(name, gain_db):
            key = f"channel[{i}].gain" if channel.gain else "sensor.gain_db"
            raise ConfigError(
                f"{site.path.name}: {key}: calibrated is gain step {name!r}, but sensor.gain_db "
                f"sets {gain_db:g} dB; make them one and the same (a step is named by its dB)"
            )
