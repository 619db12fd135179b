"""What averaged logs hide: published figures, every signal class drawn, what may be corrected."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from scipy import special

from monitor.core import averaging_law as law
from monitor.core.averaging_law import Averaging, joined, treatment
from monitor.core.calibration import CountTable
from monitor.core.curves import Curve
from monitor.core.flags import LOWER_BOUND, Flag
from tests.core import signals


def test_noise_reads_low_by_the_published_figure() -> None:
    """C01: 2.51 dB to add (detector maker's article on power control, part III, table); C03: 2.5 dB
    (spectrum analysis basics, an analyser maker's note, p. 68)."""
    assert law.log_bias_db(1e9) == pytest.approx(-2.51, abs=0.005)
    assert pytest.approx(2.5, abs=0.01) == law.NOISE_CORRECTION_DB
    assert -law.log_bias_db(1e7) == pytest.approx(law.NOISE_CORRECTION_DB, abs=1e-6)
    assert law.log_bias_db(1) == 0.0


@pytest.mark.parametrize("n", [1, 2, 3, 10, 100])
def test_a_mean_of_n_logs_drawn(n: int) -> None:
    """Geometric mean of n exponential powers, linearised, then its mean over many: E of it."""
    power = np.random.default_rng(n).exponential(size=(400_000, n))
    drawn = np.exp(np.log(power).mean(axis=1))
    error_db = 4.343 * drawn.std() / drawn.mean() / math.sqrt(drawn.size)
    assert 10 * math.log10(drawn.mean()) == pytest.approx(law.log_bias_db(n), abs=4 * error_db)


def test_a_log_counts_as_fully_averaged_where_little_is_left() -> None:
    left = law.log_bias_db(law.FULLY_AVERAGED) + law.NOISE_CORRECTION_DB
    assert 0.03 < left < 0.04


def test_a_band_of_noise_has_as_many_values_as_bandwidth_times_time() -> None:
    """Noise of 1 MHz whose log is averaged over 100 us: within 0.02 dB of a hundred values."""
    power = signals.band_noise(1, samples=1 << 21, share=1 / 8)
    spans = power[: power.size // 800 * 800].reshape(-1, 800)
    linear = np.exp(np.log(spans).mean(axis=1))
    found = 10 * math.log10(linear.mean() / power.mean())
    assert found == pytest.approx(law.log_bias_db(100), abs=0.02)


@pytest.mark.parametrize(
    ("k", "db"), [(1, -2.51), (2, -1.17), (4, -0.57), (10, -0.22), (32, -0.068), (100, -0.022)]
)
def test_power_averaged_before_the_log(k: int, db: float) -> None:
    """Platform facts, 2.2: bias where K power samples are averaged before the log."""
    assert law.power_then_log_bias_db(k) == pytest.approx(db, abs=0.006 if k < 32 else 0.0006)
    power = np.random.default_rng(k).gamma(k, size=200_000)
    assert law.mean_of_db(power) == pytest.approx(
        law.power_then_log_bias_db(k), abs=4 * 5.6 / math.sqrt(k * power.size)
    )


@pytest.mark.parametrize("x", [1e-3, 0.5, 1.0, 1.5, 9.999, 10.0, 123.4, 1e6])
def test_digamma_against_scipy(x: float) -> None:
    assert law.digamma(x) == pytest.approx(float(special.digamma(x)), rel=1e-12, abs=1e-12)


def voltage_db(volts: Any) -> float:
    """Mean of 20 log |v| over the rms value, dB."""
    return law.mean_of_db(np.square(volts))


def test_waveforms_by_their_instantaneous_voltage() -> None:
    """AD640 data sheet rev. C, table I: C12, C13 Gaussian noise -5.52 dB, factor 1.887; C14 sine
    -6.02 dB of its peak; C16, C17 triangle -8.68 dB of its peak, -3.91 dB of its rms value."""
    assert law.power_then_log_bias_db(0.5) == pytest.approx(-5.52, abs=0.005)
    assert 10 ** (-law.power_then_log_bias_db(0.5) / 20) == pytest.approx(1.887, abs=0.0005)
    noise = np.random.default_rng(12).normal(size=2_000_000)
    assert voltage_db(noise) == pytest.approx(-5.52, abs=0.03)
    turn = (np.arange(1_000_000) + 0.5) / 1_000_000
    sine, triangle = np.sin(math.tau * turn), turn
    assert voltage_db(sine) - 10 * math.log10(2) == pytest.approx(-6.02, abs=0.005)
    assert voltage_db(triangle) - 10 * math.log10(3) == pytest.approx(-8.68, abs=0.01)
    assert voltage_db(triangle) == pytest.approx(-3.91, abs=0.01)


def test_waveforms_against_the_sine_that_calibrates() -> None:
    """To add: C18 triangle 0.9 dB, C19 square, dc -3.01 dB, C01 noise 2.51 dB (maker's article)."""
    turn = (np.arange(1_000_000) + 0.5) / 1_000_000
    sine_db = voltage_db(np.sin(math.tau * turn))
    assert sine_db - voltage_db(turn) == pytest.approx(0.9, abs=0.01)
    assert sine_db - voltage_db(np.ones(10)) == pytest.approx(-3.01, abs=0.005)
    assert sine_db - law.power_then_log_bias_db(0.5) == pytest.approx(2.51, abs=0.005)


def test_a_waveform_shifts_the_voltage_by_decibels_times_slope() -> None:
    """C22, AD8313 data sheet p. 19: 3.55 dB lower at 18 mV/dB (from memory) are 64 mV."""
    curve = Curve(np.array([-60.0, 0.0]), np.array([0.5, 0.5 + 60 * 0.018]), "dbm")
    shift_v = float(curve.volts_at(-20.0)) - float(curve.volts_at(-20.0 - 3.55))
    assert shift_v == pytest.approx(0.064, abs=0.0005)


def test_linear_averages_of_noise() -> None:
    """C05 mean of Rayleigh over sigma 1.253; C06 0.886 of its rms value (analyser note, p. 66)."""
    envelope = np.sqrt(2 * np.random.default_rng(5).exponential(size=4_000_000))
    assert envelope.mean() == pytest.approx(1.253, abs=0.001)
    assert envelope.mean() / math.sqrt((envelope**2).mean()) == pytest.approx(0.886, abs=0.0007)


def test_mean_square_and_not_mean() -> None:
    """E17, derived: 0 and 10 V/m for half of the time each is 7.0711 V/m, as the mean of power."""
    power = np.array([1e-300, 10.0**2])
    assert math.sqrt(power.mean()) == pytest.approx(7.0711, abs=1e-4)
    assert law.mean_of_db(power) < -1000  # what the log makes of a pause


@pytest.mark.parametrize(
    ("name", "log_db", "linear_db"),
    [
        ("constant", 0.0, 0.0),
        ("noise", -2.51, -1.05),
        ("ofdm", -2.50, -1.05),
        ("qpsk", -0.97, -0.36),
        ("qam64", -1.76, -0.70),
        ("two_tones", -3.01, -0.91),
        ("am", -7.8, -1.8),
        ("bursts_75", -6.3, -1.2),
        ("bursts_50", -12.0, -2.7),
        ("bursts_25", -16.5, -5.3),
        ("noise_bursts_75", -8.8, -2.2),
        ("noise_bursts_50", -14.5, -3.8),
        ("noise_bursts_25", -19.0, -6.3),
    ],
)
def test_which_signal_reads_how_low(name: str, log_db: float, linear_db: float) -> None:
    """Platform facts, 2.2, drawn anew: mean of dB and mean of volts over the true mean power."""
    power = signals.power(name)
    digits = 0.02 if abs(log_db) < 3.5 else 0.06
    assert law.mean_of_db(power) == pytest.approx(log_db, abs=digits)
    linear = 20 * math.log10(np.sqrt(power).mean() / math.sqrt(power.mean()))
    assert linear == pytest.approx(linear_db, abs=0.02 if abs(linear_db) < 1.1 else 0.06)


@pytest.mark.parametrize(
    ("exceeded", "db"), [(0.1, 3.62), (0.01, 6.63), (1e-4, 9.64)], ids=["C51", "C52", "C54"]
)
def test_the_noise_drawn_exceeds_its_mean_as_noise_does(exceeded: float, db: float) -> None:
    """C51, C52, C54, from memory: exponential power lies above -ln p of its mean for a share p."""
    assert 10 * math.log10(-math.log(exceeded)) == pytest.approx(db, abs=0.005)
    power = signals.power("noise")
    over = float((power > power.mean() * 10 ** (db / 10)).mean())
    assert over == pytest.approx(exceeded, rel=5 / math.sqrt(exceeded * power.size) + 0.005)


def test_peaks_of_a_sine_and_of_real_noise() -> None:
    """C48 sine 3.01 dB peak to average; C49 100000 real Gaussian samples: 7 above 12 dB, 3 sigma 8
    (text on peak to average ratios, 2016)."""
    sine = np.square(np.sin(math.tau * np.arange(10_000) / 10_000))
    assert 10 * math.log10(sine.max() / sine.mean()) == pytest.approx(3.01, abs=0.005)
    noise = np.square(np.random.default_rng(49).normal(size=100_000))
    assert abs(int((noise > noise.mean() * 10**1.2).sum()) - 7) <= 8


TDD = {
    "E10": (7 * 14 + 6, 140, 0.742857, 1e-6),
    "E11": (2 * 14 + 4, 140, 0.228571, 1e-6),
    "E12": (4 * 30720 + 2 * 21952, 10 * 30720, 0.5429, 1e-4),
    "E13": (6 * 30720 + 2 * 21952, 10 * 30720, 0.7429, 1e-4),
    "E14": (6 * 30720 + 2 * 5120, 10 * 30720, 0.633, 5e-4),
    "C65": (1, 200, 0.005, 1e-9),
}
"""On, of, duty: 3GPP TS 38.331 patterns (E10, E11) and TS 36.211 tables 4.2-1, 4.2-2 (E12, E13),
from memory; US laboratory guidance on TDD (E14), from memory; a weather radar's 10 us at 500 Hz
(C65)."""


@pytest.mark.parametrize("row", TDD)
def test_bursts_read_low_by_what_nobody_knows(row: str) -> None:
    """The duty is published; the error hangs on what is left in the pauses: none is corrected."""
    on, of, duty, good_to = TDD[row]
    assert on / of == pytest.approx(duty, abs=good_to)
    for floor_db in (-20.0, -30.0, -40.0):
        power = np.where(np.arange(of) < on, 1.0, 10 ** (floor_db / 10))
        assert law.mean_of_db(power) == pytest.approx(law.burst_bias_db(on / of, floor_db))
    assert law.burst_bias_db(duty, -40.0) < law.burst_bias_db(duty, -30.0) - 2.0
    for signal in ("bursts", "mixed", "undeclared"):
        assert treatment("log", 1.0, signal, 2e7) == law.Treatment(0.0, (), int(Flag.LOG_AVERAGED))


@pytest.mark.parametrize("averages", ["none", "power"])
@pytest.mark.parametrize("signal", law.SIGNALS)
def test_powers_need_no_treatment(averages: str, signal: str) -> None:
    assert treatment(averages, 1.0, signal, 1e7) == law.Treatment(0.0, (), 0)


def test_a_carrier_needs_no_correction_but_a_line() -> None:
    done = treatment("log", 0.0, "carrier", 0.0)
    assert (done.correction_db, done.flags) == (0.0, 0)
    assert [(x.name, x.value, x.distribution, x.shared) for x in done.lines] == [
        ("envelope of the carrier", 0.2, "rectangular", True)
    ]


def test_noise_whose_log_is_fully_averaged_is_corrected() -> None:
    """10 log10(e) times Euler's constant: 2.50682 dB. At 100 values; below that a lower bound."""
    done = treatment("log", 1e-5, "noise", 1e7)
    assert done.correction_db == pytest.approx(2.50682, abs=1e-5)
    assert done.flags == int(Flag.CORRECTED_LOG)
    assert not done.flags & LOWER_BOUND
    (line,) = done.lines
    assert (line.name, line.value, line.distribution) == (
        "log-average correction, how noise-like", 0.3, "rectangular"
    )  # fmt: skip


@pytest.mark.parametrize(("seconds", "bandwidth_hz"), [(0.99e-5, 1e7), (0.0, 1e7), (1.0, 0.0)])
def test_noise_that_is_not_known_to_be_averaged_is_a_lower_bound(
    seconds: float, bandwidth_hz: float
) -> None:
    done = treatment("log", seconds, "noise", bandwidth_hz)
    assert done == law.Treatment(0.0, (), int(Flag.LOG_AVERAGED))


def test_single_carriers_lie_outside_what_the_correction_allows_for() -> None:
    """Declared as noise they would read high by more than the line says: they are mixed."""
    for name in ("qpsk", "qam64"):
        assert law.NOISE_CORRECTION_DB + law.mean_of_db(signals.power(name)) > law.NOISE_LIKE_DB
    for name in ("noise", "ofdm"):
        left = law.NOISE_CORRECTION_DB + law.mean_of_db(signals.power(name))
        assert abs(left) < 0.1 * law.NOISE_LIKE_DB


@pytest.mark.parametrize(
    ("declared", "holds"),
    [
        ([Averaging("none"), law.UNDECLARED], Averaging("none")),
        ([Averaging("none"), Averaging("power", 0.1)], Averaging("power", 0.1)),
        ([Averaging("power", 0.5), Averaging("power", 0.1)], Averaging("power", 0.1)),
        ([Averaging("power"), Averaging("power", 0.1)], Averaging("power", 0.1)),
        ([Averaging("log", 0.01), Averaging("power", 60.0)], Averaging("log", 0.01)),
        ([Averaging("none"), Averaging("log", 0.5)], Averaging("log", 0.5)),
        ([Averaging("log", 0.01), Averaging("log", 0.5)], Averaging("log", 0.5)),
        ([law.UNDECLARED, law.UNDECLARED], law.UNDECLARED),
    ],
)
def test_the_worst_of_what_is_declared_holds(declared: list[Averaging], holds: Averaging) -> None:
    assert joined(*declared) == joined(*reversed(declared)) == holds


def test_nobody_having_said_is_a_lower_bound() -> None:
    assert treatment("undeclared", 1.0, "noise", 1e7).flags == int(Flag.LOG_AVERAGED)


def test_a_corrected_table_moves_powers_alone() -> None:
    table = CountTable(3, np.array([1e-9, math.nan, 2e-9]), np.array([0, 1, 4], np.int32))
    assert law.corrected(table, 0.0) is table
    moved = law.corrected(table, 3.0)
    np.testing.assert_allclose(moved.power_w, table.power_w * 10**0.3, rtol=1e-15)
    assert (moved.first_count, moved.flags.tolist()) == (3, [0, 1, 4])


def test_how_long_a_reading_is_a_mean_of_power() -> None:
    log, noise = Averaging("log", 0.5), treatment("log", 0.5, "noise", 1e7)
    assert law.power_time_s(log, noise) == 0.5
    assert law.power_time_s(log, treatment("log", 0.5, "bursts", 1e7)) == 0.0
    assert law.power_time_s(Averaging("power", 0.1), law.Treatment(0.0, (), 0)) == 0.1
    assert law.power_time_s(Averaging("none", 0.1), law.Treatment(0.0, (), 0)) == 0.0
