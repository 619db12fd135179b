"""Tables over frequency, the band's grid and E squared per watt; count tables as images."""

from __future__ import annotations

import math

import numpy as np
import pytest

from monitor.core import calibration as cal
from monitor.core.errors import CalibrationError
from monitor.core.flags import Flag
from monitor.core.readings import MISSING

WIRE = int(Flag.NO_SIGNAL_WIRE)


def table(*rows: tuple[float, float]) -> cal.FrequencyTable:
    """A table of (Hz, dB)."""
    return cal.FrequencyTable(np.array([f for f, _ in rows]), np.array([db for _, db in rows]))


def small() -> cal.CountTable:
    """Counts 10 to 13; the third is no reading."""
    power = np.array([1e-6, 2e-6, np.nan, 4e-6])
    return cal.CountTable(10, power, np.array([2, 0, WIRE, 8], np.int32))


def test_convert_keeps_the_shape_and_knows_what_is_no_reading() -> None:
    counts = np.array([[10, 11, 12], [13, 14, 9], [MISSING, 2**31 - 1, 11]], np.int32)
    power_w, flags = small().convert(counts)
    nan = math.nan
    np.testing.assert_array_equal(power_w, [[1e-6, 2e-6, nan], [4e-6, nan, nan], [nan, nan, 2e-6]])
    np.testing.assert_array_equal(flags, [[2, 0, WIRE], [8, WIRE, WIRE], [WIRE, WIRE, 0]])
    assert flags.dtype == np.int32


def test_beyond_the_strong_end_of_the_table_is_above_range() -> None:
    """There an overload looks like a broken wire; what is missing altogether is neither."""
    over = WIRE | int(Flag.ABOVE_RANGE)
    power = np.array([np.nan, 2e-6, np.nan])
    counts = np.array([4, 5, 6, 7, 8, 2**31 - 1, MISSING], np.int32)
    rising = cal.CountTable(5, power, np.array([WIRE, 0, over], np.int32))
    np.testing.assert_array_equal(
        rising.convert(counts)[1], [WIRE, WIRE, 0, over, over, over, WIRE]
    )
    falling = cal.CountTable(5, power, np.array([over, 0, WIRE], np.int32))
    np.testing.assert_array_equal(
        falling.convert(counts)[1], [over, over, 0, WIRE, WIRE, WIRE, WIRE]
    )
    assert np.isnan(falling.convert(counts)[0][[0, 4, 5, 6]]).all()


def test_a_long_column_is_converted_count_by_count() -> None:
    """More counts than are looked up at once, every third of a table with other columns between."""
    n = 2**17 + 5
    counts = np.random.default_rng(2).integers(8, 16, (n, 3)).astype(np.int32)
    power_w, flags = small().convert(counts[:, 1])
    known = {
        count: tuple(each.item() for each in small().convert(np.array([count], np.int32)))
        for count in range(8, 16)
    }
    expected = [known[count] for count in counts[:, 1].tolist()]
    np.testing.assert_array_equal(power_w, [p for p, _ in expected])
    np.testing.assert_array_equal(flags, [bits for _, bits in expected])


def test_convert_of_nothing_is_nothing() -> None:
    power_w, flags = small().convert(np.empty((0, 3), np.int32))
    assert power_w.shape == flags.shape == (0, 3)


def test_image_is_exact_and_names_the_table() -> None:
    made = small()
    again = cal.CountTable.from_bytes(made.to_bytes())
    assert again.first_count == 10
    np.testing.assert_array_equal(again.power_w, made.power_w)
    np.testing.assert_array_equal(again.flags, made.flags)
    assert again.identity == made.identity
    other = cal.CountTable(10, np.nextafter(made.power_w, 1.0), made.flags)
    assert other.identity != made.identity
    assert made.to_bytes()[:24] == b"FSCOUNT1" + (10).to_bytes(8, "little") + (4).to_bytes(
        8, "little"
    )


@pytest.mark.parametrize("body", [b"", b"FSCOUNT1", small().to_bytes()[:-1], b"x" * 72])
def test_a_damaged_image_is_refused(body: bytes) -> None:
    with pytest.raises(CalibrationError, match="count table"):
        cal.CountTable.from_bytes(body)


