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
    nameless: bool
    curve: cal.FrequencyTable


def load_chain(path: Path, channels: Sequence[Channel], bands: Mapping[str, Band]) -> cal.Chain:
    """The chain of every channel, in the channels' order.

    CalibrationError 'calibration.toml: element[2].table: what; remedy' for the first mistake;
    DeviceError where the file cannot be read.
    """
    try:
        top, body = tomlfile.read(Path(path), "calibration file")
        return _chain(top, body, channels, bands)
    except CalibrationError:
        raise
    except ConfigError as error:
        raise CalibrationError(str(error)) from None


def _chain(
    top: TopTable, body: bytes, channels: Sequence[Channel], bands: Mapping[str, Band]
) -> cal.Chain:
    due_utc_ns, valid_temperature_c, invented = _certificate(top.table("calibration"))
    detectors = _detectors(top)
    elements = [_element(table) for table in top.tables("element")]
    invented |= any(element.nameless for element in elements)
    lines = [_contribution(table) for table in top.tables("contribution", [])]
    top.finish()
    if not lines:
        raise top.error(
            "contribution", "none given; a figure needs its uncertainty; add at least one"
        )
    chosen = [_one(top, "detector", detectors, channel, "detector") for channel in channels]
    responses = [_response(top, elements, channel, bands[channel.band]) for channel in channels]
    contributions = tuple(
        _budget(top, lines, channel) + cal.spread(k, channel.band) + detector.rounding
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
        flags=_flags(channels, chosen, invented),
        valid_temperature_c=valid_temperature_c,
        due_utc_ns=due_utc_ns,
        resolution=chosen[0].resolution,
        identity=hashlib.sha256(body).hexdigest(),
        document=body,
    )


def dated(chain: cal.Chain) -> datetime.date:
    """The day on which a chain's file says that it was calibrated."""
    top = tomlfile.parse(chain.document, "calibration file", "calibration file")
    return _date(top.table("calibration"), "date")


def _certificate(table: Table) -> tuple[int, tuple[float, float], bool]:
    """UTC ns from which the calibration is overdue (the end of its due day); valid temperatures.

    The last: whether the figures are said, or seen by an example's texts, to be invented.
    """
    invented = table.flag("invented", False)
    for key in ("id", "laboratory", "certificate"):
        text = table.text(key).strip()
        invented |= text in EXAMPLE_TEXTS
        if not text:
            raise table.error(key, "is empty; write 'none' where there is none")
    date, due = _date(table, "date"), _date(table, "due")
    temperature_c = pair(table, "valid_temperature_c")
    table.finish()
    if due <= date:
        raise table.error("due", f"{due} is not after date, {date}")
    end = datetime.datetime.combine(due, datetime.time(), datetime.UTC) + datetime.timedelta(days=1)
    return int(end.timestamp()) * NS_PER_S, temperature_c, invented


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
    return Element(table, kind, f"{kind} {serial}", axis, nameless, curve)


def _response(
    top: TopTable, elements: Sequence[Element], channel: Channel, band: Band
) -> tuple[Real, Real]:
    """Frequencies (m,) over the band and E squared per watt (m,) of one channel."""
    mine = [element for element in elements if element.axis in ("", channel.axis)]
    antenna = _one(top, "element", [e for e in mine if e.kind == "antenna"], channel, "antenna")
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


def _budget(
    top: TopTable, lines: Sequence[tuple[str, Contribution]], channel: Channel
) -> tuple[Contribution, ...]:
    mine = tuple(line for axis, line in lines if axis in ("", channel.axis))
    names = [line.name for line in mine]
    for name in names:
        if names.count(name) > 1:
            raise top.error("contribution", f"{name!r} twice for channel {channel.name!r}")
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
