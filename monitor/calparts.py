"""What a calibration file says: certificate, detectors, elements, lines of the budget."""

from __future__ import annotations

import datetime
import math
from dataclasses import dataclass
from pathlib import Path

from monitor import tomlfile
from monitor.core import calibration as cal
from monitor.core.budget import DISTRIBUTIONS, Contribution
from monitor.core.distributions import FEWEST_DEGREES
from monitor.core.errors import CalibrationError, ConfigError
from monitor.core.keys import Table
from monitor.detectorfile import Detector, read_detector
from monitor.tomlfile import TopTable, pair, rows

ELEMENTS = ("antenna", "cable", "attenuator", "filter")
AXES = ("x", "y", "z")
EXAMPLE_TEXTS = ("name of the laboratory", "number of the certificate", "serial number")
"""What the examples say where a certificate is to be named: nothing stands behind it."""
NS_PER_S = 1_000_000_000
MOST_DB = 30.0
"""A contribution beyond it is a slip of the point."""
MOST_DEGREES = 1e6


@dataclass(frozen=True, slots=True)
class Element:
    """An antenna, cable, attenuator or filter; axis '' serves every axis."""

    where: Table
    kind: str
    serial: str
    certificate: str
    axis: str
    curve: cal.FrequencyTable

    @property
    def name(self) -> str:
        """Kind and serial, for messages."""
        return f"{self.kind} {self.serial}"

    @property
    def nameless(self) -> bool:
        """Whether serial or certificate is still an example's text."""
        return self.serial in EXAMPLE_TEXTS or self.certificate in EXAMPLE_TEXTS


@dataclass(frozen=True, slots=True)
class Certificate:
    """Table [calibration]. due_utc_ns: the end of its due day. invented: said or seen to be."""

    id: str
    date: datetime.date
    due: datetime.date
    laboratory: str
    number: str
    valid_temperature_c: tuple[float, float]
    invented: bool

    @property
    def due_utc_ns(self) -> int:
        """UTC ns from which the calibration is overdue: the end of its due day."""
        end = datetime.datetime.combine(self.due, datetime.time(), datetime.UTC)
        return int((end + datetime.timedelta(days=1)).timestamp()) * NS_PER_S


@dataclass(frozen=True, slots=True)
class CalibrationFile:
    """All that a calibration file says, before it is known which channels it is for.

    lines: axis ('': every one) and contribution. body: the file's bytes.
    """

    top: TopTable
    certificate: Certificate
    detectors: tuple[Detector, ...]
    elements: tuple[Element, ...]
    lines: tuple[tuple[str, Contribution], ...]
    body: bytes

    @property
    def invented(self) -> bool:
        """Whether any of its figures are an example's."""
        return self.certificate.invented or any(element.nameless for element in self.elements)


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
    detectors = _detectors(top)
    elements = tuple(_element(table) for table in top.tables("element"))
    lines = tuple(_contribution(table) for table in top.tables("contribution", []))
    top.finish()
    if not lines:
        raise top.error(
            "contribution", "none given; a figure needs its uncertainty; add at least one"
        )
    return CalibrationFile(top, certificate, detectors, elements, lines, body)


def dated(document: bytes) -> datetime.date:
    """The day on which a calibration file of these bytes says that it was calibrated."""
    top = tomlfile.parse(document, "calibration file", "calibration file")
    return _date(top.table("calibration"), "date")


def _certificate(table: Table) -> Certificate:
    invented = table.flag("invented", False)
    texts = {}
    for key in ("id", "laboratory", "certificate"):
        texts[key] = table.text(key).strip()
        invented |= texts[key] in EXAMPLE_TEXTS
        if not texts[key]:
            raise table.error(key, "is empty; write 'none' where there is none")
    date, due = _date(table, "date"), _date(table, "due")
    temperature_c = pair(table, "valid_temperature_c")
    table.finish()
    if due <= date:
        raise table.error("due", f"{due} is not after date, {date}")
    return Certificate(
        texts["id"], date, due, texts["laboratory"], texts["certificate"], temperature_c, invented
    )


def _date(table: Table, key: str) -> datetime.date:
    value = table.any(key)
    if isinstance(value, str):
        try:
            return datetime.date.fromisoformat(value)
        except ValueError:
            raise table.error(
                key, f"{value!r} is not a date; write for example 2025-11-30"
            ) from None
    if isinstance(value, datetime.date) and not isinstance(value, datetime.datetime):
        return value
    raise table.error(key, f"{value!r} is not a date; write for example 2025-11-30")


def _detectors(top: TopTable) -> tuple[Detector, ...]:
    """One [detector] for every axis, or one [[detector]] per axis."""
    several = isinstance(top.any("detector"), list)
    tables = top.tables("detector") if several else [top.table("detector")]
    return tuple(read_detector(table) for table in tables)


def _element(table: Table) -> Element:
    kind = table.text("type", choices=ELEMENTS)
    serial, certificate = table.text("serial").strip(), table.text("certificate").strip()
    axis = table.text("axis", "", AXES)
    values = rows(table, "table", "[frequency, dB]", frequency=True)
    table.finish()
    if kind != "antenna" and (values[:, 1] < 0).any():
        raise table.error("table", f"a loss of {values[:, 1].min():g} dB; a loss is zero or more")
    try:
        curve = cal.FrequencyTable(values[:, 0], values[:, 1])
    except CalibrationError as error:
        raise table.error("table", str(error)) from None
    return Element(table, kind, serial, certificate, axis, curve)


def elements_of(file: CalibrationFile, axis: str) -> list[Element]:
    """The elements that serve an axis, in the file's order."""
    return [element for element in file.elements if element.axis in ("", axis)]


def _contribution(table: Table) -> tuple[str, Contribution]:
    """The axis it is for ('': every one) and the line."""
    axis = table.text("axis", "", AXES)
    name = table.text("name")
    distribution = table.text("distribution", choices=DISTRIBUTIONS)
    scaled = table.number("sensitivity", 1.0, -1e6, 1e6)
    line = Contribution(
        name=name,
        value=table.number("value", low=0.0, high=MOST_DB if scaled == 1.0 else 1e6),
        distribution=distribution,
        k=table.number("k", low=1.0, high=5.0) if distribution == "expanded" else 1.0,
        shared=table.flag("shared"),
        kind=table.text("kind", ""),
        degrees_of_freedom=table.number(
            "degrees_of_freedom", math.inf, FEWEST_DEGREES, MOST_DEGREES
        ),
        sensitivity=scaled,
    )
    table.finish()
    if line.value * abs(scaled) > MOST_DB:
        raise table.error("value", f"times its sensitivity it is beyond {MOST_DB:g} dB")
    return axis, line
