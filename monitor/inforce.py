"""The calibration that a starting run rests on, and what must be said of it."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

from monitor import calfile, calparts, checks
from monitor.calparts import CalibrationFile
from monitor.changed import names_of, not_as_calibrated, swapped
from monitor.config import Site
from monitor.core.calibration import Chain
from monitor.core.errors import CalibrationError, ConfigError, DeviceError, RecordError
from monitor.core.flags import Flag
from monitor.core.rows import Event
from monitor.marking import Standing
from monitor.record.reader import Record
from monitor.record.uses import Drift

Made = Callable[[CalibrationFile], Chain]
Say = Callable[[str], None]
WRONG = (CalibrationError, ConfigError, DeviceError)
"""What a calibration file can be refused with."""


@dataclass(frozen=True, slots=True)
class InForce:
    """A run's chain, the flags that it carries from the start, and its events (at time 0)."""

    chain: Chain
    standing: Standing
    events: tuple[Event, ...] = ()


@dataclass(frozen=True, slots=True)
class Before:
    """The calibration files that a record's runs began with, each once, the oldest first, as far
    as this version understands them; and the drifts that were found of them."""

    files: tuple[CalibrationFile, ...] = ()
    drifts: tuple[Drift, ...] = ()

    def named(self, name: str) -> list[CalibrationFile]:
        """The files of that id or SHA-256: one calibration may have been written several times."""
        return [file for file in self.files if name in (file.certificate.id, _identity(file))]


def unsaid(line: str) -> None:
    """A Say where nobody listens."""


def in_force(site: Site, made: Made, utc_ns: int | None, say: Say = unsaid) -> InForce:
    """The site's calibration file; where it is not to be used, the last one that was.

    A box with a record goes on measuring whatever becomes of the file: on the calibration that
    its record holds, as if overdue, so that data are kept and nothing conforms. A first start
    has none to go on with and refuses. made: from file to chain, for the channels and the sensor.
    utc_ns: now, None where nothing has set the clock, for a file that is dated in the future. say:
    tell a person, one line, that the record's last calibration stands in.

    Raises what is wrong with the file (WRONG) where nothing can stand in for it.
    """
    before, trouble = before_of(site.record_path), ""
    try:
        file = calparts.read(site.calibration)
        chain = made(file)
        drifts = list(_drift(site, file, before))
        if utc_ns is not None and before.files:
            checks.refuse_future_date(site.calibration.name, *calparts.dated(file.body), utc_ns)
    except WRONG as error:
        stand_in = _last_good(before, made)
        if stand_in is None:
            raise
        (file, chain), trouble, drifts = stand_in, str(error), []
    bits, events = Flag(0), drifts
    if trouble:
        bits |= Flag.CALIBRATION_OVERDUE
        why: dict[str, object] = {
            "why": trouble, "stands in": chain.identity, "text": f"{trouble}; measuring on",
        }  # fmt: skip
        events.append(Event(0, "fault", "calibration file", why))
        say(f"{trouble}; measuring on by {_last(file)}")
    lines = not_as_calibrated(site.installed, file) + swapped(file, before.files)
    if lines:
        bits |= Flag.ELEMENT_CHANGED
        events.append(
            Event(0, "calibration", "element changed", {"what": lines, "text": "; ".join(lines)})
        )
    return InForce(chain, Standing(int(bits), names_of(file)), tuple(events))


def would_go_on(site: Site) -> str:
    """What a run would do without the site's calibration file, '' where it would not start."""
    before = before_of(site.record_path)
    found = _last_good(before, lambda file: calfile.chain(file, site.channels, site.bands))
    return "" if found is None else f"a run would go on by {_last(found[0])}"


def _last(file: CalibrationFile) -> str:
    return (
        f"the record's last calibration, {file.certificate.id!r}, as if overdue: nothing conforms"
    )


def _drift(site: Site, file: CalibrationFile, before: Before) -> Iterator[Event]:
    """What the file found of the calibration before, once; nothing where the record never used it.

    CalibrationError where its drift does not cover the site's bands.
    """
    if file.as_found is None:
        return
    drift_db = file.as_found.over(site.channels, site.bands)
    old = [one for one in before.named(file.as_found.previous) if one.body != file.body]
    digests = frozenset(_identity(one) for one in old)
    said = [drift.documents for drift in before.drifts if drift.next == _identity(file)]
    if not old or digests in said:
        return
    body: dict[str, object] = {
        "from_utc": f"{max(one.certificate.date for one in old)}T00:00:00Z",
        "to_utc": f"{file.as_found.date}T00:00:00Z",
        "drift_db": drift_db,
        "previous": file.as_found.previous,
        "documents": sorted(digests),
        "next": _identity(file),
        "adjusted": file.as_found.adjusted,
        "text": f"{file.certificate.id} found a drift of {drift_db:.2g} dB since "
        f"{file.as_found.previous}; what rests on that one is read with a wider uncertainty",
    }
    yield Event(0, "calibration", "drift", body)


def _identity(file: CalibrationFile) -> str:
    return hashlib.sha256(file.body).hexdigest()


def before_of(path: Path) -> Before:
    """What a record says of its calibrations.

    A record that is not there or cannot be read says nothing: measuring does not wait for it.
    """
    if not path.exists():
        return Before()
    try:
        with Record.open(path) as record:
            held = record.calibrations()
            digests = dict.fromkeys(use.calibration for use in held.uses)
            found = [record.document(digest) for digest in digests]
    except RecordError:
        return Before()
    files = []
    for document in found:
        try:
            files += [calparts.parse(document[1])] if document is not None else []
        except CalibrationError:
            continue
    return Before(tuple(files), held.drifts)


def _last_good(before: Before, made: Made) -> tuple[CalibrationFile, Chain] | None:
    """The newest that still makes a chain for the channels."""
    for file in reversed(before.files):
        try:
            return file, made(file)
        except WRONG:
            continue
    return None
