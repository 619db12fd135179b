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
    """How samples are stored. rate_hz, centre_hz: None where unknown; header_bytes: to skip."""

    datatype: str
    rate_hz: float | None = None
    centre_hz: float | None = None
    header_bytes: int = 0


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
    captures = top.get("captures", [])
    first = captures[0] if isinstance(captures, list) and captures else {}
    capture = _mapping(first, f"{where}: captures[0]")
    return IqFormat(
        datatype,
        _number(general, "core:sample_rate", where, least=0.0),
        _number(capture, "core:frequency", where, least=-math.inf),
        int(_number(capture, "core:header_bytes", where, least=-1.0) or 0),
    )


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
