"""What a calibration file says: certificate, detectors, elements, lines of the budget."""

from __future__ import annotations

import datetime
from collections import Counter
from dataclasses import dataclass, replace
from pathlib import Path

from monitor import tomlfile
from monitor.asfound import AsFound, read_as_found
from monitor.calelements import EXAMPLE_TEXTS, PICKUPS, Element, read_element
from monitor.callines import AXES, Line, read_line
from monitor.core.errors import CalibrationError, ConfigError
from monitor.core.keys import Table
from monitor.core.readings import NS_PER_S
from monitor.detectorfile import Detector, read_detector
from monitor.tomlfile import TopTable, date, pair


@dataclass(frozen=True, slots=True)
class Due:
    """When a calibration ends, and of what: 'calibration' or an element's name."""

    what: str
    date: datetime.date

    @property
    def utc_ns(self) -> int:
        """UTC ns from which it is overdue: the end of its due day."""
        end = datetime.datetime.combine(self.date, datetime.time(), datetime.UTC)
        return int((end + datetime.timedelta(days=1)).timestamp()) * NS_PER_S


@dataclass(frozen=True, slots=True)
class Certificate:
    """Table [calibration]. invented: said or seen to be."""

    id: str
    date: datetime.date
    due: datetime.date
    laboratory: str
    number: str
    valid_temperature_c: tuple[float, float]
    invented: bool


@dataclass(frozen=True, slots=True)
class CalibrationFile:
    """All that a calibration file says, before it is known which channels it is for.

    contributions: the lines of the budget that are written as such. body: the file's bytes.
    as_found: what was found of the calibration before, where the file says it.
    """

    top: TopTable
    certificate: Certificate
    detectors: tuple[Detector, ...]
    elements: tuple[Element, ...]
    contributions: tuple[Line, ...]
    body: bytes
    as_found: AsFound | None = None

    @property
    def invented(self) -> bool:
        """Whether any of its figures are an example's."""
        return self.certificate.invented or any(element.nameless for element in self.elements)

    @property
    def lines(self) -> tuple[Line, ...]:
        """Every line of the budget: those of the elements' certificates and the written ones."""
        return (*(e.line for e in self.elements if e.line), *self.contributions)

    def dues(self, axes: str = "".join(AXES)) -> tuple[Due, ...]:
        """Every due date that matters for the axes, earliest first."""
        found = [Due("calibration", self.certificate.due)]
        for element in self.elements:
            if element.due and (not element.axis or element.axis in axes):
                found.append(Due(element.name, element.due))
        return tuple(sorted(dict.fromkeys(found), key=lambda due: due.date))


def read(path: Path) -> CalibrationFile:
    """The file, read and checked.

    CalibrationError 'calibration.toml: element[2].table: what; remedy' for the first mistake;
    DeviceError where the file cannot be read.
    """
    try:
        return _file(*tomlfile.read(Path(path), "calibration file"))
    except CalibrationError:
        raise
    except ConfigError as error:
        raise CalibrationError(str(error)) from None


def parse(document: bytes) -> CalibrationFile:
    """The file of these bytes, which are kept elsewhere; CalibrationError as of read."""
    try:
        return _file(tomlfile.parse(document, "calibration file", "calibration file"), document)
    except CalibrationError:
        raise
    except ConfigError as error:
        raise CalibrationError(str(error)) from None


def _file(top: TopTable, body: bytes) -> CalibrationFile:
    certificate = _certificate(top.table("calibration"))
    detectors = _detectors(top, certificate.valid_temperature_c)
    elements = _joined([read_element(table) for table in top.tables("element")])
    contributions = tuple(read_line(table) for table in top.tables("contribution", []))
    found = top.any("as_found", None)
    as_found = None if found is None else read_as_found(top.table("as_found"), certificate.date)
    top.finish()
    file = CalibrationFile(top, certificate, detectors, elements, contributions, body, as_found)
    if not file.lines:
        raise top.error(
            "contribution", "none given; a figure needs its uncertainty; add at least one"
        )
    return file


def _joined(elements: list[Element]) -> tuple[Element, ...]:
    """One element with a table for each axis has one certificate: its error is the same on all."""
    names = Counter(element.name for element in elements)
    return tuple(
        replace(element, line=_shared(element.line))
        if element.line and names[element.name] > 1
        else element
        for element in elements
    )


def _shared(line: Line) -> Line:
    return replace(line, contribution=replace(line.contribution, shared=True))


def dated(document: bytes) -> tuple[str, datetime.date]:
    """The last day on which a file of these bytes says that something was calibrated, and where.

    ('calibration.date', day) or ('element[2].date', day).
    """
    top = tomlfile.parse(document, "calibration file", "calibration file")
    found = [("calibration.date", date(top.table("calibration"), "date"))]
    for i, table in enumerate(top.tables("element", []), 1):
        day = date(table, "date", None)
        if day:
            found.append((f"element[{i}].date", day))
    return max(found, key=lambda one: one[1])


def ahead(day: datetime.date, now_utc_ns: int) -> bool:
    """Whether a day has begun nowhere yet. Where it begins first, a certificate may bear tomorrow's
    date of UTC (RFC 3339 offsets)."""
    epoch = datetime.datetime(1970, 1, 1, tzinfo=datetime.UTC)
    now = epoch + datetime.timedelta(microseconds=now_utc_ns // 1000)
    return day > (now + datetime.timedelta(hours=14)).date()


def _certificate(table: Table) -> Certificate:
    invented = table.flag("invented", False)
    texts = {}
    for key in ("id", "laboratory", "certificate"):
        texts[key] = table.text(key).strip()
        invented |= texts[key] in EXAMPLE_TEXTS
        if not texts[key]:
            raise table.error(key, "is empty; write 'none' where there is none")
    day, due = date(table, "date"), date(table, "due")
    temperature_c = pair(table, "valid_temperature_c")
    table.finish()
    if due <= day:
        raise table.error("due", f"{due} is not after date, {day}")
    return Certificate(
        texts["id"], day, due, texts["laboratory"], texts["certificate"], temperature_c, invented
    )


def _detectors(top: TopTable, valid_temperature_c: tuple[float, float]) -> tuple[Detector, ...]:
    """One [detector] for every axis, or one [[detector]] per axis."""
    several = isinstance(top.any("detector"), list)
    tables = top.tables("detector") if several else [top.table("detector")]
    return tuple(read_detector(table, valid_temperature_c) for table in tables)


def elements_of(file: CalibrationFile, axis: str) -> list[Element]:
    """The elements that serve an axis, in the file's order."""
    return [element for element in file.elements if element.axis in ("", axis)]


def axes_of(file: CalibrationFile) -> str:
    """The axes that have a detector and an antenna, of 'xyz'; all where none has. Of a probe of the
    whole field, which serves any, one."""
    served = [
        axis
        for axis in AXES
        if any(e.kind in PICKUPS for e in elements_of(file, axis))
        and any(detector.axis in ("", axis) for detector in file.detectors)
    ]
    if any(element.isotropic for element in file.elements):
        served = served[:1]
    return "".join(served or AXES)
