"""The [detector] table of a calibration file: counts to power at the detector's port."""

from __future__ import annotations

from dataclasses import dataclass

from monitor.core import detector as det
from monitor.core.averaging_law import KINDS as AVERAGES
from monitor.core.averaging_law import Averaging, Treatment, joined, treatment
from monitor.core.budget import Contribution
from monitor.core.calibration import CountTable
from monitor.core.errors import CalibrationError
from monitor.core.keys import Table
from monitor.core.law import CurveLaw, Law, ScaleLaw
from monitor.tomlfile import pair, rows

MAX_BITS = 18
SCALE_MARGIN_DB = 20.0
"""How far beyond its range a plain scale still gives (flagged) readings by default."""


@dataclass(frozen=True, slots=True)
class Detector:
    """A detector's count table, and the law that it was made from.

    resolution: what a count stands for; None for converter counts. serial: what its
    board calls itself (the name in its banner), '' where the file does not say. averaging_s: over
    how long it averages, 0 where unknown.
    """

    axis: str
    kind: str
    averages: str
    table: CountTable
    resolution: float | None
    rounding: tuple[Contribution, ...]
    law: Law
    serial: str = ""
    averaging_s: float = 0.0

    @property
    def averaging(self) -> Averaging:
        """What it, or the converter behind it, averages before it gives a count."""
        return Averaging(self.averages, self.averaging_s)

    def treatment(self, signal: str, bandwidth_hz: float, front: Averaging) -> Treatment:
        """What holds of its readings of such a signal behind that front end.

        Volts of a true-rms detector follow the root of power: no correction is known for their
        logs.
        """
        holds = joined(self.averaging, front)
        known = "undeclared" if self.kind == "rms" and signal == "noise" else signal
        return treatment(holds.kind, holds.seconds, known, bandwidth_hz)


def read_detector(table: Table) -> Detector:
    """Read one [detector] table; ConfigError or CalibrationError of one line."""
    axis = table.text("axis", "", ("x", "y", "z"))
    kind = table.text("kind", choices=("log", "rms", "scale"))
    averages = table.text("averages", choices=AVERAGES)
    averaging_s = table.number("averaging_s", 0.0, 0.0, 3600.0)
    if averaging_s and averages == "none":
        raise table.error("averaging_s", "only where averages is log or power; take it out")
    serial = table.text("serial", "").strip()
    read = _scale if kind == "scale" else _curve
    counts, resolution, half_db, law = read(table, kind)
    table.finish()
    half = det.rounding(half_db)
    return Detector(axis, kind, averages, counts, resolution, half, law, serial, averaging_s)


def _scale(table: Table, kind: str) -> tuple[CountTable, float | None, float, Law]:
    quantity = table.text("quantity", "dbm", ("dbm", "dbfs"))
    resolution = table.number("resolution", low=1e-6, high=10.0)
    range_dbm = pair(table, "range_dbm")
    offset_db = table.number("dbfs_to_dbm", low=-300.0, high=300.0) if quantity == "dbfs" else 0.0
    margin = (range_dbm[0] - SCALE_MARGIN_DB, range_dbm[1] + SCALE_MARGIN_DB)
    valid_dbm = pair(table, "valid_dbm", margin)
    if valid_dbm[0] > range_dbm[0] or valid_dbm[1] < range_dbm[1]:
        raise table.error("valid_dbm", "must hold range_dbm")
    try:
        counts = det.scale_table(resolution, offset_db, valid_dbm, range_dbm)
    except CalibrationError as error:
        raise table.error("resolution", str(error)) from None
    return counts, resolution, resolution / 2.0, ScaleLaw(quantity, offset_db, valid_dbm, range_dbm)


def _curve(table: Table, kind: str) -> tuple[CountTable, float | None, float, Law]:
    points = rows(table, "curve", "[dBm, volts]")
    try:
        curve = det.Curve(points[:, 0], points[:, 1], "dbm" if kind == "log" else "amplitude")
    except CalibrationError as error:
        raise table.error("curve", str(error)) from None
    ends = (float(curve.dbm.min()), float(curve.dbm.max()))
    range_dbm = pair(table, "range_dbm", ends)
    if range_dbm[0] < ends[0] or range_dbm[1] > ends[1]:
        raise table.error(
            "range_dbm", f"reaches beyond the curve, {ends[0]:g} to {ends[1]:g} dBm; narrow it"
        )
    valid_v = pair(table, "valid_v")
    volts = sorted(curve.volts_at(dbm) for dbm in range_dbm)
    if volts[0] < valid_v[0] or volts[1] > valid_v[1]:
        raise table.error(
            "valid_v", f"must hold the range's voltages, {volts[0]:g} to {volts[1]:g} V"
        )
    converter = _converter(table, valid_v)
    try:
        counts = det.curve_table(curve, converter, valid_v, range_dbm)
        half_db = det.half_step_db(curve, converter, range_dbm)
    except CalibrationError as error:
        raise table.error("bits" if converter.rails else "volts_per_count", str(error)) from None
    law = CurveLaw(curve, converter.volts_per_count, valid_v, range_dbm)
    return counts, None if converter.rails else law.volts_per_count, half_db, law


def _converter(table: Table, valid_v: tuple[float, float]) -> det.Converter:
    """With bits: a converter from 0 to its top, rails included. Without: volts in steps."""
    bits = table.whole("bits", None, 4, MAX_BITS)
    step_v: float | None = table.number("volts_per_count", None, 1e-9, 1.0)
    if bits is None:
        if step_v is None:
            raise table.error("bits", "missing; give bits and reference_v, or volts_per_count")
        return det.stepped(step_v, valid_v)
    if step_v is None:
        reference_v = table.number("reference_v", low=0.01, high=100.0)
        step_v = reference_v / 2**bits / table.number("gain", 1.0, 1e-3, 1e3)
    return det.Converter(step_v, 0, 2**bits - 1, rails=True)
