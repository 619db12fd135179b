"""Detectors in a calibration file: kinds, bands, gain steps, noise, temperature; mistakes."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from scipy.interpolate import interp1d

from monitor.calfile import load_chain
from monitor.config import Band, Channel
from monitor.core.calibration import Chain, middle, temperature_db
from monitor.core.errors import CalibrationError
from monitor.core.flags import Flag
from tests.monitor.test_calfile import FILE

CURVES = """
[detector]
kind = "log"
volts_per_count = 0.001
valid_v = [0.3, 2.2]
averages = "none"
[[detector.curve_at]]
frequency = "700MHz"
points = [[-60, 2.00], [-30, 1.34], [0, 0.68]]
[[detector.curve_at]]
frequency = "3GHz"
points = [[-58, 2.00], [-27, 1.34], [3, 0.68]]
"""
RECEIVER = """
[detector]
kind = "scale"
quantity = "dbfs"
resolution = 0.001
range_dbm = [-75, -15]
averages = "power"
averaging_s = 0.05
noise_dbm = -90
noise_u_db = 0.5
[[detector.step]]
gain = "20.7"
table = [["700MHz", -12.1], ["1GHz", -12.9], ["3GHz", -11.0]]
[[detector.step]]
gain = "0"
range_dbm = [-55, 5]
noise_dbm = -70
noise_u_db = 1.0
table = [["700MHz", 8.3], ["3GHz", 9.0]]
"""
PROBE = """
[detector]
kind = "probe"
quantity = "v_per_m"
resolution = 0.01
linearity = [[0.5, 0.48], [5, 5], [200, 210]]
averages = "none"
"""
CORRECTION = """
[[element]]
type = "probe"
serial = "p1"
certificate = "none"
table = [["700MHz", -0.5], ["3GHz", 1.5]]
"""


def with_detector(detector: str) -> str:
    """FILE with another detector; a probe's correction takes the place of the elements, too."""
    start, elements = FILE.index("[detector]"), FILE.index("[[element]]")
    if 'kind = "probe"' in detector:
        return FILE[:start] + detector + CORRECTION + FILE[FILE.index("[[contribution]]") :]
    return FILE[:start] + detector + FILE[elements:]


def read(
    folder: Path, detector: str, low_hz: float = 8e8, high_hz: float = 2e9, gain: str = ""
) -> Chain:
    """The chain of one axis in a band."""
    path = folder / "calibration.toml"
    path.write_text(with_detector(detector), encoding="utf-8")
    return load_chain(path, [Channel("x", "x", "b", gain)], {"b": Band("b", low_hz, high_hz)})


def dbm_of(chain: Chain, *counts: int) -> list[float]:
    """Power of counts by the first channel's table, dBm."""
    power_w, _ = chain.tables[0].convert(np.array(counts, np.int32))
    return [float(x) for x in 10 * np.log10(power_w / 1e-3)]


def line(chain: Chain, words: str) -> float | None:
    """Value of the only line of the budget with these words in its name."""
    found = [one.value for one in chain.contributions[0] if words in one.name]
    return found[0] if found else None


def test_a_band_has_the_middle_of_its_curves(tmp_path: Path) -> None:
    """By hand at 1.34 V (-30 and -27 dBm) and at 0.68 V (0 and 3): 3 dB between 700 MHz and 3 GHz
    over the logarithm; half of what the band takes of it is the line."""
    chain = read(tmp_path, CURVES)
    part = [math.log(f / 7e8) / math.log(3e9 / 7e8) for f in (8e8, 2e9)]
    mid = sum(part) / 2
    assert dbm_of(chain, 1340)[0] == pytest.approx(-30 + 3 * mid)
    assert line(chain, "detector curve over band b") == pytest.approx(3 * (part[1] - part[0]) / 2)
    (found,) = [x for x in chain.contributions[0] if "detector curve over" in x.name]
    assert (found.distribution, found.kind, found.shared) == ("rectangular", "detector", True)


