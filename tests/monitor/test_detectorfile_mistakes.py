"""Detectors in a calibration file: the one line that each mistake gets."""

from __future__ import annotations

from pathlib import Path

import pytest

from monitor.calfile import load_chain
from monitor.config import Band, Channel
from monitor.core.errors import CalibrationError
from tests.monitor.test_calfile import FILE
from tests.monitor.test_detectorfile import (
    CORRECTION,
    CURVES,
    PROBE,
    RECEIVER,
    read,
    with_detector,
)

MISTAKES = [
    (CURVES, '"3GHz"', '"300MHz"', "detector.curve_at: 300 MHz stands out of order"),
    (CURVES, "[-27, 1.34]", "[-27, 2.34]", "detector.curve_at[2].points: not monotonic"),
    (
        CURVES,
        "[[-58, 2.00], [-27, 1.34], [3, 0.68]]",
        "[[-58, 0.6], [0, 1.9]]",
        "curve_at: the vol",
    ),
    (CURVES, "valid_v", "curve = [[-60, 2], [0, 1]]\nvalid_v", "curve: give curve for all freq"),
    (CURVES, "valid_v = [0.3", "valid_v = [0.9", "valid_v: must hold the range's voltages"),
    (
        CURVES,
        "averages",
        "range_dbm = [-60, 0]\naverages",
        "reaches beyond the curves, -58 to 0 dBm",
    ),
    (CURVES, '"none"', '"none"\naveraging_s = 1', "averaging_s: only where averages is"),
    (CURVES, "averages", "noise_dbm = -70\naverages", "detector.noise_u_db: missing"),
    (CURVES, "averages", "noise_dbm = 70\naverages", "detector.noise_dbm: 70 is outside -200 to 0"),
    (
        CURVES,
        "averages",
        "noise_dbm = -70\nnoise_u_db = 0\naverages",
        "detector.noise_u_db: 0 is outside 0.01 to 3",
    ),
    (CURVES, "averages", "noise_u_db = 1\naverages", "detector.noise_u_db: unknown key"),
    (
        CURVES,
        "averages",
        "temperature_coefficient_db_per_k = 0.1\naverages",
        "reference_c: missing",
    ),
    (CURVES, "averages", "temperature = [[20, 0], [0, 1]]\naverages", "degrees must rise"),
    (CURVES, "averages", "temperature = [[0, 0], [9, -20.5]]\naverages", "more than 20 dB"),
    (RECEIVER, 'gain = "0"', 'gain = "20.7"', "detector.step: gain '20.7' stands twice"),
    (RECEIVER, 'gain = "0"', 'gain = " "', "detector.step[2].gain: is empty"),
    (RECEIVER, "range_dbm = [-75, -15]", "", "detector.step[1].range_dbm: missing"),
    (RECEIVER, '["3GHz", -11.0]', '["1.5GHz", -11.0]', "gain '20.7' covers 700 MHz to 1.5 GHz"),
    (
        RECEIVER,
        "range_dbm = [-75, -15]",
        "dbfs_to_dbm = -12\nrange_dbm = [-75, -15]",
        "unknown key",
    ),
    (PROBE, "[5, 5]", "[5, 0.4]", "detector.linearity: true 0.4 V/m at point 2; must be positive"),
    (PROBE, "[0.5, 0.48]", "[0, 0]", "detector.linearity: indicated 0 V/m at point 1"),
    (PROBE, "[0.5, 0.48]", "[0.5, 1e-300]", "detector.linearity: 1e-300 V/m is below 1e-06 V/m"),
    (PROBE, "averages", "range_v_per_m = [0.1, 100]\naverages", "range_v_per_m: reaches beyond"),
    (PROBE, "averages", "valid_v_per_m = [1, 300]\naverages", "valid_v_per_m: must hold the lin"),
    (PROBE, "resolution = 0.01", "resolution = 0.001", "detector.resolution: 400002 counts"),
    (PROBE, '"v_per_m"', '"a_per_m"', "detector.quantity: 'a_per_m' is not one of v_per_m"),
]


@pytest.mark.parametrize(("text", "old", "new", "words"), MISTAKES, ids=lambda x: str(x)[:40])
def test_each_mistake_is_one_line(
    tmp_path: Path, text: str, old: str, new: str, words: str
) -> None:
    assert old in text
    with pytest.raises(CalibrationError) as caught:
        read(tmp_path, text.replace(old, new, 1), gain="20.7" if text is RECEIVER else "")
    assert str(caught.value).startswith("calibration.toml: ")
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize("text", [CURVES, PROBE])
def test_only_receivers_have_gain_steps(tmp_path: Path, text: str) -> None:
    with pytest.raises(CalibrationError, match="gain '3' is asked for, but there are no gain"):
        read(tmp_path, text, gain="3")


def test_a_probe_goes_with_its_correction_and_nothing_else(tmp_path: Path) -> None:
    path = tmp_path / "calibration.toml"
    axis, band = [Channel("x", "x", "b")], {"b": Band("b", 8e8, 2e9)}
    whole = with_detector(PROBE)
    cable = FILE[FILE.rindex("[[element]]") : FILE.index("[[contribution]]")]
    for text, words in [
        (whole.replace(CORRECTION, CORRECTION + cable), "calibrated as a whole; take cable c1 out"),
        (whole.replace('type = "probe"', 'type = "antenna"'), "needs one probe, not an element of"),
        (
            FILE.replace('type = "antenna"', 'type = "probe"'),
            "needs one antenna, not an element of",
        ),
    ]:
        path.write_text(text, encoding="utf-8")
        with pytest.raises(CalibrationError, match=words):
            load_chain(path, axis, band)
