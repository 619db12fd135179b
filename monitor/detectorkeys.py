"""The keys of a [detector] table, kind by kind."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from monitor.core import detector as det
from monitor.core import probe
from monitor.core.calibration import FrequencyTable
from monitor.core.curves import Curve, Curves
from monitor.core.errors import CalibrationError
from monitor.core.keys import Table
from monitor.core.law import ProbeLaw
from monitor.core.quantities import PORT_OHM, w_from_dbm
from monitor.detectorkinds import (
    CurveSource,
    Ends,
    Noise,
    ProbeSource,
    ScaleSource,
    Source,
    Spur,
    Step,
)
from monitor.sitebands import frequency
from monitor.tomlfile import pair, rows

MAX_BITS = 18
SCALE_MARGIN_DB = 20.0
"""How far beyond its range a plain scale still gives readings by default. Our choice."""
PROBE_MARGIN = 2.0
"""How far above its range a probe's figure is still a reading by default. Our choice."""
LEAST_V_PER_M, MOST_V_PER_M = 1e-6, 1e5
LEAST_NOISE_U_DB, MOST_NOISE_U_DB = 0.01, 3.0
"""A noise known worse is not to be taken off; to first order its uncertainty means nothing. One
known exactly there is not, and an average below it would stay below 0 V/m (our choice)."""
NO_NOISE = Noise()


def read_source(table: Table, kind: str) -> Source:
    """The keys of one kind; ConfigError of one line."""
    if kind == "scale":
        return _scale(table)
    return _probe(table) if kind == "probe" else _curve(table, kind)


def _noise(table: Table, usable: Ends, default: Noise = NO_NOISE) -> Noise:
    """noise_dbm, at the port, and its noise_u_db."""
    noise_dbm = table.number("noise_dbm", None, -200.0, usable[1])
    if noise_dbm is None:
        return default
    return _known_noise(table, w_from_dbm(noise_dbm))


def _known_noise(table: Table, noise_w: float) -> Noise:
    """With noise_u_db: u of a power from u in dB, to first order (GUM 5.1.2)."""
    u_db = table.number("noise_u_db", low=LEAST_NOISE_U_DB, high=MOST_NOISE_U_DB)
    return Noise(noise_w, noise_w * u_db * math.log(10.0) / 10.0)


def _scale(table: Table) -> ScaleSource:
    quantity = table.text("quantity", "dbm", ("dbm", "dbfs"))
    resolution = table.number("resolution", low=1e-6, high=10.0)
    stepped = quantity == "dbfs" and bool(table.any("step", None))
    if not stepped:
        offset_db = (
            table.number("dbfs_to_dbm", low=-300.0, high=300.0) if quantity == "dbfs" else 0.0
        )
        usable = pair(table, "range_dbm")
        valid = _valid_dbm(table, usable)
        step = Step("", offset_db, valid, usable, _noise(table, usable))
        return ScaleSource(quantity, resolution, (step,), _spurs(table, quantity, [""]))
    usable = pair(table, "range_dbm", None)
    noise = _noise(table, usable or (-200.0, 200.0))
    valid = pair(table, "valid_dbm", None)
    steps = tuple(_step(t, usable, valid, noise) for t in table.tables("step"))
    names = [step.gain for step in steps]
    for name in names:
        if names.count(name) > 1:
            raise table.error("step", f"gain {name!r} stands twice")
    return ScaleSource(quantity, resolution, steps, _spurs(table, quantity, ["", *names]))


def _spurs(table: Table, quantity: str, gains: Sequence[str]) -> tuple[Spur, ...]:
    """The [[detector.spur]] of a receiver. gains: the steps that there are, '' for every one."""
    tables = table.tables("spur", [])
    if tables and quantity != "dbfs":
        raise table.error("spur", 'only where quantity is "dbfs"; take it out')
    found = []
    for one in tables:
        spur = Spur(
            frequency(one, "frequency"),
            frequency(one, "width"),
            one.number("level_dbm", low=-250.0, high=100.0),
            one.text("gain", "", gains).strip(),
        )
        one.finish()
        if spur.width_hz >= spur.frequency_hz:
            raise one.error("width", "is no less than the frequency; correct one of them")
        found.append(spur)
    return tuple(found)


def _step(table: Table, usable: Ends | None, valid: Ends | None, noise: Noise) -> Step:
    """One [[detector.step]]; what it does not say for itself is the detector's."""
    gain = table.text("gain").strip()
    if not gain:
        raise table.error("gain", "is empty; name the step, for example '20.7'")
    values = rows(table, "table", "[frequency, dB]", frequency=True)
    try:
        offset = FrequencyTable(values[:, 0], values[:, 1])
    except CalibrationError as error:
        raise table.error("table", str(error)) from None
    own = pair(table, "range_dbm") if usable is None else pair(table, "range_dbm", usable)
    held = _valid_dbm(table, own, valid)
    found = Step(gain, offset, held, own, _noise(table, own, noise))
    table.finish()
    return found


