"""Every conversion between units, in one place. Scalars or arrays alike."""

from __future__ import annotations

import math
import re
from typing import overload

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import ConfigError

SPEED_OF_LIGHT_M_PER_S = 299_792_458.0
"""Exact, SI."""
Z0_OHM = 376.730313412
"""Impedance of free space, CODATA 2022 (from memory); plane waves only."""
PORT_OHM = 50.0

Real = NDArray[np.float64]


def average_power(powers: Real) -> Real:
    """Of readings (n, c) of equal length: (c,), in their unit."""
    return np.asarray(powers.mean(axis=0))


@overload
def w_from_dbm(p_dbm: float) -> float: ...
@overload
def w_from_dbm(p_dbm: Real) -> Real: ...
def w_from_dbm(p_dbm: float | Real) -> float | Real:
    """Power in W from dBm (10 log)."""
    return 1e-3 * 10.0 ** (p_dbm / 10.0)


def dbm_from_w(p_w: float) -> float:
    """Power in dBm from W; p_w must be positive."""
    return 10.0 * math.log10(p_w / 1e-3)


def power_ratio_from_db(x_db: float) -> float:
    """10 log: a ratio of powers, of E squared, of S."""
    return float(10.0 ** (x_db / 10.0))


def db_from_power_ratio(ratio: float) -> float:
    """10 log of a positive ratio of powers."""
    return 10.0 * math.log10(ratio)


def s_from_e(e_v_per_m: float) -> float:
    """Equivalent plane-wave power density, W/m2, from E rms, V/m."""
    return e_v_per_m * e_v_per_m / Z0_OHM


def e_from_s(s_w_per_m2: float) -> float:
    """E rms, V/m, of a plane wave of power density S, W/m2."""
    return math.sqrt(s_w_per_m2 * Z0_OHM)


def e2_per_watt(antenna_factor_db_per_m: float, loss_db: float) -> float:
    """E squared (V2/m2) per watt at the detector's port, 50 ohm.

    V2 = 50 P; E = V * AF * sqrt(loss). antenna factor 20 log (1/m), loss 10 log, positive down.
    """
    return PORT_OHM * float(10.0 ** ((antenna_factor_db_per_m + loss_db) / 10.0))


def antenna_factor_db_per_m(gain_dbi: Real, frequency_hz: Real, load_ohm: float = PORT_OHM) -> Real:
    """Antenna factor, 20 log (1/m), of a matched antenna from its gain, or its gain from that.

    AF^2 = 4 pi Z0 / (R lambda^2 G), which is the customary 9.73 / (lambda sqrt G) at 50 ohm,
    unrounded (NTIA TM-10-469, eq. 13 and 14). Gain and factor add up to a figure of the frequency
    alone, so the same function goes either way.
    """
    both = 4.0 * math.pi * Z0_OHM * (frequency_hz / SPEED_OF_LIGHT_M_PER_S) ** 2 / load_ohm
    return np.asarray(10.0 * np.log10(both) - gain_dbi)


_NUMBER = re.compile(r"^\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*([A-Za-z/2²]*)\s*$")
FREQUENCIES_HZ = 1e-3, 1e18
"""Beyond them a frequency is a slip of the point, and a grid over it would have no end."""
_FREQUENCY = {"": 1.0, "hz": 1.0, "khz": 1e3, "mhz": 1e6, "ghz": 1e9}


def split_unit(text: str) -> tuple[float, str]:
    """Number and unit of a text such as '3.2V/m'; ConfigError where there is no number."""
    match = _NUMBER.match(text)
    if match is None:
        raise ConfigError(f"{text!r}: not a number with a unit; write for example 900MHz or 3.2V/m")
    return float(match.group(1)), match.group(2).replace("²", "2")


def frequency_hz(text: str | float) -> float:
    """Frequency in Hz from '900MHz' or a bare number in Hz; ConfigError outside FREQUENCIES_HZ."""
    if isinstance(text, (int, float)):
        value, unit = float(text), ""
    else:
        value, unit = split_unit(text)
    scale = _FREQUENCY.get(unit.lower())
    low, high = FREQUENCIES_HZ
    if scale is None or not low <= value * scale <= high:
        raise ConfigError(f"{text!r}: not a frequency; write for example 900MHz or 1.8GHz")
    return value * scale
