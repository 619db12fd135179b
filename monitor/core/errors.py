"""The errors that a user can meet; each message is one line: what, where, remedy."""

from __future__ import annotations


class FieldsillError(Exception):
    """Base of every expected error; its text is shown to the user as it is."""

    exit_code = 2


class ConfigError(FieldsillError, ValueError):
    """A site file, a calibration file or an argument is wrong."""


class CalibrationError(ConfigError):
    """A calibration cannot answer what is asked of it."""


class LimitError(ConfigError):
    """A limit set is malformed, or has no figure for what is asked."""


class RecordError(FieldsillError):
    """A record cannot be read, or refuses what is written to it."""

    exit_code = 3


class DeviceError(FieldsillError, OSError):
    """A device, a port or a file cannot be reached."""

    exit_code = 3
