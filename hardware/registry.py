"""The kinds of front end by name; a kind's module is loaded only where it is used."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Protocol

from hardware.options import sensor_table
from monitor.core.errors import ConfigError
from monitor.core.readings import FrontEnd

KINDS = ("detector_board", "text_lines", "iq_file", "level_series")


class Settings(Protocol):
    """What every kind's settings offer."""

    @property
    def resolution(self) -> float | None:
        """Unit per count of a front end that makes counts of figures; None where counts are raw."""

    def check_device(self) -> None:
        """DeviceError in one line where the device or the file cannot be reached now."""

    def open(
        self,
        channels: int,
        boot_ns: Callable[[], int],
        utc_ns: Callable[[], int],
        simulated: bool,
    ) -> FrontEnd:
        """See open_front_end."""


def settings_for(kind: str, options: Mapping[str, object], folder: Path) -> Settings:
    """The options of a kind as typed settings. Paths are relative to folder.

    ConfigError about a wrong key, DeviceError about a missing file; no device is touched.
    """
    table = sensor_table(options)
    settings: Settings
    if kind == "detector_board":
        from hardware import detector_board

        settings = detector_board.settings_from(table)
    elif kind == "text_lines":
        from hardware import text_lines

        settings = text_lines.settings_from(table)
    elif kind == "level_series":
        from hardware import level_series

        settings = level_series.settings_from(table, folder)
    elif kind == "iq_file":
        from hardware import iq_file

        settings = iq_file.settings_from(table, folder)
    else:
        raise ConfigError(f"sensor.kind: {kind!r} is not one of {', '.join(KINDS)}")
    table.finish()
    return settings


def open_front_end(
    settings: Settings,
    channels: int,
    boot_ns: Callable[[], int],
    utc_ns: Callable[[], int],
    simulated: bool,
) -> FrontEnd:
    """The front end of these settings, at work. ConfigError where channels do not fit them.

    boot_ns, utc_ns: the machine's clocks. A port that is not there is tried again while reading.
    """
    return settings.open(channels, boot_ns, utc_ns, simulated)
