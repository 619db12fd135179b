"""An element of the chain: what it does over frequency, and the certificate that says so."""

from __future__ import annotations

import datetime
from dataclasses import dataclass

from monitor.callines import AXES, MOST_DB, Line, frequency_table, read_degrees
from monitor.core.budget import Contribution
from monitor.core.calibration import FrequencyTable
from monitor.core.distributions import Real
from monitor.core.errors import CalibrationError
from monitor.core.keys import Table
from monitor.core.quantities import antenna_factor_db_per_m
from monitor.tomlfile import date, rows

PICKUPS = ("antenna", "probe")
"""Elements that turn power at a port into field strength; each axis has one."""
ELEMENTS = (*PICKUPS, "cable", "attenuator", "filter", "preamplifier")
QUANTITIES = {"probe": "correction", "preamplifier": "gain"}
ANTENNA_QUANTITIES = ("antenna_factor", "gain")
UNITS = {"antenna_factor": "dB/m", "gain": "dB", "loss": "dB", "correction": "dB"}
EXAMPLE_TEXTS = ("name of the laboratory", "number of the certificate", "serial number")
"""What the examples say where a certificate is to be named: nothing stands behind it."""


@dataclass(frozen=True, slots=True)
class Element:
    """One part between field and detector; axis '' serves every axis.

    quantity: what its table holds, antenna_factor, gain (of an antenna or a preamplifier), loss, or
    correction (of a probe, true less indicated). isotropic: it sees the whole field. given_db:
    (n,), that table. curve: what it takes from a level, an antenna factor (dB/m) or a loss (dB),
    below zero where it amplifies. laboratory '', date and due None where not given. line: the
    certificate's uncertainty, where it is given.
    """

    where: Table
    kind: str
    serial: str
    certificate: str
    axis: str
    quantity: str
    given_db: Real
    curve: FrequencyTable
    laboratory: str
    date: datetime.date | None
    due: datetime.date | None
    line: Line | None
    isotropic: bool = False

    @property
    def name(self) -> str:
        """Kind and serial, for messages."""
        return f"{self.kind} {self.serial}"

    @property
    def unit(self) -> str:
        """Of given_db."""
        is_antenna_gain = self.kind == "antenna" and self.quantity == "gain"
        return "dBi" if is_antenna_gain else UNITS[self.quantity]

    @property
    def nameless(self) -> bool:
        """Whether serial, certificate or laboratory is still an example's text."""
        return any(
            text in EXAMPLE_TEXTS for text in (self.serial, self.certificate, self.laboratory)
        )


def read_element(table: Table) -> Element:
    """Read one [[element]]; ConfigError of one line."""
    kind = table.text("type", choices=ELEMENTS)
    serial, certificate = table.text("serial").strip(), table.text("certificate").strip()
    axis = table.text("axis", "", AXES)
    quantity = QUANTITIES.get(kind, "loss")
    if kind == "antenna":
        quantity = table.text("quantity", ANTENNA_QUANTITIES[0], ANTENNA_QUANTITIES)
    values = _table(table)
    curve = _curve(table, kind, quantity, values)
    line = _line(table, f"{kind} {serial}, certificate", kind, axis, values)
    laboratory = table.text("laboratory", "").strip()
    day, due = date(table, "date", None), date(table, "due", None)
    if day and due and due <= day:
        raise table.error("due", f"{due} is not after date, {day}")
    isotropic = _isotropic(table, kind, axis)
    table.finish()
    return Element(
        table, kind, serial, certificate, axis, quantity, values[:, 1], curve, laboratory, day, due,
        line, isotropic,
    )  # fmt: skip


def _isotropic(table: Table, kind: str, axis: str) -> bool:
    """Whether it gives one figure of the whole field."""
    isotropic: bool = table.flag("isotropic", False)
    if isotropic and kind != "probe":
        raise table.error("isotropic", "is for a probe calibrated as a whole; take it out")
    if isotropic and axis:
        raise table.error("axis", "stands beside isotropic: it has no axis; take one out")
    return isotropic


def _table(table: Table) -> Real:
    """Frequency, dB and, where its first row has three, U in dB: (n, 2) or (n, 3)."""
    given = table.any("table")
    if isinstance(given, list) and given and isinstance(given[0], list) and len(given[0]) == 3:
        return rows(table, "table", "[frequency, dB, U in dB]", frequency=True, columns=3)
    return rows(table, "table", "[frequency, dB]", frequency=True)


def _curve(table: Table, kind: str, quantity: str, values: Real) -> FrequencyTable:
    """What it takes from a level, over frequency."""
    f, db = values[:, 0], values[:, 1]
    if kind not in PICKUPS and (db < 0).any():
        raise table.error("table", f"a {quantity} of {db.min():g} dB; a {quantity} is zero or more")
    if kind == "antenna" and quantity == "gain":
        # both straight over log f: converted row by row it is the same between the rows
        db = antenna_factor_db_per_m(db, f)
    try:
        return FrequencyTable(f, -db if kind == "preamplifier" else db)
    except CalibrationError as error:
        raise table.error("table", str(error)) from None


def _line(table: Table, name: str, kind: str, axis: str, values: Real) -> Line | None:
    """The certificate's uncertainty as a line of the budget, where it is given."""
    u_db = table.number("u_db", None, 0.0, MOST_DB)
    curve = None
    if values.shape[1] == 3:
        if u_db is not None:
            raise table.error("u_db", "stands beside a table with U in it; give one of the two")
        curve = frequency_table(table, values[:, 0], values[:, 2], "a U")
        u_db = float(values[:, 2].max())
        if u_db > MOST_DB:
            raise table.error("table", f"a U of {u_db:g} dB is beyond {MOST_DB:g} dB")
    if u_db is None:
        for key in ("k", "degrees_of_freedom"):
            if table.any(key, None) is not None:
                raise table.error(key, "without an uncertainty; give u_db, too")
        return None
    k = table.number("k", low=1.0, high=5.0)
    degrees = read_degrees(table)
    line = Contribution(name, u_db, "expanded", k, axis == "", kind, degrees)
    return Line(table, axis, line, curve)
