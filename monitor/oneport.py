"""One detector figure in the form that it was given in, as power at the port."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from monitor.calparts import CalibrationFile
from monitor.core.calibration import temperature_db
from monitor.core.errors import ConfigError
from monitor.core.flags import Flag
from monitor.core.law import CurveLaw, ProbeLaw, Said, ScaleLaw
from monitor.core.quantities import dbm_from_w
from monitor.detectorfile import Detector, Fit

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


def port_dbm(file: CalibrationFile, fit: Fit, asked: Asked) -> Said:
    """Power at the detector's port, dBm (nan: no reading), and flags."""
    law = fit.law
    if asked.form == "counts":
        power_w, bits = fit.table.convert(np.array([int(asked.value)], np.int32))
        p_w = float(power_w[0])
        p_dbm = math.nan if math.isnan(p_w) else dbm_from_w(p_w) - fit.added_db
        return p_dbm, int(bits[0])  # the table is corrected for averaged logs already
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


def warm_db(detector: Detector, fit: Fit, asked: Asked) -> float:
    """By how much a figure of the instrument is too high; a bare power is none of its figures."""
    shown = asked.form != "dbm" or _own_form(fit)[1] == "dbm"
    if asked.temperature_c is None or not shown:
        return 0.0
    return float(temperature_db(detector.temperature, np.array([asked.temperature_c]))[0])


def at_the_range(said: Said, fit: Fit, too_high_db: float) -> Said:
    """Corrected for averaged logs and temperature; what is below the range is its end, flagged."""
    p_dbm, bits = said[0] + fit.added_db - too_high_db, said[1]
    least_dbm = dbm_from_w(fit.least_w)
    if p_dbm < least_dbm:
        return least_dbm, bits | int(Flag.BELOW_RANGE)
    return p_dbm, bits


def volts_of(fit: Fit, asked: Asked) -> float | None:
    """Volts at the detector, where counts or volts were given and it has any."""
    if not isinstance(fit.law, CurveLaw):
        return None
    if asked.form == "counts":
        return asked.value * fit.law.volts_per_count
    return asked.value if asked.form == "volts" else None
