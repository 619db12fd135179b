"""Count tables from curves and scales: inversion, ends, rails, open wires, rounding."""

from __future__ import annotations

import math

import numpy as np
import pytest

from monitor.core import detector as det
from monitor.core.curves import Curve
from monitor.core.errors import CalibrationError
from monitor.core.flags import LOWER_BOUND, Flag
from monitor.core.quantities import w_from_dbm

BELOW, ABOVE = int(Flag.BELOW_RANGE), int(Flag.ABOVE_RANGE)
CLIPPED, WIRE = int(Flag.CLIPPED), int(Flag.NO_SIGNAL_WIRE)

DBM = np.array([-60.0, -40.0, -20.0, 0.0])
RISING = Curve(DBM, np.array([0.5, 0.9, 1.3, 1.7]), "dbm")
FALLING = Curve(DBM, np.array([1.7, 1.3, 0.9, 0.5]), "dbm")
TEN_BITS = det.Converter(0.002, 0, 1023, rails=True)


def looked_up(
    curve: Curve, volts: float, valid_v: tuple[float, float] = (0.3, 2.0)
) -> tuple[float, int]:
    """dBm and flags at a voltage, through the table; nan dBm for no reading."""
    made = det.curve_table(curve, TEN_BITS, valid_v, (-55.0, -5.0))
    power_w, flags = made.convert(np.array([round(volts / 0.002)], np.int32))
    return float(10 * np.log10(power_w[0] / 1e-3)), int(flags[0])


@pytest.mark.parametrize("rising", [True, False])
@pytest.mark.parametrize(
    ("volts", "dbm", "flags"),
    [
        (1.1, -30.0, 0),
        (0.7, -50.0, 0),
        (0.52, -59.0, 0),  # on the curve, below the range to be trusted: only averages are judged
        (0.4, -60.0, BELOW),  # below the curve, a wire that is there
        (1.68, -5.0, ABOVE),
        (1.9, -5.0, ABOVE),
        (0.15, math.nan, WIRE),
        (2.04, math.nan, WIRE | ABOVE),  # an overload and a wire look the same
        (0.0, math.nan, WIRE),
    ],
)
def test_every_part_of_the_voltage_axis(rising: bool, volts: float, dbm: float, flags: int) -> None:
    """By hand from the straight curve of 20 mV to the decibel; the falling one is its mirror."""
    if not rising:
        volts = 2.2 - volts
    found = looked_up(RISING if rising else FALLING, volts)
    assert found[0] == pytest.approx(dbm, abs=1e-9, nan_ok=True)
    assert found[1] == flags


def test_an_open_wire_of_a_falling_detector_is_no_strong_field() -> None:
    """Zero volts of a falling curve would be +25 dBm: it must be no reading."""
    dbm, flags = looked_up(FALLING, 0.0)
    assert math.isnan(dbm)
    assert flags == WIRE | ABOVE | CLIPPED


@pytest.mark.parametrize("curve", [RISING, FALLING])
def test_an_overload_at_the_rail_is_no_quiet_gap(curve: Curve) -> None:
    """Beyond valid_v on the strong side: no figure, but flags that forbid "conforms"."""
    made = det.curve_table(curve, TEN_BITS, (0.3, 1.9), (-55.0, -5.0))
    ends = np.array([0, 1, 1022, 1023], np.int32)
    power_w, flags = made.convert(ends if curve.rising else ends[::-1].copy())
    assert np.isnan(power_w).all()
    assert flags.tolist() == [WIRE, WIRE, WIRE | ABOVE, WIRE | ABOVE | CLIPPED]
    assert not flags[0] & int(LOWER_BOUND)
    assert flags[2] & int(LOWER_BOUND)


def test_rails_inside_the_valid_voltages() -> None:
    """The strong rail is clipped, a lower bound; the weak one an upper bound."""
    short = det.Converter(0.002, 0, 255, rails=True)  # ends at 0.51 V
    strong = Curve(np.array([-60.0, 0.0]), np.array([0.1, 0.7]), "dbm")
    made = det.curve_table(strong, short, (0.0, 0.8), (-60.0, 0.0))
    power_w, flags = made.convert(np.array([255, 254, 0, 1], np.int32))
    assert flags.tolist() == [CLIPPED, 0, BELOW, BELOW]
    assert 10 * np.log10(power_w[0] / 1e-3) == pytest.approx(-19.0)
    weak = Curve(np.array([-60.0, 0.0]), np.array([0.7, 0.1]), "dbm")
    flags = det.curve_table(weak, short, (0.0, 0.8), (-60.0, 0.0)).flags
    assert flags[0] == CLIPPED | ABOVE
    assert flags[255] == BELOW


def test_rms_detector_follows_the_root_of_power() -> None:
    """Twice the volts is four times the power, exactly, between two points of a straight one."""
    curve = Curve(np.array([-20.0, 0.0]), np.array([0.1, 1.0]), "amplitude")
    volts = np.array([0.1, 0.2, 0.4, 0.8, 1.0])
    np.testing.assert_allclose(w_from_dbm(curve.dbm_at(volts)), 1e-3 * volts**2, rtol=1e-12)
    assert curve.volts_at(-6.020599913) == pytest.approx(0.5, rel=1e-9)


