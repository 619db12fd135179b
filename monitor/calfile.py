"""The calibration file: certificates, tables and the uncertainty budget, read into a Chain."""

from __future__ import annotations

import datetime
import hashlib
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Protocol, TypeVar

import numpy as np

from monitor import tomlfile
from monitor.config import Band, Channel
from monitor.core import calibration as cal
from monitor.core.errors import CalibrationError, ConfigError
from monitor.core.flags import Flag
from monitor.core.keys import Table
from monitor.core.uncertainty import DISTRIBUTIONS, Contribution, Real
from monitor.detectorfile import Detector, read_detector
from monitor.tomlfile import TopTable, pair, rows

ELEMENTS = ("antenna", "cable", "attenuator", "filter")
AXES = ("x", "y", "z")
EXAMPLE_TEXTS = ("name of the laboratory", "number of the certificate", "serial number")
"""What the examples say where a certificate is to be named: nothing stands behind it."""
NS_PER_S = 1_000_000_000


class _OfAxis(Protocol):
    @property
    def axis(self) -> str: ...


A = TypeVar("A", bound=_OfAxis)


@dataclass(frozen=True, slots=True)
class Element:
    """An antenna, cable, attenuator or filter; axis '' serves every axis.

    nameless: serial or certificate is still an example's text.
    """

    where: Table
    kind: str
    name: str
    axis: str
    certificate: str
    nameless: bool
    curve: cal.FrequencyTable


@dataclass(frozen=True, slots=True)
class Certificate:
    """The [calibration] table. due_utc_ns: overdue from here on, the end of its due day.

    invented: its figures are said, or seen by an example's texts, to be invented.
    """

    id: str
    number: str
    date: datetime.date
    due_utc_ns: int
    valid_temperature_c: tuple[float, float]
    invented: bool


@dataclass(frozen=True, slots=True)
class Parts:
    """A calibration file, read and checked, before a channel chooses among its tables.

    lines: the axis that each budget line is for ('': every one), and the line.
    """

    top: TopTable
    body: bytes
    certificate: Certificate
    detectors: tuple[Detector, ...]
    elements: tuple[Element, ...]
    lines: tuple[tuple[str, Contribution], ...]

    @property
    def invented(self) -> bool:
        """Whether any of its figures are an example's."""
        return self.certificate.invented or any(element.nameless for element in self.elements)


def chain_of(body: bytes, channels: Sequence[Channel], bands: Mapping[str, Band]) -> cal.Chain:
    """The chain of a calibration file's text that is kept elsewhere; errors as load_chain."""
    top = tomlfile.parse(body, "calibration file", "calibration file")
    return _chain(_parts(top, body), channels, bands)


def load_parts(path: Path) -> Parts:
    """The tables of a calibration file; errors as load_chain."""
    try:
        return _parts(*tomlfile.read(Path(path), "calibration file"))
    except CalibrationError:
        raise
    except ConfigError as error:
        raise CalibrationError(str(error)) from None


def load_chain(path: Path, channels: Sequence[Channel], bands: Mapping[str, Band]) -> cal.Chain:
    """The chain of every channel, in the channels' order.

    CalibrationError 'calibration.toml: element[2].table: what; remedy' for the first mistake;
    DeviceError where the file cannot be read.
    """
    try:
        return _chain(load_parts(path), channels, bands)
    except CalibrationError:
        raise
    except ConfigError as error:
        raise CalibrationError(str(error)) from None


def _parts(top: TopTable, body: bytes) -> Parts:
    certificate = _certificate(top.table("calibration"))
    detectors = _detectors(top)
    elements = [_element(table) for table in top.tables("element")]
    lines = [_contribution(table) for table in top.tables("contribution", [])]
    top.finish()
    if not lines:
        raise top.error(
            "contribution", "none given; a figure needs its uncertainty; add at least one"
        )
    return Parts(top, body, certificate, tuple(detectors), tuple(elements), tuple(lines))


def _chain(parts: Parts, channels: Sequence[Channel], bands: Mapping[str, Band]) -> cal.Chain:
    top, certificate = parts.top, parts.certificate
    chosen = [detector_of(parts, channel) for channel in channels]
    responses = [_response(parts, channel, bands[channel.band]) for channel in channels]
    contributions = tuple(
        budget_of(parts, channel) + cal.spread(k, channel.band) + detector.rounding
        for channel, detector, (_, k) in zip(channels, chosen, responses)
    )
    if len({detector.resolution for detector in chosen}) > 1:
        raise top.error("detector", "the detectors differ in what one count stands for")
    return cal.Chain(
        tables=tuple(detector.table for detector in chosen),
        frequencies_hz=tuple(f for f, _ in responses),
        k=tuple(k for _, k in responses),
        k_mid=np.array([cal.middle(k) for _, k in responses]),
        contributions=contributions,
        flags=_flags(channels, chosen, parts.invented),
        valid_temperature_c=certificate.valid_temperature_c,
        due_utc_ns=certificate.due_utc_ns,
        resolution=chosen[0].resolution,
        identity=hashlib.sha256(parts.body).hexdigest(),
        document=parts.body,
    )


