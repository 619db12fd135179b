"""What a SigMF metadata document says about its samples (SigMF specification 1.x, from memory)."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from monitor.core.errors import ConfigError
from monitor.core.spectrum import bytes_per_sample, datatype_of

META = ".sigmf-meta"
DATA = ".sigmf-data"
ARCHIVE = ".sigmf"
SIMULATED = "fieldsill:simulated"
SCALE = "capture_details:acq_scale_factor"
"""Of an extension. Taken as what stored values are multiplied by (our reading of its name)."""


@dataclass(frozen=True, slots=True)
class IqFormat:
    """How samples are stored; None where unknown.

    header_bytes, trailing_bytes: not samples, before and after them. length_bytes: of the samples
    where others follow that do not belong to them. start: recording time of the first sample as it
    was written. scale: what a stored value is multiplied by, so that 1.0 is full scale.
    simulated: whether our own word in the metadata says that nothing was measured.
    """

    datatype: str
    rate_hz: float | None = None
    centre_hz: float | None = None
    header_bytes: int = 0
    trailing_bytes: int = 0
    start: str | None = None
    length_bytes: int | None = None
    scale: float = 1.0
    simulated: bool = False

    def span(self, size: int) -> tuple[int, int]:
        """(first, behind the last) byte of the samples in a file of size bytes."""
        end = size - self.trailing_bytes
        if self.length_bytes is not None:
            end = min(end, self.header_bytes + self.length_bytes)
        return self.header_bytes, max(end, self.header_bytes)


def format_from_sigmf(document: object, where: str, capture: int | None = None) -> IqFormat:
    """The format out of a metadata document (a JSON object). where: file, starts each message.

    capture: number of the one to read, from 0; None: all, if they are one stretch at one centre.
    """
    top = _mapping(document, where)
    general = _mapping(top.get("global"), f"{where}: global")
    datatype = general.get("core:datatype")
    if not isinstance(datatype, str):
        raise ConfigError(f"{where}: global core:datatype: missing")
    datatype_of(datatype)
    if general.get("core:num_channels", 1) != 1:
        raise ConfigError(f"{where}: core:num_channels: only one channel can be read")
    if general.get("core:metadata_only", False) is not False:
        raise ConfigError(f"{where}: core:metadata_only: no samples come with it")
    captures = _captures(top, general, where)
    first, part = _chosen(captures, capture, where)
    width = bytes_per_sample(datatype)
    begin = (first.at - captures[0].origin) * width
    begin += sum(each.header_bytes for each in captures[: captures.index(first) + 1])
    start = first.table.get("core:datetime")
    return IqFormat(
        datatype,
        _number(general, "core:sample_rate", where, least=0.0),
        _number(first.table, "core:frequency", where, least=-math.inf),
        begin,
        _whole(general, "core:trailing_bytes", where),
        start if isinstance(start, str) else None,
        None if part is None else part * width,
        _scale(first.table, datatype, where),
        general.get(SIMULATED, False) is not False,
    )


@dataclass(frozen=True, slots=True)
class _Capture:
    """at: number of its first sample, as those before the file (origin) count, too."""

    table: Mapping[str, object]
    at: int
    origin: int
    header_bytes: int

    def joins(self, after: _Capture) -> bool:
        """Whether it follows the one before with nothing in between, at the same centre."""
        there, here = after.table.get("core:global_index"), self.table.get("core:global_index")
        whole = isinstance(there, int) and isinstance(here, int)
        gap = whole and here - there != self.at - after.at  # type: ignore[operator]
        keys = ("core:frequency", SCALE)
        same = all(
            self.table.get(key, after.table.get(key)) == after.table.get(key) for key in keys
        )
        return same and not gap and not self.header_bytes


def _captures(
    top: Mapping[str, object], general: Mapping[str, object], where: str
) -> list[_Capture]:
    """The captures, at least one, in the order of their samples."""
    origin = _whole(general, "core:offset", where)
    listed = top.get("captures")
    if not isinstance(listed, list) or not listed:
        return [_Capture({}, origin, origin, 0)]
    captures = []
    for i, each in enumerate(listed):
        here = f"{where}: captures[{i}]"
        table = _mapping(each, here)
        at = _whole(table, "core:sample_start", here, default=origin)
        header = _whole(table, "core:header_bytes", here)
        captures.append(_Capture(table, at, origin, header))
        if at < (captures[-2].at if i else origin):
            raise ConfigError(f"{here}: core:sample_start: {at} comes before what precedes it")
    return captures


def _chosen(
    captures: list[_Capture], number: int | None, where: str
) -> tuple[_Capture, int | None]:
    """The capture to begin with, and how many samples belong to it; None: all that follow."""
    if number is None:
        for i, (one, two) in enumerate(zip(captures, captures[1:])):
            if not two.joins(one):
                raise ConfigError(
                    f"{where}: captures: number {i + 1} does not join on to the one before (another"
                    f" centre, a gap or a header); choose one capture, 0 to {len(captures) - 1}"
                )
        return captures[0], None
    if not 0 <= number < len(captures):
        raise ConfigError(f"{where}: captures: there is no number {number}, of {len(captures)}")
    if number == len(captures) - 1:
        return captures[number], None
    return captures[number], captures[number + 1].at - captures[number].at


def _scale(capture: Mapping[str, object], datatype: str, where: str) -> float:
    """Only floating point needs it: a converter's codes have a full scale of their own."""
    scale = _number(capture, SCALE, where, least=0.0)
    return scale if scale is not None and datatype_of(datatype).rails is None else 1.0


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


def _whole(table: Mapping[str, object], key: str, where: str, default: int = 0) -> int:
    value = table.get(key, default)
    if isinstance(value, bool) or not isinstance(value, int) or value < 0:
        raise ConfigError(f"{where}: {key}: {value!r} is not a whole number from 0")
    return value
