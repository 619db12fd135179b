"""The calibration files that a command is about: given as files, or held by a record."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from monitor import calparts
from monitor.calparts import CalibrationFile
from monitor.cli.averages_record import utc_ns_asked
from monitor.core.errors import ConfigError
from monitor.record.reader import Record
from monitor.record.uses import Use


def of(
    files: Sequence[Path], record: Path | None, at: str | None, wanted: int
) -> list[CalibrationFile]:
    """wanted files in all; that of the record, where one is named, is the first.

    ConfigError where there are more or fewer, or where the record holds none of that time.
    """
    if len(files) + (record is not None) != wanted:
        raise ConfigError(
            f"calibration: needs {wanted} in all; name {'a file' if wanted == 1 else 'files'}, "
            "or one by --record"
        )
    if record is None and at is not None:
        raise ConfigError("--at goes with --record")
    first = [] if record is None else [in_force(record, at)]
    return first + [calparts.read(path) for path in files]


def in_force(path: Path, at: str | None) -> CalibrationFile:
    """The calibration that a record's figures rest on at a time; at None: at the newest start."""
    at_utc_ns = None if at is None else utc_ns_asked(at, "--at", 0)
    with Record.open(path) as record:
        use = _use(record, at_utc_ns)
        found = record.document(use.calibration) if use else None
    if found is None:
        when = "" if at is None else f" at {at}"
        raise ConfigError(f"{path}: holds no calibration in force{when}; see fieldsill status")
    file = calparts.parse(found[1])
    file.top.where = f"calibration {file.certificate.id!r} in {path.name}"
    return file


def _use(record: Record, at_utc_ns: int | None) -> Use | None:
    """The last start at or before the time, of all boots whose UTC is known; None: the newest."""
    uses = record.calibrations().uses
    if at_utc_ns is None:
        return uses[-1] if uses else None
    offsets = {boot.boot: boot.utc_offset_ns for boot in record.boots()}
    begun = [
        (offset + use.boot_ns, use)
        for use in uses
        if (offset := offsets.get(use.boot)) is not None and offset + use.boot_ns <= at_utc_ns
    ]
    return max(begun, key=lambda one: one[0])[1] if begun else None