def test_a_narrow_band_has_no_spread_of_its_own(tmp_path: Path) -> None:
    chain = read(tmp_path, CURVES, 1e9, 1.0001e9)
    assert (line(chain, "detector curve over band") or 0.0) < 1e-3


def test_curves_must_cover_the_band(tmp_path: Path) -> None:
    text = CURVES.replace("3GHz", "1.9GHz")
    with pytest.raises(
        CalibrationError, match=r"detector.curve_at: covers 700 MHz to 1.9 GHz, but"
    ):
        read(tmp_path, text)


def test_a_receiver_at_a_gain_step(tmp_path: Path) -> None:
    """scipy's interp1d over log f is the reference for the table; the figure at the middle is
    exact, and table times k is exact at every frequency."""
    chain = read(tmp_path, RECEIVER, gain="20.7")
    offset = interp1d(np.log([7e8, 1e9, 3e9]), [-12.1, -12.9, -11.0])
    mid = float(offset(math.log(math.sqrt(8e8 * 2e9))))
    assert dbm_of(chain, -30_000)[0] == pytest.approx(-30 + mid, abs=1e-9)
    f, k = chain.frequencies_hz[0], chain.k[0]
    assert 1e9 in f  # a knot of the step's table
    antenna = interp1d(np.log([7e8, 1e9, 3e9]), [30.0, 31.0, 34.0])(np.log(f))
    cable = interp1d(np.log([6e8, 3e9]), [0.5, 1.0])(np.log(f))
    e2_db = -30 + mid - 30 + 10 * np.log10(k)
    np.testing.assert_allclose(
        e2_db, -30 - 30 + offset(np.log(f)) + antenna + cable + 10 * math.log10(50), atol=1e-9
    )
    assert line(chain, "response over band") == pytest.approx(5 * math.log10(k.max() / k.min()))


def test_a_narrow_band_of_a_receiver_has_no_spread(tmp_path: Path) -> None:
    chain = read(tmp_path, RECEIVER, 1.5e9, 1.5001e9, "20.7")
    assert line(chain, "response over band") == pytest.approx(0.0, abs=1e-3)
    assert chain.k_mid[0] == pytest.approx(middle(chain.k[0]))


def test_each_step_has_its_own_range_and_noise(tmp_path: Path) -> None:
    """u of a power by the slope of 10 log: 0.5 dB of 1 pW are 0.115 pW (GUM 5.1.2)."""
    one, other = (read(tmp_path, RECEIVER, gain=gain) for gain in ("20.7", "0"))
    assert (one.least_w[0], other.least_w[0]) == pytest.approx((10**-10.5, 10**-8.5))
    assert (one.noise_w[0], other.noise_w[0]) == pytest.approx((1e-12, 1e-10))
    assert one.noise_u_w[0] == pytest.approx(1e-12 * math.log(10) / 10 * 0.5)
    assert other.noise_u_w[0] == pytest.approx(1e-10 * math.log(10) / 10)
    assert one.integration_s == 0.05


@pytest.mark.parametrize(
    ("gain", "words"),
    [
        ("", "detector.step: several gain steps; say which, as gain = ...: 20.7, 0"),
        ("20", "detector.step: no gain step '20'; there are 20.7, 0"),
    ],
)
def test_a_gain_step_that_is_not_named(tmp_path: Path, gain: str, words: str) -> None:
    with pytest.raises(CalibrationError) as caught:
        read(tmp_path, RECEIVER, gain=gain)
    assert words in str(caught.value)


def test_one_step_needs_no_name(tmp_path: Path) -> None:
    only = RECEIVER[: RECEIVER.rindex("[[detector.step]]")]
    assert dbm_of(read(tmp_path, only), -30_000) == dbm_of(
        read(tmp_path, only, gain="20.7"), -30_000
    )


