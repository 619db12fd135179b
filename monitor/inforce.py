"""The calibration that a starting run rests on, and what must be said of it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from monitor import calparts, checks
from monitor.calparts import CalibrationFile
from monitor.changed import names_of, not_as_calibrated, swapped
from monitor.config import Site
from monitor.core.calibration import Chain
from monitor.core.errors import CalibrationError, ConfigError, DeviceError, RecordError
from monitor.core.flags import Flag
from monitor.core.rows import Event
from monitor.marking import Standing
from monitor.record.reader import Record

Made = Callable[[CalibrationFile], Chain]
WRONG = (CalibrationError, ConfigError, DeviceError)
"""What a calibration file can be refused with."""


@dataclass(frozen=True, slots=True)
class InForce:
    """A run's chain, the flags that it carries from the start, and its events (at time 0)."""

    chain: Chain
    standing: Standing
    events: tuple[Event, ...] = ()


def in_force(site: Site, made: Made, utc_ns: int | None) -> InForce:
    """The site's calibration file; where it is not to be used, the last one that was.

    A box with a record goes on measuring whatever becomes of the file: on the calibration that
    its record holds, as if overdue, so that data are kept and nothing conforms. A first start
    has none to go on with and refuses. made: from file to chain, for the channels and the sensor.
    utc_ns: now, None where nothing has set the clock, for a file that is dated in the future.

    Raises what is wrong with the file (WRONG) where nothing can stand in for it.
    """
    before = _documents(site.record_path)
    try:
        file = calparts.read(site.calibration)
        chain = made(file)
        if utc_ns is not None and before:
            checks.refuse_future_date(site.calibration.name, *calparts.dated(file.body), utc_ns)
    except WRONG as error:
        stand_in = _last_good(before, made)
        if stand_in is None:
            raise
        file, chain = stand_in
        return _told(site, file, chain, before, str(error))
    return _told(site, file, chain, before, "")


def _told(
    site: Site, file: CalibrationFile, chain: Chain, before: Sequence[bytes], trouble: str
) -> InForce:
    bits, events = Flag(0), []
    if trouble:
        bits |= Flag.CALIBRATION_OVERDUE
        body: dict[str, object] = {"why": trouble, "stands in": chain.identity}
        events.append(Event(0, "fault", "calibration file", body))
    lines = not_as_calibrated(site.installed, file) + swapped(file, _files(before))
    if lines:
        bits |= Flag.ELEMENT_CHANGED
        events.append(Event(0, "calibration", "element changed", {"what": lines}))
    return InForce(chain, Standing(int(bits), names_of(file)), tuple(events))


def since_before(path: Path, file: CalibrationFile) -> list[str]:
    """Elements that the file has otherwise than the record's runs, without a new calibration."""
    return swapped(file, _files(_documents(path)))


def _documents(path: Path) -> list[bytes]:
    """The calibration files that the record's runs began with, each once, the oldest first.

    A record that cannot be read has none: measuring does not wait for it.
    """
    if not path.exists():
        return []
    try:
        with Record.open(path) as record:
            digests = dict.fromkeys(use.calibration for use in record.uses())
            found = [record.document(digest) for digest in digests]
    except RecordError:
        return []
    return [document[1] for document in found if document is not None]


def _files(documents: Sequence[bytes]) -> list[CalibrationFile]:
    """Those that this version understands."""
    files = []
    for document in documents:
        try:
            files.append(calparts.parse(document))
        except CalibrationError:
            continue
    return files


def _last_good(documents: Sequence[bytes], made: Made) -> tuple[CalibrationFile, Chain] | None:
    """The newest that still makes a chain for the channels."""
    for file in reversed(_files(documents)):
        try:
            return file, made(file)
        except WRONG:
            continue
    return None
