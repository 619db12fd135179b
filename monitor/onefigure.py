"""One detector figure through a calibration file, at one frequency, to field strength."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from monitor import calterms
from monitor.calelements import PICKUPS, Element
from monitor.calfile import antenna_of, budget_of, detector_of, isotropic
from monitor.calparts import CalibrationFile, Certificate, axes_of, elements_of
from monitor.config import Channel
from monitor.core.averaging_law import UNDECLARED
from monitor.core.budget import Contribution
from monitor.core.calibration import FrequencyTable, e2_per_w
from monitor.core.errors import ConfigError
from monitor.core.flags import LOWER_BOUND, UPPER_BOUND, Flag
from monitor.core.interval import DETECTION, interval, total_db
from monitor.core.keys import Table
from monitor.core.limits import frequency_text
from monitor.core.quantities import dbm_from_w, s_from_e, w_from_dbm
from monitor.core.uncertainty import expanded_db
from monitor.detectorkinds import Noise
from monitor.marking import due_flags
from monitor.oneport import Asked, at_the_range, port_dbm, volts_of, warm_db


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

    temperature_db: what was taken off the power for the instrument's temperature; noise_dbm: noise
    taken off for the field, None where there is none. p_dbm: as read.

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
    noise_dbm: float | None

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
    fit = fit.treated(done)
    warm = warm_db(detector, fit, asked)
    p_dbm, bits = at_the_range(port_dbm(file, fit, asked), fit, warm)
    per_w = float(e2_per_w(at, antenna.curve, losses)[0])
    lines, bits_of_lines = _budget(file, channel, asked.frequency_hz)
    lines = (*lines, *fit.contributions)
    expanded, k = expanded_db([lines], np.ones((1, 1)))
    bits |= bits_of_lines | _circumstances(file, channel, asked, now_utc_ns) | done.flags
    found = _field(w_from_dbm(p_dbm), fit.noise, per_w, float(expanded[0]), k, bits)
    return Figure(
        p_dbm, found.e, s_from_e(found.e), found.expanded_db / k, k, found.low, found.high,
        found.flags, _links(file, elements, asked.frequency_hz, lines), file.certificate,
        volts_of(fit, asked), warm, dbm_from_w(fit.noise.w) if fit.noise.w else None,
    )  # fmt: skip


def _axis(file: CalibrationFile, axis: str) -> str:
    """The axis: named where a table is for one axis only, unless every detector is that one's."""
    of_detectors = {detector.axis for detector in file.detectors}
    known = sorted((_axes_named(file) | of_detectors) - {""})
    if axis and "" not in of_detectors and axis not in of_detectors:
        has = ", ".join(sorted(of_detectors))
        raise ConfigError(f"{file.top.where}: has no detector of axis {axis}; it has {has}")
    if known and not axis:
        if len(known) == 1 and "" not in of_detectors:
            return known[0]
        raise ConfigError(
            f"{file.top.where}: has tables of its own for {', '.join(known)}; say which --axis"
        )
    return axis


def _axes_named(file: CalibrationFile) -> set[str]:
    return {element.axis for element in file.elements} | {line.axis for line in file.lines}


def _budget(
    file: CalibrationFile, channel: Channel, frequency_hz: float
) -> tuple[tuple[Contribution, ...], int]:
    """The lines of an axis at one frequency, the assumed ones too, and the flag that these set."""
    for line in file.lines:
        if line.curve and line.axis in ("", channel.axis):
            _covers(line.where, repr(line.name), line.curve, frequency_hz)
    written = budget_of(file, channel, frequency_hz, frequency_hz)
    whole = isotropic(file, channel)
    kinds = calterms.needed(len(axes_of(file)), "undeclared", isotropic=whole)
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


def _circumstances(file: CalibrationFile, channel: Channel, asked: Asked, now_utc_ns: int) -> int:
    """Flags of the calibration, the time and the temperature; one axis is a component."""
    bits = Flag(0) if isotropic(file, channel) else Flag.COMPONENT_ONLY
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


class _Field(NamedTuple):
    """E and its bounds, V/m; expanded uncertainty, dB; flags."""

    e: float
    low: float
    high: float
    expanded_db: float
    flags: int


def _field(
    p_w: float, noise: Noise, per_w: float, expanded_db: float, k: float, bits: int
) -> _Field:
    """The component: noise taken off, one bound where the figure is at an end of the range or
    below what the noise lets be seen, or where logs were averaged."""
    if math.isnan(p_w):
        return _Field(math.nan, math.nan, math.nan, expanded_db, bits)
    limit_w, net_w = DETECTION * noise.u_w, p_w - noise.w
    bits |= int(Flag.BELOW_RANGE) if net_w < limit_w else 0
    e2, added = per_w * max(net_w, limit_w), per_w * noise.u_w * k
    found = interval(e2, e2, expanded_db, added)
    below, one_sided = bits & UPPER_BOUND, LOWER_BOUND & ~Flag.COMPONENT_ONLY
    total = expanded_db if below else float(total_db(expanded_db, e2, added, bits))
    low = 0.0 if below else math.sqrt(float(found.low))
    high = math.inf if bits & one_sided else math.sqrt(float(found.high))
    return _Field(math.sqrt(e2), low, high, total, bits)


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
