"""What of a site file says what is measured: bands, their signals, and channels."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from monitor.core.averaging_law import SIGNALS
from monitor.core.errors import ConfigError
from monitor.core.keys import REQUIRED, Table
from monitor.core.quantities import frequency_hz
from monitor.tomlfile import TopTable

AXES = ("x", "y", "z", "")
OUTSIDE = ("filter", "survey", "undeclared")
POLARISATIONS = ("survey", "undeclared")
MAX_CHANNELS = 64


@dataclass(frozen=True, slots=True)
class Band:
    """A part of the spectrum, Hz. outside: what rules out signals beyond it, one of OUTSIDE.

    signal: what it carries, one of SIGNALS; signal_bandwidth_hz: the least that a signal there
    occupies, 0 where nobody said. polarisation: survey, where one has shown that a single axis
    takes in the whole field.
    """

    name: str
    low_hz: float
    high_hz: float
    outside: str = "undeclared"
    signal: str = "undeclared"
    signal_bandwidth_hz: float = 0.0
    polarisation: str = "undeclared"


@dataclass(frozen=True, slots=True)
class Channel:
    """One column of raw counts: an axis (x, y, z or '' where there is one only) in one band.

    gain: the receiver's gain step, by its name in the calibration file; '' where it has none.
    """

    name: str
    axis: str
    band: str
    gain: str = ""


def bands_of(top: TopTable) -> dict[str, Band]:
    """The [[band]] tables by name, in their order; ConfigError for the first mistake."""
    bands: dict[str, Band] = {}
    for table in top.tables("band"):
        band = Band(
            named(table, "name"),
            frequency(table, "low"),
            frequency(table, "high"),
            table.text("outside", "undeclared", OUTSIDE),
            table.text("signal", "undeclared", SIGNALS),
            frequency(table, "signal_bandwidth", 0.0),
            table.text("polarisation", "undeclared", POLARISATIONS),
        )
        table.finish()
        if band.low_hz >= band.high_hz:
            raise table.error("high", "must be above low")
        if band.signal_bandwidth_hz > band.high_hz - band.low_hz:
            raise table.error("signal_bandwidth", "is wider than the band; give one signal's")
        if band.name in bands:
            raise table.error("name", f"{band.name!r} is there already")
        for other in bands.values():
            if band.low_hz < other.high_hz and other.low_hz < band.high_hz:
                raise table.error(
                    "low", f"overlaps band {other.name!r}; a signal would count twice"
                )
        bands[band.name] = band
    if not bands:
        raise top.error("band", "none given; add [[band]] with name, low and high")
    return bands


def channels_of(top: TopTable, bands: Mapping[str, Band]) -> tuple[Channel, ...]:
    """The [[channel]] tables in their order; ConfigError for the first mistake."""
    tables = top.tables("channel")
    if not 0 < len(tables) <= MAX_CHANNELS:
        raise top.error("channel", f"{len(tables)} channels; 1 to {MAX_CHANNELS} are possible")
    channels: list[Channel] = []
    for table in tables:
        channel = Channel(
            named(table, "name"),
            table.text("axis", "", AXES),
            table.text("band", choices=[*bands]),
            table.text("gain", ""),
        )
        table.finish()
        _distinct(table, channel, channels)
        channels.append(channel)
    unused = [name for name in bands if name not in {channel.band for channel in channels}]
    if unused:
        raise top.error("band", f"{unused[0]!r} has no channel; add one or take the band out")
    return tuple(channels)


def _distinct(table: Table, channel: Channel, others: Sequence[Channel]) -> None:
    if channel.name in {other.name for other in others}:
        raise table.error("name", f"{channel.name!r} is there already")
    axes = [other.axis for other in others if other.band == channel.band]
    if channel.axis in axes or (axes and "" in (channel.axis, *axes)):
        raise table.error(
            "axis", f"band {channel.band!r} has several channels; each needs an axis of its own"
        )


def named(table: Table, key: str) -> str:
    """A text that is not empty."""
    text: str = table.text(key)
    if not text.strip():
        raise table.error(key, "is empty")
    return text


def frequency(table: Table, key: str, default: Any = REQUIRED) -> float:
    """A frequency in Hz from a text with a unit or a bare number of Hz."""
    value = table.any(key, default)
    if value is default and default is not REQUIRED:
        return float(default)
    if isinstance(value, bool) or not isinstance(value, (str, int, float)):
        raise table.error(key, f"{value!r} is not a frequency; write for example '900MHz'")
    try:
        return frequency_hz(value)
    except ConfigError as error:
        raise table.error(key, str(error)) from None
