"""[as_found] of a calibration file: how the chain had moved since the calibration before."""

from __future__ import annotations

import datetime
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from monitor.core.caldrift import largest_db
from monitor.core.calibration import FrequencyTable
from monitor.core.errors import CalibrationError
from monitor.core.keys import Table
from monitor.sitebands import Band, Channel
from monitor.tomlfile import date, rows

AXES = ("x", "y", "z")
MOST_DB = 30.0


@dataclass(frozen=True, slots=True)
class Part:
    """By how much the chain or an element of it reads too high as found, dB: alike at every
    frequency or over frequency. kind '': the chain; axis '': every axis."""

    kind: str
    serial: str
    axis: str
    db: float | FrequencyTable


@dataclass(frozen=True, slots=True)
class AsFound:
    """What a calibration found against the as-left values of the one before.

    previous: id or SHA-256 of that one's file. adjusted: the chain was set right afterwards.
    """

    where: Table
    date: datetime.date
    previous: str
    adjusted: bool
    parts: tuple[Part, ...]

    def drift_db(self, axis: str, low_hz: float, high_hz: float) -> float:
        """The largest size of the drift over a band, dB, of the parts that serve the axis.

        CalibrationError where a table does not cover the band.
        """
        mine = [part.db for part in self.parts if part.axis in ("", axis)]
        curves = [db for db in mine if isinstance(db, FrequencyTable)]
        constants = [db for db in mine if not isinstance(db, FrequencyTable)]
        try:
            return largest_db(curves, constants, low_hz, high_hz)
        except CalibrationError as error:
            raise CalibrationError(str(self.where.error("table", str(error)))) from None

    def spans_hz(self, axes: str) -> list[tuple[float, float]]:
        """Lowest and highest frequency of each table of a drift that serves one of the axes."""
        tables = [part.db for part in self.parts if part.axis in ("", *axes)]
        curves = [db.frequencies_hz for db in tables if isinstance(db, FrequencyTable)]
        return [(float(f[0]), float(f[-1])) for f in curves]

    def over(self, channels: Iterable[Channel], bands: Mapping[str, Band]) -> float:
        """The largest drift of any channel over its band, dB; CalibrationError as of drift_db."""
        each = ((channel.axis, bands[channel.band]) for channel in channels)
        return max(self.drift_db(axis, band.low_hz, band.high_hz) for axis, band in each)


def read_as_found(table: Table, calibrated: datetime.date) -> AsFound:
    """Read the table; ConfigError of one line. calibrated: the date of the calibration."""
    day: datetime.date = date(table, "date")
    if day > calibrated:
        raise table.error("date", f"{day} is after the calibration's date, {calibrated}")
    previous = table.text("previous").strip()
    if not previous:
        raise table.error("previous", "is empty; write the id of the calibration before")
    adjusted = table.flag("adjusted", False)
    whole = _db(table)
    parts = [] if whole is None else [Part("", "", "", whole)]
    for element in table.tables("element", []):
        kind, serial = element.text("type").strip(), element.text("serial", "").strip()
        axis, db = element.text("axis", "", AXES), _db(element)
        element.finish()
        if db is None:
            raise element.error("db", "missing; add db = ... or table = [[frequency, dB], ...]")
        parts.append(Part(kind, serial, axis, db))
    table.finish()
    if not parts:
        raise table.error("db", "missing; add db = ..., a table or [[as_found.element]]")
    return AsFound(table, day, previous, adjusted, tuple(parts))


def _db(table: Table) -> float | FrequencyTable | None:
    """db or table of frequency and dB; None where neither is there."""
    constant = table.number("db", None, -MOST_DB, MOST_DB)
    if table.any("table", None) is None:
        return constant
    if constant is not None:
        raise table.error("db", "stands beside a table; give one of the two")
    values = rows(table, "table", "[frequency, dB]", frequency=True)
    if abs(values[:, 1]).max() > MOST_DB:
        raise table.error("table", f"a drift beyond {MOST_DB:g} dB is a slip of the point")
    try:
        return FrequencyTable(values[:, 0], values[:, 1])
    except CalibrationError as error:
        raise table.error("table", str(error)) from None