def _valid_dbm(table: Table, usable: Ends, default: Ends | None = None) -> Ends:
    margin = (usable[0] - SCALE_MARGIN_DB, usable[1] + SCALE_MARGIN_DB)
    valid = pair(table, "valid_dbm", default or margin)
    if valid[0] > usable[0] or valid[1] < usable[1]:
        raise table.error("valid_dbm", "must hold range_dbm")
    return valid


def _curve(table: Table, kind: str) -> CurveSource:
    curves, key = _curves(table, "dbm" if kind == "log" else "amplitude")
    ends = curves.ends_dbm
    usable = pair(table, "range_dbm", ends)
    if usable[0] < ends[0] or usable[1] > ends[1]:
        raise table.error(
            "range_dbm", f"reaches beyond the {key}, {ends[0]:g} to {ends[1]:g} dBm; narrow it"
        )
    valid_v = pair(table, "valid_v")
    volts = sorted(v for dbm in usable for v in curves.volts_of(dbm))
    if volts[0] < valid_v[0] or volts[-1] > valid_v[1]:
        raise table.error(
            "valid_v", f"must hold the range's voltages, {volts[0]:g} to {volts[-1]:g} V"
        )
    converter = _converter(table, valid_v)
    return CurveSource(curves, converter, valid_v, usable, _noise(table, usable))


def _curves(table: Table, linear_in: str) -> tuple[Curves, str]:
    """By curve, or by [[detector.curve_at]]; and how the file calls it, for messages."""
    several = table.tables("curve_at", [])
    if not several:
        points = rows(table, "curve", "[dBm, volts]")
        try:
            curve = Curve(points[:, 0], points[:, 1], linear_in)
        except CalibrationError as error:
            raise table.error("curve", str(error)) from None
        return Curves(np.empty(0), (curve,)), "curve"
    if table.any("curve", None) is not None:
        raise table.error("curve", "give curve for all frequencies or curve_at, not both")
    if len(several) < 2:
        raise table.error("curve_at", "one alone; give two frequencies or more, or curve for all")
    at_hz, curves = [], []
    for one in several:
        at_hz.append(frequency(one, "frequency"))
        points = rows(one, "points", "[dBm, volts]")
        one.finish()
        try:
            curves.append(Curve(points[:, 0], points[:, 1], linear_in))
        except CalibrationError as error:
            raise one.error("points", str(error)) from None
    try:
        return Curves(np.array(at_hz), tuple(curves)), "curves"
    except CalibrationError as error:
        raise table.error("curve_at", str(error)) from None


def _converter(table: Table, valid_v: Ends) -> det.Converter:
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


def _probe(table: Table) -> ProbeSource:
    quantity = table.text("quantity", choices=probe.QUANTITIES)
    resolution = table.number("resolution", low=1e-6, high=10.0)
    points = rows(table, "linearity", "[indicated, true]", most=MOST_V_PER_M)
    try:
        linearity = probe.Linearity(points[:, 0], points[:, 1])
    except CalibrationError as error:
        raise table.error("linearity", str(error)) from None
    ends = float(linearity.true[0]), float(linearity.true[-1])
    if ends[0] < LEAST_V_PER_M:
        raise table.error("linearity", f"{ends[0]:g} V/m is below {LEAST_V_PER_M:g} V/m")
    usable = pair(table, "range_v_per_m", ends, most=MOST_V_PER_M)
    if usable[0] < ends[0] or usable[1] > ends[1]:
        raise table.error(
            "range_v_per_m",
            f"reaches beyond the linearity, {ends[0]:g} to {ends[1]:g} V/m; narrow it",
        )
    most = PROBE_MARGIN * float(linearity.indicated[-1])
    valid = pair(table, "valid_v_per_m", (0.0, most), most=MOST_V_PER_M)
    if not 0.0 <= valid[0] <= linearity.indicated[0] or valid[1] < linearity.indicated[-1]:
        raise table.error("valid_v_per_m", "must hold the linearity's indicated figures")
    law = ProbeLaw(quantity, resolution, linearity, valid, usable)
    return ProbeSource(law, _probe_noise(table, usable))


def _probe_noise(table: Table, usable: Ends) -> Noise:
    """noise_v_per_m, true field strength, and its noise_u_db."""
    e = table.number("noise_v_per_m", None, 0.0, usable[1])
    if e is None:
        return NO_NOISE
    return _known_noise(table, e * e / PORT_OHM)
