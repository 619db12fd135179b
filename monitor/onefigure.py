"""One detector figure through a calibration file, at one frequency, to field strength."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from monitor import calterms
from monitor.calelements import PICKUPS, Element
from monitor.calfile import antenna_of, budget_of, detector_of
from monitor.calparts import CalibrationFile, Certificate, axes_of, elements_of
from monitor.config import Channel
from monitor.core.averaging_law import UNDECLARED
from monitor.core.budget import Contribution
from monitor.core.calibration import FrequencyTable, e2_per_w, temperature_db
from monitor.core.errors import ConfigError
from monitor.core.flags import LOWER_BOUND, UPPER_BOUND, Flag
from monitor.core.keys import Table
from monitor.core.law import CurveLaw, ProbeLaw, Said, ScaleLaw
from monitor.core.limits import frequency_text
from monitor.core.quantities import dbm_from_w, s_from_e, w_from_dbm
from monitor.core.uncertainty import expanded_db
from monitor.detectorfile import Detector, Fit
from monitor.marking import due_flags

FORMS = ("counts", "volts", "dbm", "dbfs", "v_per_m")


@dataclass(frozen=True, slots=True)
class Asked:
    """A figure in one of FORMS, and the circumstances. axis, gain '': the file knows one only.

    signal, bandwidth_hz: of the band, as a site file says them; they matter to averaged logs.
    """

    form: str
    value: float
    frequency_hz: float
    axis: str = ""
    temperature_c: float | None = None
    signal: str = "undeclared"
    bandwidth_hz: float = 0.0
    gain: str = ""


@dataclass(frozen=True, slots=True)
class Link:
    """One line of the chain, detector first, then the elements as the file lists them.

    gain_db: what it adds to a level on its way down: minus its loss, of an antenna minus its
    antenna factor (dB/m); None where it changes none. u_db: standard uncertainty of its own
    certificate's line, and with the first element of a kind of that kind's other lines; the
    squares of all links add up.
    """

    element: str
    kind: str
    gain_db: float | None
    u_db: float | None
    certificate: str | None


@dataclass(frozen=True, slots=True)
class Figure:
    """Power at the port and what it stands for; nan where the figure is no reading.

    temperature_db: what was taken off the power for the instrument's temperature.

    e_low, e_high: bounds at 95 %; 0 where the reading is an upper bound, inf where a lower one.
    """

    p_dbm: float
    e_v_per_m: float
    s_w_per_m2: float
    u_db: float
    k: float
    e_low_v_per_m: float
    e_high_v_per_m: float
    flags: int
    chain: tuple[Link, ...]
    certificate: Certificate
    volts: float | None
    temperature_db: float

    @property
    def expanded_db(self) -> float:
        """Expanded uncertainty at 95 %, dB."""
        return self.k * self.u_db


def through(file: CalibrationFile, asked: Asked, now_utc_ns: int) -> Figure:
    """Field strength of one axis for one detector figure, with bounds at 95 %.

    The response is that at the frequency; its variation over a band is no part of U. ConfigError
    for a form that the detector does not have, for an axis that must be named, and for a frequency
    outside a table, naming the element. now_utc_ns: for whether the calibration is overdue.
    """
    channel = Channel("the axis", _axis(file, asked.axis), "")
    detector = detector_of(file, channel)
    antenna, elements = antenna_of(file, channel), elements_of(file, channel.axis)
    at = np.array([asked.frequency_hz])
    for element in elements:
        _covers(element.where, element.name, element.curve, asked.frequency_hz)
    losses = [element.curve for element in elements if element.kind not in PICKUPS]
    fit = detector.fit(asked.gain, "", asked.frequency_hz, asked.frequency_hz)
    done = detector.treatment(asked.signal, asked.bandwidth_hz, UNDECLARED)
    warm_db = _temperature_db(detector, fit, asked)
    p_dbm, bits = _reported(_port_dbm(file, fit, asked), fit, done.correction_db, warm_db)
    per_w = float(e2_per_w(at, antenna.curve, losses)[0])
    e = math.nan if math.isnan(p_dbm) else math.sqrt(w_from_dbm(p_dbm) * per_w)
    lines, bits_of_lines = _budget(file, channel, asked.frequency_hz)
    lines = (*lines, *fit.contributions, *done.lines)
    expanded, k = expanded_db([lines], np.ones((1, 1)))
    bits |= bits_of_lines | _circumstances(file, channel, asked, now_utc_ns) | done.flags
    low, high = _bounds(e, float(expanded[0]), bits)
    return Figure(
        p_dbm, e, s_from_e(e), float(expanded[0]) / k, k, low, high, bits,
        _links(file, elements, asked.frequency_hz, lines), file.certificate,
        _volts(fit, asked), warm_db,
    )  # fmt: skip


def _axis(file: CalibrationFile, axis: str) -> str:
    """The axis, which must be named where a table is for one axis only."""
    named = {d.axis for d in file.detectors} | {e.axis for e in file.elements}
    known = sorted((named | {line.axis for line in file.lines}) - {""})
    if known and not axis:
        raise ConfigError(
            f"{file.top.where}: has tables of its own for {', '.join(known)}; say which --axis"
        )
    return axis


def _budget(
    file: CalibrationFile, channel: Channel, frequency_hz: float
) -> tuple[tuple[Contribution, ...], int]:
    """The lines of an axis at one frequency, the assumed ones too, and the flag that these set."""
    for line in file.lines:
        if line.curve and line.axis in ("", channel.axis):
            _covers(line.where, repr(line.name), line.curve, frequency_hz)
    written = budget_of(file, channel, frequency_hz, frequency_hz)
    kinds = calterms.needed(len(axes_of(file)), "undeclared")
    assumed = calterms.assumed(written, kinds)
    return written + assumed, int(Flag.ASSUMED_TERMS) if assumed else 0


def _covers(where: Table, name: str, curve: FrequencyTable, frequency_hz: float) -> None:
    low, high = (float(curve.frequencies_hz[i]) for i in (0, -1))
    if not low <= frequency_hz <= high:
        raise where.error(
            "table",
            f"{name} covers {frequency_text(low)} to {frequency_text(high)}, not "
            f"{frequency_text(frequency_hz)}; nothing is extrapolated; calibrate further",
        )


def _port_dbm(file: CalibrationFile, fit: Fit, asked: Asked) -> Said:
    """Power at the detector's port, dBm (nan: no reading), and flags."""
    law = fit.law
    if asked.form == "counts":
        power_w, bits = fit.table.convert(np.array([int(asked.value)], np.int32))
        p_w = float(power_w[0])
        return (math.nan if math.isnan(p_w) else dbm_from_w(p_w)), int(bits[0])
    if asked.form == "dbm":
        return law.at_dbm(asked.value)
    if asked.form == "volts" and isinstance(law, CurveLaw):
        return law.at_volts(asked.value)
    if asked.form == "dbfs" and isinstance(law, ScaleLaw) and law.quantity == "dbfs":
        return law.at_dbm(asked.value + law.offset_db)
    if asked.form == "v_per_m" and isinstance(law, ProbeLaw):
        return law.at_v_per_m(asked.value)
    gives, option = _own_form(fit)
    raise ConfigError(
        f"--{asked.form.replace('_', '-')}: the detector of {file.top.where} gives {gives}; give"
        " --counts, --dbm" + ("" if option == "dbm" else f" or --{option}")
    )


