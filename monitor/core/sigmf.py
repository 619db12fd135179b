"""What a SigMF metadata document says about its samples (SigMF specification 1.x, from memory)."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from monitor.core.errors import ConfigError
from monitor.core.spectrum import datatype_of

META = ".sigmf-meta"
DATA = ".sigmf-data"


@dataclass(frozen=True, slots=True)
class IqFormat:
    """How samples are stored; None where unknown.

    header_bytes, trailing_bytes: not samples, before and after them. start: recording time of the
    first sample as it was written.
    """

    datatype: str
    rate_hz: float | None = None
    centre_hz: float | None = None
    header_bytes: int = 0
    trailing_bytes: int = 0
    start: str | None = None


def format_from_sigmf(document: object, where: str) -> IqFormat:
    """The format out of a metadata document (a JSON object). where: file, starts each message."""
    top = _mapping(document, where)
    general = _mapping(top.get("global"), f"{where}: global")
    datatype = general.get("core:datatype")
    if not isinstance(datatype, str):
        raise ConfigError(f"{where}: global core:datatype: missing")
    datatype_of(datatype)
    if general.get("core:num_channels", 1) != 1:
        raise ConfigError(f"{where}: core:num_channels: only one channel can be read")
    captures = _captures(top, where)
    start = captures[0].get("core:datetime")
    return IqFormat(
        datatype,
        _number(general, "core:sample_rate", where, least=0.0),
        _number(captures[0], "core:frequency", where, least=-math.inf),
        int(_number(captures[0], "core:header_bytes", where, least=-1.0) or 0),
        int(_number(general, "core:trailing_bytes", where, least=-1.0) or 0),
        start if isinstance(start, str) else None,
    )


def _captures(top: Mapping[str, object], where: str) -> list[Mapping[str, object]]:
    """The captures, at least one; ConfigError where the receiver was tuned in between."""
    listed = top.get("captures")
    if not isinstance(listed, list) or not listed:
        return [{}]
    captures = [_mapping(each, f"{where}: captures[{i}]") for i, each in enumerate(listed)]
    first = captures[0].get("core:frequency")
    if any(each.get("core:frequency", first) != first for each in captures):
        raise ConfigError(f"{where}: captures: the centre changes; split the recording")
    return captures


def datatype_by_extension(name: str) -> str | None:
    """The datatype that a file's extension names, such as capture.cu8; None where it names none."""
    _, dot, suffix = name.lower().rpartition(".")
    return suffix if dot and suffix in ("cu8", "cs8", "cs16", "cf32") else None


def _mapping(value: object, where: str) -> Mapping[str, object]:
    if not isinstance(value, Mapping):
        raise ConfigError(f"{where}: must be a JSON object")
    return value


def _number(table: Mapping[str, object], key: str, where: str, least: float) -> float | None:
    value = table.get(key)
    if value is None:
        return None
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not value > least:
        raise ConfigError(f"{where}: {key}: {value!r} is not a number in range")
    return float(value)
