"""fieldsill field through detectors of several frequencies, gain steps, as probes, warm or cold."""

from __future__ import annotations

import math
import re
from pathlib import Path
from typing import Any

import pytest

from monitor.core.flags import Flag, words
from tests.cli.command import run
from tests.monitor.test_detectorfile import CURVES, PROBE, RECEIVER, with_detector


def field(
    capsys: pytest.CaptureFixture[str], folder: Path, detector: str, *arguments: object
) -> Any:
    """The JSON of a question that is answered, or the one line of its error."""
    path = folder / "calibration.toml"
    path.write_text(with_detector(detector), encoding="utf-8")
    found = run(capsys, ["field", "--calibration", path, *arguments, "--json"])
    return found.document if found.code == 0 else found.one_line


def test_the_curve_at_the_frequency_itself(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """-30 dBm at 700 MHz, -27 at 3 GHz; in the middle of the logarithm -28.5, and no spread."""
    middle = math.sqrt(7e8 * 3e9)
    for hz, dbm in ((7e8, -30.0), (middle, -28.5), (3e9, -27.0)):
        got = field(capsys, tmp_path, CURVES, "--frequency", hz, "--volts", "1.34V")
        assert got["p_dbm"] == pytest.approx(dbm, abs=1e-6)
        assert not any("curve over" in link["element"] for link in got["chain"])
    said = field(capsys, tmp_path, CURVES, "--frequency", "3.1GHz", "--volts", "1.34")
    assert "covers" in said


def test_a_gain_step(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    asked = ("--frequency", "1GHz", "--dbfs", "-30")
    got = field(capsys, tmp_path, RECEIVER, *asked, "--gain", "20.7")
    assert (got["p_dbm"], got["gain"]) == (pytest.approx(-42.9), "20.7")
    assert "say which, as gain = ...: 20.7, 0 (of the site file's [[channel]], or --gain)" in field(
        capsys, tmp_path, RECEIVER, *asked
    )


def test_what_a_probe_indicates(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """At 700 MHz 0.5 dB are taken off: 200 indicated are 210 true, 210 10^(-0.5/20) at last."""
    for form in (("--v-per-m", "5V/m"), ("--counts", 500)):
        got = field(capsys, tmp_path, PROBE, "--frequency", "700MHz", *form)
        assert got["e_v_per_m"] == pytest.approx(5.0 * 10 ** (-0.5 / 20))
        assert got["chain"][1]["gain_db"] == pytest.approx(0.5)
    path = tmp_path / "calibration.toml"
    told = run(
        capsys,
        ["field", "--calibration", path, "--frequency", "700MHz", "--v-per-m", "5"],
    ).out
    assert re.search(r"field strength by its linearity +5\.00 V/m", told)
    assert "port" not in told
    assert "probe, 0.48 to 210 V/m" in run(capsys, ["calibration", "show", path]).out
    strong = field(capsys, tmp_path, PROBE, "--frequency", "700MHz", "--v-per-m", "300")
    assert strong["e_high_v_per_m"] is None
    weak = field(capsys, tmp_path, PROBE, "--frequency", "700MHz", "--v-per-m", "0.1")
    assert weak["e_low_v_per_m"] == 0.0
    said = field(capsys, tmp_path, PROBE, "--frequency", "700MHz", "--volts", "1")
    assert "gives V/m; give --counts, --dbm or --v-per-m" in said


def test_a_warm_detector_is_corrected(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """0.02 dB/K from 20 degrees: 0.4 dB less at 40, 0.6 more at -10; a bare power stays."""
    slope = "temperature_coefficient_db_per_k = 0.02\nreference_c = 20\naverages"
    text = CURVES.replace("averages", slope, 1)

    def at(celsius: str, *form: str) -> Any:
        return field(
            capsys, tmp_path, text, "--frequency", "700MHz", *form, "--temperature-c", celsius
        )

    assert at("40", "--volts", "1.34")["p_dbm"] == pytest.approx(-30.4)
    assert at("40", "--volts", "1.34")["temperature_correction_db"] == pytest.approx(-0.4)
    assert at("-10", "--counts", "1340")["p_dbm"] == pytest.approx(-29.4)
    assert at("40", "--dbm", "-30")["p_dbm"] == pytest.approx(-30.0)
    assert at("20", "--volts", "1.34")["e_v_per_m"] > at("40", "--volts", "1.34")["e_v_per_m"]
    said = run(
        capsys,
        ["field", "--calibration", tmp_path / "calibration.toml", "--frequency", "700MHz",
         "--volts", "1.34", "--temperature-c", "40"],
    ).out  # fmt: skip
    assert "-0.40 dB" in said


def test_one_figure_below_the_range_is_the_ranges_end(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """A reported figure is censored, though the table keeps such readings for the averages."""
    text = CURVES.replace("averages", "range_dbm = [-50, 0]\naverages", 1)
    got = field(capsys, tmp_path, text, "--frequency", "700MHz", "--volts", "1.9")
    assert got["p_dbm"] == -50.0
    assert words(Flag.BELOW_RANGE)[0] in got["flags"]


def test_show_at_a_gain_step(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    path = tmp_path / "calibration.toml"
    path.write_text(with_detector(RECEIVER), encoding="utf-8")
    asked = ["calibration", "show", path, "--axes", "x", "--band", "800MHz:2GHz"]
    assert "say which" in run(capsys, asked).one_line
    shown = run(capsys, [*asked, "--gain", "0", "--json"]).document
    assert shown["detectors"][0]["range_dbm"] == [-55.0, 5.0]


NOISY = """
[detector]
kind = "scale"
resolution = 0.001
range_dbm = [-75, 0]
noise_dbm = -60
noise_u_db = 0.2
averages = "none"
"""


def test_noise_is_taken_off_and_what_it_hides_is_a_bound(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """10 log(1 - 10^-1) = -0.46 dB, as a published answer on noise correction has it; the detection
    limit is 3.29 times the uncertainty of the noise (Currie 1968, from memory)."""
    strong = field(capsys, tmp_path, NOISY, "--frequency", "900MHz", "--dbm", "0")
    plain = strong["e_v_per_m"] / math.sqrt(1 - 1e-6)  # for 0 dBm
    seen = field(capsys, tmp_path, NOISY, "--frequency", "900MHz", "--dbm", "-50")
    assert seen["noise_taken_off_dbm"] == pytest.approx(-60.0)
    lowered_db = 20 * math.log10(seen["e_v_per_m"] / plain) + 50.0
    assert lowered_db == pytest.approx(-0.46, abs=0.005)
    hidden = field(capsys, tmp_path, NOISY, "--frequency", "900MHz", "--dbm", "-60")
    assert words(Flag.BELOW_RANGE)[0] in hidden["flags"]
    assert hidden["e_low_v_per_m"] == 0.0
    limit_w = 3.29 * 1e-9 * 0.2 * math.log(10) / 10
    assert hidden["e_v_per_m"] == pytest.approx(plain * math.sqrt(limit_w / 1e-3), rel=1e-3)
    assert hidden["e_high_v_per_m"] > hidden["e_v_per_m"]


def test_show_of_a_probe_speaks_of_its_correction(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """A probe as a whole has no antenna factor on its certificate."""
    path = tmp_path / "probe.toml"
    path.write_text(with_detector(PROBE), encoding="utf-8")
    out = run(capsys, ["calibration", "show", path]).out
    assert "true less indicated field" in out
    assert "antenna factor" not in out