def _own_form(fit: Fit) -> tuple[str, str]:
    """What the detector's figures are in, and the option that takes them."""
    if isinstance(fit.law, CurveLaw):
        return "volts", "volts"
    if isinstance(fit.law, ProbeLaw):
        return "V/m", "v-per-m"
    return {"dbm": "dBm", "dbfs": "dBFS"}[fit.law.quantity], fit.law.quantity


def _temperature_db(detector: Detector, fit: Fit, asked: Asked) -> float:
    """By how much a figure of the instrument is too high; a bare power is none of its figures."""
    shown = asked.form != "dbm" or _own_form(fit)[1] == "dbm"
    if asked.temperature_c is None or not shown:
        return 0.0
    return float(temperature_db(detector.temperature, np.array([asked.temperature_c]))[0])


def _reported(said: Said, fit: Fit, correction_db: float, warm_db: float) -> Said:
    """Corrected for averaged logs and temperature; what is below the range is its end, flagged."""
    p_dbm, bits = said[0] + correction_db - warm_db, said[1]
    least_dbm = fit.law.range_dbm[0] + correction_db
    if p_dbm < least_dbm:
        return least_dbm, bits | int(Flag.BELOW_RANGE)
    return p_dbm, bits


def _volts(fit: Fit, asked: Asked) -> float | None:
    """Volts at the detector, where counts or volts were given and it has any."""
    if not isinstance(fit.law, CurveLaw):
        return None
    if asked.form == "counts":
        return asked.value * fit.law.volts_per_count
    return asked.value if asked.form == "volts" else None


def _circumstances(file: CalibrationFile, channel: Channel, asked: Asked, now_utc_ns: int) -> int:
    """Flags of the calibration, the time and the temperature; one axis is a component."""
    bits = Flag.COMPONENT_ONLY
    if file.invented:
        bits |= Flag.INVENTED_CALIBRATION
    now = np.array([now_utc_ns], np.int64)
    bits |= Flag(int(due_flags(now, file.dues(channel.axis)[0].utc_ns)[0]))
    low, high = file.certificate.valid_temperature_c
    if asked.temperature_c is None:
        bits |= Flag.TEMPERATURE_UNKNOWN
    elif not low <= asked.temperature_c <= high:
        bits |= Flag.OUT_OF_TEMPERATURE
    return int(bits)


def _bounds(e: float, expanded_db: float, bits: int) -> tuple[float, float]:
    """The component's bounds: a reading at an end of the range, or of averaged logs, has one."""
    if math.isnan(e):
        return math.nan, math.nan
    factor = 10.0 ** (expanded_db / 20.0)
    one_sided = LOWER_BOUND & ~Flag.COMPONENT_ONLY
    low = 0.0 if bits & UPPER_BOUND else e / factor
    return low, math.inf if bits & one_sided else e * factor


def _links(
    file: CalibrationFile,
    elements: Sequence[Element],
    frequency_hz: float,
    lines: Sequence[Contribution],
) -> tuple[Link, ...]:
    """Detector, elements, and what of the budget belongs to neither."""
    kinds = {"detector", *(element.kind for element in elements)}
    own = {element.line.name for element in elements if element.line}
    squares: dict[str, float] = {}
    for line in lines:
        key = line.name if line.name in own else line.kind
        squares[key] = squares.get(key, 0.0) + line.u**2

    def u_db(*keys: str) -> float | None:
        found = [squares.pop(key) for key in keys if key in squares]
        return math.sqrt(sum(found)) if found else None

    links = [Link("detector", "detector", None, u_db("detector"), file.certificate.number)]
    for element in elements:
        gain_db = -float(element.curve.at(np.array([frequency_hz]))[0])
        names = [element.line.name] if element.line else []
        u = u_db(*names, element.kind)
        links.append(Link(element.name, element.kind, gain_db, u, element.certificate))
    rest = [line for line in lines if line.kind not in kinds]
    return (*links, *(Link(line.name, line.kind, None, line.u, None) for line in rest))
