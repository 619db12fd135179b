"""fieldsill field: counts to V/m; published conversions, bounds, flags, mistakes."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from tests.cli.calibrations import ask, figures
from tests.cli.command import run
from tests.terms import KINDS

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
SHUNNED = "fewer than three axes"


def test_a_published_link_comes_out(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """NTIA TM-10-469 sheet: 24 dBm EIRP at 3 m into 12 dBi at 5625 MHz gives -21.0 dBm.

    E of the EIRP by ITU-R P.525 eq. 1, sqrt(30 EIRP)/d; antenna factor by TM-10-469 eq. 13 as the
    sheet prints it, 30.20 dB/m for 15 dBi, so 33.20 for 12. Each figure good to 0.05 dB.
    """
    got = figures(capsys, tmp_path, "--frequency", "5625MHz", "--dbm", "-21", af=33.20)
    wanted = math.sqrt(30.0 * 10.0 ** ((24.0 - 30.0) / 10.0)) / 3.0
    assert abs(20 * math.log10(got["e_v_per_m"] / wanted)) < 0.1


def test_dbm_to_field_in_decibels(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """dBuV = dBm + 90 + 10 log Z (A.H. Systems formula list), then + AF + loss: dBuV/m."""
    got = figures(capsys, tmp_path, "--frequency", "2GHz", "--dbm", "-40", af=31.5, loss=1.25)
    e_dbuv = 20 * math.log10(got["e_v_per_m"] * 1e6)
    assert e_dbuv == pytest.approx(-40 + 90 + 10 * math.log10(50) + 31.5 + 1.25, abs=1e-9)
    assert got["p_dbm"] == pytest.approx(-40)


def test_power_density_of_a_plane_wave(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """pycraf's test values: 10 uV/m is 2.654418729345079e-13 W/m2."""
    got = figures(capsys, tmp_path, "--frequency", "2GHz", "--dbm", "-30")
    per_e2 = got["s_w_per_m2"] / got["e_v_per_m"] ** 2
    assert per_e2 == pytest.approx(2.654418729345079e-13 / 1e-10, rel=1e-8)