def test_a_probe_from_indicated_to_true(tmp_path: Path) -> None:
    """Between points straight in dB, scipy's interp1d as reference; E2 = 50 ohm times power."""
    chain = read(tmp_path, PROBE)
    true = interp1d(np.log([0.5, 5, 200]), np.log([0.48, 5, 210]))
    for e in (0.5, 1.37, 5.0, 61.4, 200.0):
        power_w, flags = chain.tables[0].convert(np.array([round(e * 100)], np.int32))
        assert math.sqrt(50 * power_w[0]) == pytest.approx(float(np.exp(true(math.log(e)))))
        assert flags[0] == 0
    assert chain.least_w[0] == pytest.approx(0.48**2 / 50)
    f, k = chain.frequencies_hz[0], chain.k[0]
    at = -0.5 + 2.0 * np.log(f / 7e8) / math.log(3e9 / 7e8)
    np.testing.assert_allclose(k, 50 * 10 ** (at / 10), rtol=1e-12)
    assert chain.resolution == 0.01


def test_the_ends_of_a_probe(tmp_path: Path) -> None:
    """Below its first point that point, flagged; beyond twice its last no reading, but strong."""
    chain = read(tmp_path, PROBE)
    counts = np.array([0, 10, 20_100, 40_000, 40_001, 90_000, -1], np.int32)
    power_w, flags = chain.tables[0].convert(counts)
    e = np.sqrt(50 * power_w)
    np.testing.assert_allclose(e, [0.48, 0.48, 210, 210, np.nan, np.nan, np.nan])
    below, above, wire = (int(f) for f in (Flag.BELOW_RANGE, Flag.ABOVE_RANGE, Flag.NO_SIGNAL_WIRE))
    over = above | wire
    assert flags.tolist() == [below, below, above, above, over, over, wire]


@pytest.mark.parametrize(
    ("quantity", "resolution", "count", "e"),
    [
        ("v_per_m", "0.01", 1000, 10.0),
        ("v2_per_m2", "1.0", 100, 10.0),
        ("w_per_m2", "0.01", 27, math.sqrt(0.27 * 376.730313412)),
        ("dbv_per_m", "0.01", 2000, 10.0),
    ],
)
def test_a_field_strength_in_every_quantity(
    tmp_path: Path, quantity: str, resolution: str, count: int, e: float
) -> None:
    """E2 = S times 376.73 ohm of a plane wave; 20 dB over 1 V/m."""
    text = PROBE.replace('"v_per_m"', f'"{quantity}"').replace("0.01", resolution, 1)
    text = text.replace("[[0.5, 0.48], [5, 5], [200, 210]]", "[[0.5, 0.5], [200, 200]]")
    power_w, _ = read(tmp_path, text).tables[0].convert(np.array([count], np.int32))
    assert math.sqrt(50 * power_w[0]) == pytest.approx(e, rel=1e-9)


def test_a_reading_below_the_range_stands(tmp_path: Path) -> None:
    """Censor only the average: on the curve no flag; weaker than its end: the end, flagged."""
    chain = read(tmp_path, CURVES.replace("averages", "range_dbm = [-50, 0]\naverages", 1))
    power_w, flags = chain.tables[0].convert(np.array([1900, 2100], np.int32))
    assert 10 * math.log10(power_w[0] / 1e-3) < -54
    assert flags.tolist() == [0, int(Flag.BELOW_RANGE)]
    assert chain.least_w[0] == pytest.approx(1e-8)


def test_temperature_as_table_or_coefficient(tmp_path: Path) -> None:
    """0.02 dB/K from 20 degrees is 0.6 dB at 50, as two rows of a table say it, too."""
    slope = "temperature_coefficient_db_per_k = 0.02\nreference_c = 20\naverages"
    table = "temperature = [[-10, -0.6], [20, 0], [50, 0.6]]\naverages"
    celsius = np.array([-10.0, 0.0, 20.0, 35.0, 50.0])
    for text in (slope, table):
        (found,) = read(tmp_path, CURVES.replace("averages", text, 1)).temperature
        np.testing.assert_allclose(
            temperature_db(found, celsius), (celsius - 20) * 0.02, atol=1e-12
        )
    assert read(tmp_path, CURVES).temperature == (None,)