def test_a_table_of_more_than_eighteen_bits_is_refused() -> None:
    n = 2**18 + 1
    with pytest.raises(CalibrationError, match="262144"):
        cal.CountTable(0, np.ones(n), np.zeros(n, np.int32))


def test_between_rows_decibels_run_straight_over_the_logarithm() -> None:
    """Half way in log f is the geometric mean, by definition of the rule (design, part 6)."""
    held = table((1e8, 10.0), (4e8, 14.0), (1e9, 20.0))
    at = held.at(np.array([1e8, 2e8, 4e8, math.sqrt(4e17), 1e9]))
    np.testing.assert_allclose(at, [10.0, 12.0, 14.0, 17.0, 20.0], rtol=1e-12)


@pytest.mark.parametrize("f_hz", [0.999e8, 1.001e9])
def test_nothing_is_extrapolated(f_hz: float) -> None:
    with pytest.raises(CalibrationError, match="covers 100 MHz to 1 GHz, but .* is measured"):
        table((1e8, 10.0), (1e9, 20.0)).at(np.array([5e8, f_hz]))


@pytest.mark.parametrize(
    ("rows", "words"),
    [
        ([(1e8, 1.0)], "at least two rows"),
        ([(1e8, 1.0), (1e8, 2.0)], "100 MHz stands twice"),
        ([(1e8, 1.0), (3e8, 1.0), (2e8, 1.0)], "200 MHz stands out of order"),
    ],
)
def test_frequencies_must_rise(rows: list[tuple[float, float]], words: str) -> None:
    with pytest.raises(CalibrationError, match=words):
        table(*rows)


def test_how_much_too_high_at_a_temperature() -> None:
    """Straight between rows, by hand; the ends hold; without temperature or table nothing."""
    held = np.array([-20.0, 20.0, 40.0]), np.array([1.0, 0.0, -0.5])
    celsius = np.array([-30.0, -20.0, 10.0, 30.0, 60.0, np.nan])
    np.testing.assert_allclose(
        cal.temperature_db(held, celsius), [1.0, 1.0, 0.25, -0.25, -0.5, 0.0], atol=1e-12
    )
    assert cal.temperature_db(None, celsius).tolist() == [0.0] * 6


def test_grid_has_the_ends_the_knots_and_small_steps() -> None:
    held = table((5e8, 1.0), (9e8, 2.0), (2e9, 1.0), (3e9, 1.0))
    grid = cal.band_grid(7e8, 2.7e9, [held])
    assert grid[0] == 7e8
    assert grid[-1] == 2.7e9
    assert {9e8, 2e9} <= set(grid)
    assert not {5e8, 3e9} & set(grid)
    assert np.all(np.diff(grid) > 0)
    assert float((grid[1:] / grid[:-1]).max()) <= cal.GRID_STEP * (1 + 1e-9)


def test_grid_of_a_very_wide_band_stays_short() -> None:
    assert cal.band_grid(1e5, 3e11, []).size <= cal.MAX_GRID


def test_e_squared_per_watt_of_a_known_chain() -> None:
    """-20 dBm in 50 ohm is 22.36 mV; at 30 dB/m and 6 dB of loss that is 1.411 V/m.

    Antenna factor by its definition (E over V), loss by its definition (power): E = V * 10^(36/20).
    """
    k = cal.e2_per_w(
        np.array([1e9]), table((1e8, 30.0), (2e9, 30.0)), [table((1e8, 6.0), (2e9, 6.0))]
    )
    e_v_per_m = math.sqrt(float(k[0]) * 1e-5)
    assert e_v_per_m == pytest.approx(math.sqrt(50 * 1e-5) * 10 ** (36 / 20), rel=1e-12)


def test_middle_and_spread_of_a_band() -> None:
    """Factors 2 dB apart: the middle is 1 dB from both, and the line is rectangular of 1 dB."""
    k = np.array([1e6, 1e6 * 10**0.1, 1e6 * 10**0.2])
    assert cal.middle(k) == pytest.approx(1e6 * 10**0.1, rel=1e-12)
    (line,) = cal.spread(k, "main")
    assert line.value == pytest.approx(1.0, rel=1e-12)
    assert (line.distribution, line.shared) == ("rectangular", True)
    assert "main" in line.name
    assert cal.spread(np.array([3.0, 3.0]), "main") == ()
