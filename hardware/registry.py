"""The kinds of front end by name; a kind's module is loaded only where it is used."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Protocol

from hardware.options import averaging, sensor_table
from monitor.core.averaging_law import Averaging
from monitor.core.errors import ConfigError
from monitor.core.readings import FrontEnd

KINDS = ("detector_board", "text_lines", "iq_file", "iq_stream", "level_series")


class Settings(Protocol):
    """What every kind's settings offer."""

    @property
    def resolution(self) -> float | None:
        """Unit per count of a front end that makes counts of figures; None where counts are raw."""

    @property
    def averaging(self) -> Averaging:
        """What a reading is an average of already when it comes; the same as of declared()."""

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
    elif kind == "iq_stream":
        from hardware import iq_options

        settings = iq_options.settings_from(table)
    else:
        raise _unknown(kind)
    table.finish()
    return settings


def declared(kind: str, options: Mapping[str, object]) -> Averaging:
    """What a kind's readings are an average of, by its options alone: no file, no device.

    ConfigError about the options that say so, and about an unknown kind.
    """
    table = sensor_table(options)
    if kind == "detector_board":
        from hardware import detector_board

        return detector_board.AVERAGING
    if kind in ("text_lines", "level_series"):
        return averaging(table)
    if kind == "iq_file":
        from hardware import iq_file

        return Averaging("power", table.number("interval_s", iq_file.INTERVAL_S, 0.0, 3600.0))
    if kind == "iq_stream":
        from hardware import iq_options

        return iq_options.settings_from(table).averaging
    raise _unknown(kind)


def _unknown(kind: str) -> ConfigError:
    return ConfigError(f"sensor.kind: {kind!r} is not one of {', '.join(KINDS)}")


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
