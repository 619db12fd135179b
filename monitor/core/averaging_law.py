"""What an average of logarithms hides, for which signals that can be told, and what then holds.

The mean of decibels lies below the decibels of the mean for every signal whose power varies (the
logarithm is concave). By how much is known only where the distribution of the power is.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from monitor.core.budget import Contribution
from monitor.core.calibration import CountTable
from monitor.core.distributions import Real
from monitor.core.flags import Flag

SIGNALS = ("carrier", "noise", "bursts", "mixed", "undeclared")
KINDS = ("none", "log", "power")
"""What a detector, a converter or a board may average before it gives a reading."""

DB_PER_NEPER_OF_POWER = 10.0 / math.log(10.0)
EULER_GAMMA = 0.57721566490153286
NOISE_CORRECTION_DB = DB_PER_NEPER_OF_POWER * EULER_GAMMA
"""2.507 dB: mean power over the fully averaged log of exponentially distributed power. An analyser
manual states 2.506 dB, a detector maker's table of waveforms 2.51 dB."""

FULLY_AVERAGED = 100.0
"""Bandwidth times averaging time from which a log counts as fully averaged (our choice).

A band B of noise has about B independent values a second; 100 of them leave 0.036 dB undone."""

NOISE_LIKE_DB = 0.3
"""Half width for how noise-like the signal is (our choice). Multicarrier signals read 2.50 dB low;
single carriers, 64-QAM 1.76 and QPSK 0.97 dB, are not noise-like: they are to be declared mixed."""

CARRIER_DB = 0.2
"""Half width for an envelope that is not quite constant (our choice)."""


@dataclass(frozen=True, slots=True)
class Averaging:
    """What is averaged before a reading is given, one of KINDS or undeclared, and over how long.

    seconds: 0 where a reading is momentary, or where nobody said. sparse: a reading stands for
    longer than it was averaged, because the receiver looks at something else in between.
    """

    kind: str
    seconds: float = 0.0
    sparse: bool = False


BURSTY = ("bursts", "mixed")
"""Signals that readings at even times may keep step with."""
UNDECLARED = Averaging("undeclared")


@dataclass(frozen=True, slots=True)
class Treatment:
    """What is done about averaged logs: dB added to every power, budget lines, flags of figures.

    noise_in_part: averages hold all of the noise beside no signal, next to none beside a strong
    one, and in between what is not known.
    """

    correction_db: float
    lines: tuple[Contribution, ...]
    flags: int
    noise_in_part: bool = False


def log_bias_db(n: float) -> float:
    """How far the linearised mean of n logs is off the mean power, dB, for noise-like power.

    The expected geometric mean of n independent exponential values is Gamma(1 + 1/n)^n times their
    mean: 0 dB for n = 1, towards -2.507 dB for many. n >= 1.
    """
    return DB_PER_NEPER_OF_POWER * n * math.lgamma(1.0 + 1.0 / n)


def power_then_log_bias_db(k: float) -> float:
    """How far the mean of decibels is off, dB, where each is of a mean of k powers. k > 0.

    The mean of k exponential powers is gamma distributed: psi(k) - ln k. k = 1/2 is the square of a
    real Gaussian voltage.
    """
    return DB_PER_NEPER_OF_POWER * (digamma(k) - math.log(k))


def digamma(x: float) -> float:
    """Derivative of ln Gamma at x > 0: recurrence up to 10, then the asymptotic series.

    NIST DLMF 5.5.2 and 5.11.2, from memory; to 1e-12.
    """
    shift = 0.0
    while x < 10.0:
        shift -= 1.0 / x
        x += 1.0
    s = 1.0 / (x * x)
    series = s * (1 / 12 - s * (1 / 120 - s * (1 / 252 - s * (1 / 240 - s / 132))))
    return shift + math.log(x) - 0.5 / x - series


def mean_of_db(power: Real) -> float:
    """How far the mean of decibels of these powers (any shape, all > 0) is off their mean, dB."""
    return float(np.mean(10.0 * np.log10(power)) - 10.0 * np.log10(np.mean(power)))


def burst_bias_db(duty: float, floor_db: float) -> float:
    """How far the mean of decibels is off, dB, for a power that is on for a share duty of the time.

    floor_db: what is left in the pauses, dB of the power while on; it is what sets the error, and
    nobody knows it: no correction follows from a duty.
    """
    floor = 10.0 ** (floor_db / 10.0)
    return (1.0 - duty) * floor_db - 10.0 * math.log10(duty + (1.0 - duty) * floor)


def joined(*declared: Averaging) -> Averaging:
    """What holds of a reading that passes through all of these: the worst of them.

    A log once averaged stays so, whatever is averaged later; power averaged leaves no momentary
    value. Of averaged logs the longest time counts, of averaged power the shortest that was said.
    """
    for kind, choose in (("log", max), ("power", min)):
        times = [one.seconds for one in declared if one.kind == kind]
        if times:
            return Averaging(kind, choose([s for s in times if s > 0.0], default=0.0))
    return Averaging("none") if any(one.kind == "none" for one in declared) else UNDECLARED


def treatment(averages: str, averaging_s: float, signal: str, bandwidth_hz: float) -> Treatment:
    """What holds of readings that average so, over that time (s; 0: unknown), of such a signal.

    bandwidth_hz: the least that a signal of the band occupies; 0 where nobody said. Only a
    continuous noise-like signal whose log is fully averaged is corrected; a carrier needs none; all
    else of averaged logs is a lower bound.
    """
    if averages in ("none", "power"):
        return Treatment(0.0, (), 0)
    if averages == "log" and signal == "carrier":
        line = _line("envelope of the carrier", CARRIER_DB)
        return Treatment(0.0, (line,), 0, noise_in_part=True)
    full = bandwidth_hz * averaging_s >= FULLY_AVERAGED
    if averages == "log" and signal == "noise" and full:
        line = _line("log-average correction, how noise-like", NOISE_LIKE_DB)
        return Treatment(NOISE_CORRECTION_DB, (line,), int(Flag.CORRECTED_LOG))
    return Treatment(0.0, (), int(Flag.LOG_AVERAGED))


def _line(name: str, half_db: float) -> Contribution:
    """Shared: every axis hears the same signal."""
    return Contribution(name, half_db, "rectangular", shared=True, kind="detector")


def corrected(table: CountTable, correction_db: float) -> CountTable:
    """The table with every power that much higher; itself where there is nothing to add."""
    if correction_db == 0.0:
        return table
    return replace(table, power_w=table.power_w * 10.0 ** (correction_db / 10.0))


def power_time_s(averaging: Averaging, done: Treatment) -> float:
    """Time over which a reading stands for a mean of power, s; 0 for a momentary one.

    Averaged logs stand for one only where they were corrected.
    """
    stands = averaging.kind == "power" or done.flags & Flag.CORRECTED_LOG
    return averaging.seconds if stands else 0.0
