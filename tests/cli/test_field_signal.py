"""fieldsill field of averaged logs: the signal's class decides, as it does for a site's bands."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from tests.cli.calibrations import ask, figures

AT = ("--frequency", "2GHz", "--dbm", "-30", "--temperature-c", "20")
LOG = 'log"\naveraging_s = 1e-3 # "'
BOUND = "log averaged before linearising"
CORRECTED = "averaged logs, corrected as noise-like"


def test_noise_is_read_higher_with_a_wider_interval(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """10 log10(e) times Euler's constant, 2.50682 dB; the line of 0.3 dB is our choice."""
    plain = figures(capsys, tmp_path, *AT)
    noise = figures(capsys, tmp_path, *AT, "--signal", "noise", "--bandwidth", "5MHz", averages=LOG)
    assert noise["p_dbm"] - plain["p_dbm"] == pytest.approx(2.50682, abs=1e-5)
    ratio_db = 20 * math.log10(noise["e_v_per_m"] / plain["e_v_per_m"])
    assert ratio_db == pytest.approx(2.50682, abs=1e-5)
    u = math.hypot(plain["standard_uncertainty_db"], 0.3 / math.sqrt(3))
    assert noise["standard_uncertainty_db"] == pytest.approx(u)
    assert noise["e_high_v_per_m"] > noise["e_v_per_m"]
    assert CORRECTED in noise["flags"]
    assert BOUND not in noise["flags"]
    out = ask(capsys, tmp_path, *AT, "--signal", "noise", "--bandwidth", "5e6", averages=LOG).out
    assert f"Note: {CORRECTED}" in out


@pytest.mark.parametrize(
    "more",
    [
        [],
        ["--signal", "bursts", "--bandwidth", "5MHz"],
        ["--signal", "mixed"],
        ["--signal", "noise"],
        ["--signal", "noise", "--bandwidth", "50kHz"],
    ],
)
def test_all_else_is_a_lower_bound(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, more: list[str]
) -> None:
    got = figures(capsys, tmp_path, *AT, *more, averages=LOG)
    assert got["p_dbm"] == pytest.approx(-30.0)
    assert got["e_high_v_per_m"] is None
    assert BOUND in got["flags"]


def test_a_carrier_and_powers_need_nothing(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    carrier = figures(capsys, tmp_path, *AT, "--signal", "carrier", averages=LOG)
    power = figures(capsys, tmp_path, *AT, "--signal", "bursts", averages="power")
    for got in (carrier, power):
        assert got["p_dbm"] == pytest.approx(-30.0)
        assert got["e_high_v_per_m"] is not None
        assert not {BOUND, CORRECTED} & set(got["flags"])
    plain = figures(capsys, tmp_path, *AT)
    u = math.hypot(plain["standard_uncertainty_db"], 0.2 / math.sqrt(3))
    assert carrier["standard_uncertainty_db"] == pytest.approx(u)
    assert power["standard_uncertainty_db"] == plain["standard_uncertainty_db"]


@pytest.mark.parametrize(
    ("more", "words"),
    [(["--signal", "fm"], "--signal"), (["--bandwidth", "5Volt"], "not a frequency")],
)
def test_mistakes(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, more: list[str], words: str
) -> None:
    said = ask(capsys, tmp_path, *AT, *more)
    assert said.code == 2
    assert words in said.err