def dated(chain: cal.Chain) -> datetime.date:
    """The day on which a chain's file says that it was calibrated."""
    top = tomlfile.parse(chain.document, "calibration file", "calibration file")
    return _date(top.table("calibration"), "date")


def _certificate(table: Table) -> Certificate:
    invented = table.flag("invented", False)
    said = {key: table.text(key).strip() for key in ("id", "laboratory", "certificate")}
    for key, text in said.items():
        invented |= text in EXAMPLE_TEXTS
        if not text:
            raise table.error(key, "is empty; write 'none' where there is none")
    date, due = _date(table, "date"), _date(table, "due")
    temperature_c = pair(table, "valid_temperature_c")
    table.finish()
    if due <= date:
        raise table.error("due", f"{due} is not after date, {date}")
    end = datetime.datetime.combine(due, datetime.time(), datetime.UTC) + datetime.timedelta(days=1)
    due_utc_ns = int(end.timestamp()) * NS_PER_S
    return Certificate(said["id"], said["certificate"], date, due_utc_ns, temperature_c, invented)


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


def _detectors(top: TopTable) -> list[Detector]:
    """One [detector] for every axis, or one [[detector]] per axis."""
    several = isinstance(top.any("detector"), list)
    return [
        read_detector(table)
        for table in (top.tables("detector") if several else [top.table("detector")])
    ]


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
    nameless = serial in EXAMPLE_TEXTS or certificate in EXAMPLE_TEXTS
    return Element(table, kind, f"{kind} {serial}", axis, certificate, nameless, curve)


def detector_of(parts: Parts, channel: Channel) -> Detector:
    """The detector of the channel's axis; ConfigError unless there is one, and one only."""
    return _one(parts.top, "detector", parts.detectors, channel, "detector")


def elements_of(parts: Parts, channel: Channel) -> tuple[Element, list[Element]]:
    """The antenna of the channel's axis, and all of its elements in the file's order."""
    mine = [element for element in parts.elements if element.axis in ("", channel.axis)]
    antennas = [element for element in mine if element.kind == "antenna"]
    return _one(parts.top, "element", antennas, channel, "antenna"), mine


def _response(parts: Parts, channel: Channel, band: Band) -> tuple[Real, Real]:
    """Frequencies (m,) over the band and E squared per watt (m,) of one channel."""
    antenna, mine = elements_of(parts, channel)
    frequencies_hz = cal.band_grid(band.low_hz, band.high_hz, [e.curve for e in mine])
    for element in mine:
        try:
            element.curve.at(frequencies_hz)
        except CalibrationError as error:
            raise element.where.error("table", f"{element.name} {error}") from None
    losses = [element.curve for element in mine if element.kind != "antenna"]
    return frequencies_hz, cal.e2_per_w(frequencies_hz, antenna.curve, losses)


def _one(top: TopTable, key: str, items: Sequence[A], channel: Channel, word: str) -> A:
    """The only item for the channel's axis."""
    mine = [item for item in items if item.axis in ("", channel.axis)]
    if len(mine) != 1:
        count = f"{len(mine)} of them" if mine else "none"
        raise top.error(key, f"channel {channel.name!r} needs one {word}; there is {count}")
    return mine[0]


def _contribution(table: Table) -> tuple[str, Contribution]:
    """The axis it is for ('': every one) and the line."""
    axis = table.text("axis", "", AXES)
    name = table.text("name")
    distribution = table.text("distribution", choices=DISTRIBUTIONS)
    line = Contribution(
        name=name,
        value_db=table.number("value", low=0.0, high=30.0),
        distribution=distribution,
        k=table.number("k", low=1.0, high=5.0) if distribution == "expanded" else 1.0,
        shared=table.flag("shared"),
        kind=table.text("kind", ""),
    )
    table.finish()
    return axis, line


def budget_of(parts: Parts, channel: Channel) -> tuple[Contribution, ...]:
    """The file's budget lines for the channel's axis; ConfigError where one stands twice."""
    mine = tuple(line for axis, line in parts.lines if axis in ("", channel.axis))
    names = [line.name for line in mine]
    for name in names:
        if names.count(name) > 1:
            raise parts.top.error("contribution", f"{name!r} twice for channel {channel.name!r}")
    return mine


def _flags(channels: Sequence[Channel], detectors: Sequence[Detector], invented: bool) -> int:
    """What holds for every figure: fewer than three axes in a band, logs averaged, invented."""
    axes = Counter(channel.band for channel in channels)
    flags = Flag.COMPONENT_ONLY if min(axes.values()) < len(AXES) else Flag(0)
    if any(detector.averages == "log" for detector in detectors):
        flags |= Flag.LOG_AVERAGED
    if invented:
        flags |= Flag.INVENTED_CALIBRATION
    return int(flags)