@pytest.mark.parametrize("curve", [RISING, FALLING])
def test_curve_there_and_back(curve: Curve) -> None:
    for dbm in (-60.0, -47.3, -20.0, -0.1, 0.0):
        assert curve.dbm_at(np.array([curve.volts_at(dbm)]))[0] == pytest.approx(dbm, abs=1e-9)


@pytest.mark.parametrize(
    ("dbm", "volts", "words"),
    [
        ([-60, -40, -20], [0.5, 0.9, 0.8], "volts 0.9 then 0.8 at points 2 and 3"),
        ([-60, -40, -20], [0.5, 0.5, 0.8], "volts 0.5 then 0.5 at points 1 and 2"),
        ([-60, -20, -40], [0.5, 0.9, 1.3], "dBm -20 then -40"),
        ([-60], [0.5], "at least two points"),
    ],
)
def test_a_curve_that_cannot_be_inverted(dbm: list[float], volts: list[float], words: str) -> None:
    with pytest.raises(CalibrationError, match=words):
        Curve(np.array(dbm, float), np.array(volts, float), "dbm")


def test_scale_of_milli_decibels() -> None:
    made = det.scale_table(0.001, 0.0, (-100.0, 0.0), (-90.0, -15.0))
    counts = np.array([-40_565, -90_000, -90_001, -15_000, -14_999, -100_001, 1], np.int32)
    power_w, flags = made.convert(counts)
    dbm = 10 * np.log10(power_w / 1e-3)
    np.testing.assert_allclose(dbm, [-40.565, -90, -90.001, -15, -15, np.nan, np.nan], atol=1e-9)
    assert flags.tolist() == [0, 0, 0, 0, ABOVE, WIRE, WIRE | ABOVE]


def test_a_scale_that_is_valid_to_the_end_of_its_range_still_knows_an_overload() -> None:
    made = det.scale_table(0.1, 0.0, (-90.0, -15.0), (-90.0, -15.0))
    power_w, flags = made.convert(np.array([-150, -149, 50, -901], np.int32))
    np.testing.assert_allclose(power_w[0], 10**-4.5, rtol=1e-12)
    assert np.isnan(power_w[1:]).all()
    assert flags.tolist() == [0, WIRE | ABOVE, WIRE | ABOVE, WIRE]


def test_scale_with_an_offset() -> None:
    """Counts are milli-dBFS; 0 dBFS is -12 dBm at the port."""
    made = det.scale_table(0.001, -12.0, (-95.0, 5.0), (-75.0, -15.0))
    power_w, flags = made.convert(np.array([-30_000, 500], np.int32))
    assert 10 * math.log10(power_w[0] / 1e-3) == pytest.approx(-42.0, abs=1e-9)
    assert flags.tolist() == [0, ABOVE]


def test_too_fine_a_scale_is_refused() -> None:
    with pytest.raises(CalibrationError, match="262144"):
        det.scale_table(1e-4, 0.0, (-100.0, 0.0), (-90.0, -15.0))


def test_half_a_count_where_the_curve_is_flattest() -> None:
    """20 mV to the decibel and 2 mV to the count: 0.1 dB, half of it 0.05 dB."""
    half = det.half_step_db(RISING.dbm_at(det.volts_of(TEN_BITS)), (-55.0, -5.0))
    assert half == pytest.approx(0.05, rel=1e-9)
    (line,) = det.rounding(half)
    assert (line.value, line.distribution, line.shared) == (half, "rectangular", False)
    assert det.rounding(0.005) == ()


def test_counts_that_never_reach_the_valid_voltages() -> None:
    with pytest.raises(CalibrationError, match="no count"):
        det.curve_table(RISING, det.Converter(0.002, 0, 15, rails=True), (0.3, 2.0), (-55.0, -5.0))


@pytest.mark.parametrize("curve", [RISING, FALLING])
def test_stepped_volts_reach_beyond_the_valid_voltages(curve: Curve) -> None:
    """A text board prints volts: 300 to 2000 mV are readings, beyond them one side is strong."""
    steps = det.stepped(0.001, (0.3, 2.0))
    assert (steps.first, steps.last, steps.rails) == (300 - 1701, 2000 + 1701, False)
    made = det.curve_table(curve, steps, (0.3, 2.0), (-60.0, 0.0))
    power_w, flags = made.convert(np.array([299, 300, 2000, 2001], np.int32))
    assert np.isnan(power_w).tolist() == [True, False, False, True]
    ends = [WIRE, BELOW, ABOVE, WIRE | ABOVE]
    assert flags.tolist() == (ends if curve.rising else ends[::-1])


def test_too_many_steps_are_refused() -> None:
    with pytest.raises(CalibrationError, match="262144"):
        det.curve_table(RISING, det.stepped(1e-6, (0.3, 2.0)), (0.3, 2.0), (-60.0, 0.0))
