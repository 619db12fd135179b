"""One figure by a detector's law: the count table's own answer, unrounded."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from monitor import calparts
from monitor.core.flags import Flag
from monitor.core.law import CurveLaw, ProbeLaw, ScaleLaw
from monitor.core.quantities import w_from_dbm
from monitor.detectorfile import Fit
from tests.monitor.test_detectorfile import CURVES, PROBE, RECEIVER, with_detector

ROOT = Path(__file__).parents[2]
VOLTS = (
    ROOT / "hardware/examples/detector-board-calibration.toml",
    ROOT / "hardware/examples/text-lines-calibration.toml",
    ROOT / "simulators/data/board-calibration.toml",
)
SCALES = (
    ROOT / "hardware/examples/iq-file-calibration.toml",
    ROOT / "hardware/examples/level-series-calibration.toml",
)


def fitted(path: Path) -> Fit:
    """The detector of a file; where it has one curve, any band will do."""
    (detector,) = calparts.read(path).detectors
    return detector.fit("", "any", 1e9, 2e9)


@pytest.mark.parametrize("path", VOLTS, ids=lambda path: path.name)
def test_volts_of_a_count_give_what_the_count_gives(path: Path) -> None:
    """The count table is the reference: every entry but the converter's rails, 1e-12."""
    fit = fitted(path)
    law, table = fit.law, fit.table
    assert isinstance(law, CurveLaw)
    seen = 0
    for i in range(1, table.power_w.size - 1, max(table.power_w.size // 500, 1)):
        dbm, flags = law.at_volts((table.first_count + i) * law.volts_per_count)
        assert flags == table.flags[i]
        seen |= flags
        assert math.isnan(dbm) == math.isnan(table.power_w[i])
        if not math.isnan(dbm):
            assert w_from_dbm(dbm) == pytest.approx(table.power_w[i], rel=1e-12)
    assert seen & Flag.NO_SIGNAL_WIRE
    assert seen & Flag.ABOVE_RANGE


@pytest.mark.parametrize("path", SCALES, ids=lambda path: path.name)
def test_a_scales_figure_gives_what_its_count_gives(path: Path) -> None:
    """The count table is the reference, over its whole length and beyond both ends."""
    fit = fitted(path)
    law, table = fit.law, fit.table
    assert isinstance(law, ScaleLaw)
    first, n = table.first_count, table.power_w.size
    counts = np.unique(np.linspace(first - 900, first + n + 900, 700).astype(np.int32))
    power_w, flags = table.convert(counts)
    for count, p_w, bits in zip(counts.tolist(), power_w.tolist(), flags.tolist()):
        dbm, found = law.at_dbm(count * law.resolution + law.offset_db)
        assert found == bits, count
        assert math.isnan(dbm) == math.isnan(p_w), count
        if not math.isnan(dbm):
            assert w_from_dbm(dbm) == pytest.approx(p_w, rel=1e-9)


def one(text: str, gain: str = "") -> Fit:
    """The detector of a file with it, over a band."""
    (detector,) = calparts.parse(with_detector(text).encode()).detectors
    return detector.fit(gain, "b", 8e8, 2e9)


@pytest.mark.parametrize("quantity", ["v_per_m", "dbv_per_m"])
def test_what_a_probe_indicates_is_what_its_count_gives(quantity: str) -> None:
    """The count table is the reference, over its whole length and beyond both ends."""
    fit = one(PROBE.replace('"v_per_m"', f'"{quantity}"'))
    law, table = fit.law, fit.table
    assert isinstance(law, ProbeLaw)
    first, n = table.first_count, table.power_w.size
    counts = np.unique(np.linspace(max(first, 0), first + n + 900, 700).astype(np.int32))
    power_w, flags = table.convert(counts)
    indicated = counts * 0.01 if quantity == "v_per_m" else 10.0 ** (counts * 0.01 / 20.0)
    for e, p_w, bits in zip(indicated.tolist(), power_w.tolist(), flags.tolist()):
        dbm, found = law.at_v_per_m(e)
        assert found == bits, e
        assert math.isnan(dbm) == math.isnan(p_w), e
        if not math.isnan(dbm):
            assert w_from_dbm(dbm) == pytest.approx(p_w, rel=1e-9)


def test_volts_of_a_band_give_what_their_count_gives() -> None:
    """The middle of several curves: every tenth entry of the table."""
    fit = one(CURVES)
    law, table = fit.law, fit.table
    assert isinstance(law, CurveLaw)
    for i in range(0, table.power_w.size, 10):
        dbm, flags = law.at_volts((table.first_count + i) * 0.001)
        assert flags == table.flags[i]
        assert math.isnan(dbm) == math.isnan(table.power_w[i])
        if not math.isnan(dbm):
            assert w_from_dbm(dbm) == pytest.approx(table.power_w[i], rel=1e-12)


def test_a_gain_steps_figure_gives_what_its_count_gives() -> None:
    fit = one(RECEIVER, "0")
    assert isinstance(fit.law, ScaleLaw)
    for count in (-63_000, -30_000, -4_000, 3_000):
        (p_w,), (bits,) = fit.table.convert(np.array([count], np.int32))
        dbm, found = fit.law.at_dbm(count * 0.001 + fit.law.offset_db)
        assert (w_from_dbm(dbm), found) == (pytest.approx(float(p_w), rel=1e-9), bits)


def test_a_power_beyond_what_the_curve_shows_is_its_end() -> None:
    """The curve runs from -60 dBm, its range from -58 to 5 dBm; below the range figures stand."""
    law = fitted(VOLTS[0]).law
    assert law.at_dbm(-80.0) == (-60.0, int(Flag.BELOW_RANGE))
    assert law.at_dbm(-59.5) == (-59.5, 0)
    assert law.at_dbm(20.0) == (5.0, int(Flag.ABOVE_RANGE))
    assert law.at_dbm(-30.5) == (-30.5, 0)