def test_counts_volts_and_dbm_agree(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """By hand: 1340 counts of 1 mV are 1.34 V, the curve's point at -30 dBm."""
    asked = [("--counts", 1340), ("--volts", "1.34V"), ("--volts", "1340mV"), ("--dbm", "-30dBm")]
    found = [figures(capsys, tmp_path, "--frequency", "2e9", *one) for one in asked]
    assert [one["p_dbm"] for one in found] == pytest.approx([-30.0] * 4)
    assert len({round(one["e_v_per_m"], 9) for one in found}) == 1
    assert [one["volts"] for one in found] == [pytest.approx(1.34)] * 3 + [None]


def test_bounds_are_unequal_and_from_u(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """GUM 5.1.2 by hand: 1.0/2, 0.245/sqrt 2 (U-shaped: GUM H.1.3.4) and half of a step of 1/22 dB
    over sqrt 3. One step is 1 mV of 22 mV/dB."""
    got = figures(capsys, tmp_path, "--frequency", "2GHz", "--dbm", "-30")
    u = math.sqrt(0.5**2 + (0.245**2) / 2 + (1 / 22 / 2) ** 2 / 3)
    assert got["standard_uncertainty_db"] == pytest.approx(u, rel=1e-6)
    assert got["expanded_uncertainty_db"] == pytest.approx(got["k"] * u)
    assert 1.9 < got["k"] < 1.97
    low, e, high = (got[key] for key in ("e_low_v_per_m", "e_v_per_m", "e_high_v_per_m"))
    assert 20 * math.log10(high / e) == pytest.approx(got["expanded_uncertainty_db"])
    assert 20 * math.log10(e / low) == pytest.approx(got["expanded_uncertainty_db"])
    assert high - e > (e - low) * 1.05


def test_the_chain_adds_up(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    """Gains give E from the power, and the squares of all u give the combined one (GUM 5.1.2)."""
    more = '[[element]]\ntype = "cable"\nserial = "c2"\ncertificate = "K 3"\n'
    more += 'table = [["1GHz", 2.0], ["6GHz", 2.0]]\n'
    got = figures(capsys, tmp_path, "--frequency", "2GHz", "--dbm", "-30", loss=0.7, more=more)
    chain = got["chain"]
    assert [(link["element"], link["certificate"]) for link in chain] == [
        ("detector", "K 4711"), ("antenna a1", "K 1"), ("cable c1", "K 2"), ("cable c2", "K 3"),
        ("mismatch", None), *[(f"{kind}, none", None) for kind in KINDS],
    ]  # fmt: skip
    assert [link["gain_db"] for link in chain[:5]] == [None, -30.0, -0.7, -2.0, None]
    gain = sum(link["gain_db"] or 0.0 for link in chain)
    e2 = 50.0 * 1e-3 * 10 ** ((got["p_dbm"] - gain) / 10)
    assert got["e_v_per_m"] == pytest.approx(math.sqrt(e2))
    u = math.sqrt(sum((link["u_db"] or 0.0) ** 2 for link in chain))
    assert u == pytest.approx(got["standard_uncertainty_db"])


def test_tables_are_read_at_the_frequency_alone(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """Linear in dB over log frequency (design of the chain): half way between 1 and 4 is 2 GHz."""
    more = '[[element]]\ntype = "filter"\nserial = "f1"\ncertificate = "K 3"\n'
    more += 'table = [["1GHz", 1.0], ["4GHz", 3.0], ["6GHz", 9.0]]\n'
    at = {
        f: figures(capsys, tmp_path, "--frequency", f, "--dbm", "-30", more=more)
        for f in ("1GHz", "2GHz", "4GHz")
    }
    assert [one["chain"][3]["gain_db"] for one in at.values()] == pytest.approx([-1, -2, -3])
    assert len({one["expanded_uncertainty_db"] for one in at.values()}) == 1


@pytest.mark.parametrize(
    ("arguments", "values", "says"),
    [
        (["--dbm", "-30", "--temperature-c", "20"], {}, []),
        (["--dbm", "-30"], {}, ["temperature of the instrument not known"]),
        (["--dbm", "-30", "--temperature-c", "50.5"], {}, ["outside the calibrated temperature"]),
        (
            ["--dbm", "-30", "--temperature-c", "20"],
            {"due": "2021-01-15"},
            ["calibration overdue"],
        ),
        (
            ["--dbm", "-30", "--temperature-c", "20"],
            {"averages": "log"},
            ["log averaged before linearising"],
        ),
        (
            ["--counts", "1980", "--temperature-c", "20"],
            {},
            ["below the detection limit"],
        ),
        (["--volts", "0.7", "--temperature-c", "20"], {}, ["above the detector's range"]),
        (
            ["--volts", "2.3", "--temperature-c", "20"],
            {},
            ["detector voltage outside its valid window"],
        ),
    ],
)
def test_flags(
    capsys: pytest.CaptureFixture[str],
    tmp_path: Path,
    arguments: list[str],
    values: dict[str, object],
    says: list[str],
) -> None:
    got = figures(capsys, tmp_path, "--frequency", "2GHz", *arguments, **values)
    assert sorted(got["flags"]) == sorted([*says, SHUNNED])


def test_an_end_of_the_range_bounds_one_side_only(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """A reading below the range may be of nothing; one above it may be of anything more."""
    weak = figures(capsys, tmp_path, "--frequency", "2GHz", "--dbm", "-70")
    assert (weak["p_dbm"], weak["e_low_v_per_m"]) == (-58.0, 0.0)
    assert weak["e_high_v_per_m"] > weak["e_v_per_m"]
    strong = figures(capsys, tmp_path, "--frequency", "2GHz", "--dbm", "3")
    assert (strong["p_dbm"], strong["e_high_v_per_m"]) == (-2.0, None)
    assert 0 < strong["e_low_v_per_m"] < strong["e_v_per_m"]
    averaged = figures(capsys, tmp_path, "--frequency", "2GHz", "--dbm", "-30", averages="log")
    assert averaged["e_high_v_per_m"] is None


def test_no_reading_has_no_figures(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    got = figures(capsys, tmp_path, "--frequency", "2GHz", "--counts", "2300")
    for key in ("p_dbm", "e_v_per_m", "s_w_per_m2", "e_low_v_per_m", "e_high_v_per_m"):
        assert got[key] is None
    out = ask(capsys, tmp_path, "--frequency", "2GHz", "--counts", "2300").out
    assert "field strength                           no reading" in out


def test_for_people(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    out = ask(capsys, tmp_path, "--frequency", "2GHz", "--counts", "1340", loss=0.7).out
    rows = [" ".join(line.split()) for line in out.splitlines()]
    assert rows[0] == "board 7, at 2 GHz"
    assert rows[2:9] == [
        "raw count 1340",
        "voltage at the detector 1.34 V",
        "power at its port -30.00 dBm u 0.01 dB certificate K 4711",
        "+ cable c1 0.70 dB certificate K 2",
        "power at the antenna's port -29.30 dBm",
        "+ antenna a1 30.00 dB/m u 0.50 dB certificate K 1",
        "mismatch u 0.17 dB",
    ]
    assert "the stated uncertainty does not cover this: temperature of the instrument" in out
    assert "the whole field is this much or more" in out
    assert "no statement about any limit" in out


def test_a_receivers_level(capsys: pytest.CaptureFixture[str]) -> None:
    """By hand: -30.5 dBFS with 0 dBFS at -12 dBm is -42.5 dBm; its count is -30500."""
    base = ["field", "--calibration", EXAMPLES / "iq-file-calibration.toml"]
    base += ["--frequency", "2.5GHz", "--json"]
    level = run(capsys, [*base, "--dbfs", "-30.5"]).document
    assert level["p_dbm"] == pytest.approx(-42.5)
    assert level["volts"] is None
    assert "calibration figures are invented" in level["flags"]
    count = run(capsys, [*base, "--counts", "-30500"]).document
    assert count["e_v_per_m"] == pytest.approx(level["e_v_per_m"])


OF_AXIS = '[[element]]\ntype = "attenuator"\nserial = "p"\ncertificate = "K 5"\naxis = "y"\n'
OF_AXIS += 'table = [["1GHz", 10.0], ["6GHz", 10.0]]\n'


def test_an_axis_with_a_table_of_its_own(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    asked = ("--frequency", "2GHz", "--dbm", "-30")
    x, y = (figures(capsys, tmp_path, *asked, "--axis", a, more=OF_AXIS) for a in "xy")
    assert 20 * math.log10(y["e_v_per_m"] / x["e_v_per_m"]) == pytest.approx(10.0)
    said = ask(capsys, tmp_path, *asked, more=OF_AXIS)
    assert said.code == 2
    assert "tables of its own for y; say which --axis" in said.one_line


DRIFT = '[[contribution]]\nname = "drift"\nvalue = 15\nsensitivity = -0.04\n'
DRIFT += 'degrees_of_freedom = 3\ndistribution = "normal"\nshared = false\nkind = "detector"\n'


def test_a_line_in_another_unit_of_few_degrees_of_freedom(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """By hand: 15 times 0.04 is 0.6 dB (GUM 5.1.3); k is above the normal one (GUM G.3.2)."""
    asked = ("--frequency", "2GHz", "--dbm", "-30")
    plain = figures(capsys, tmp_path, *asked)
    found = figures(capsys, tmp_path, *asked, more=DRIFT)
    u_db = math.hypot(plain["standard_uncertainty_db"], 0.6)
    assert found["standard_uncertainty_db"] == pytest.approx(u_db)
    assert found["chain"][0]["u_db"] == pytest.approx(math.hypot(0.6, 1 / 22 / 2 / math.sqrt(3)))
    assert found["k"] > 2.1 > plain["k"]
