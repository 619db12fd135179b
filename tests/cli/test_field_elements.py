"""fieldsill field and calibration show: what each element's own certificate adds."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from scipy.interpolate import interp1d

from monitor.calterms import ASSUMED_DB
from tests.cli.calibrations import FILE, ask, figures
from tests.cli.command import run
from tests.terms import confirmed

AMPLIFIER = """
[[element]]
type = "preamplifier"
serial = "p1"
certificate = "K 8"
laboratory = "Tern Hollow"
date = 2020-02-01
due = 2021-02-01
u_db = 0.4
k = 2.0
table = [["1GHz", 20.0], ["6GHz", 20.0]]
"""
COUPLED = """
[[element]]
type = "cable"
serial = "c2"
certificate = "K 9"
k = 2
table = [["1GHz", 0.5, 0.2], ["2GHz", 0.7, 0.6], ["4GHz", 1.0, 0.4], ["6GHz", 1.2, 0.9]]
"""
LOSSES = """
[[contribution]]
name = "losses"
table = [["1GHz", 0.3], ["6GHz", 0.6]]
distribution = "rectangular"
shared = false
kind = "cable"
"""
ASKED = ("--frequency", "3GHz", "--dbm", "-30", "--temperature-c", "20")


def test_each_element_has_the_uncertainty_of_its_certificate(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """U over k, at the frequency by scipy over log f; a kind's other lines with its first element.

    GUM 5.1.2: the squares of all links are the combined one's.
    """
    found = figures(capsys, tmp_path, *ASKED, more=AMPLIFIER + COUPLED + LOSSES)
    links = {link["element"]: link for link in found["chain"]}
    x = np.log(3e9)
    u_c2 = float(interp1d(np.log([2e9, 4e9]), [0.6, 0.4])(x)) / 2
    losses = float(interp1d(np.log([1e9, 6e9]), [0.3, 0.6])(x)) / math.sqrt(3)
    assert links["preamplifier p1"]["gain_db"] == pytest.approx(20.0)
    assert links["preamplifier p1"]["u_db"] == pytest.approx(0.2)
    assert links["preamplifier p1"]["certificate"] == "K 8"
    assert links["cable c1"]["u_db"] == pytest.approx(losses)
    assert links["cable c2"]["u_db"] == pytest.approx(u_c2)
    u = math.sqrt(sum((link["u_db"] or 0.0) ** 2 for link in found["chain"]))
    assert u == pytest.approx(found["standard_uncertainty_db"])
    assert "losses" not in links


def test_an_amplified_level_is_that_much_weaker_at_the_antenna(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    plain = figures(capsys, tmp_path, *ASKED)
    found = figures(capsys, tmp_path, *ASKED, more=AMPLIFIER)
    assert plain["e_v_per_m"] / found["e_v_per_m"] == pytest.approx(10.0)


def test_an_element_that_is_overdue_makes_the_figure_overdue(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    assert "calibration overdue" in figures(capsys, tmp_path, *ASKED, more=AMPLIFIER)["flags"]
    assert "calibration overdue" not in figures(capsys, tmp_path, *ASKED, more=COUPLED)["flags"]


def test_a_table_that_ends_too_soon_is_named(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    lines = LOSSES.replace("1GHz", "4GHz")
    found = ask(capsys, tmp_path, *ASKED, more=lines)
    assert found.code == 2
    assert "contribution[1].table: 'losses' covers 4 GHz to 6 GHz, not 3 GHz" in found.one_line


def bare(folder: Path, more: str = "") -> Path:
    """A file without the terms that may not be left out."""
    path = folder / "bare.toml"
    path.write_text(
        FILE.format(due="2099-12-31", averages="none", af=30, loss=0, more=more, terms="")
    )
    return path


def test_what_nobody_wrote_is_assumed_and_said(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """By hand: half widths over the root of three, in quadrature (GUM 4.3.7, 5.1.2)."""
    written = figures(capsys, tmp_path, *ASKED)
    arguments = ["field", "--calibration", bare(tmp_path), *ASKED]
    found = run(capsys, [*arguments, "--json"]).document
    halves = [db for kind, db in ASSUMED_DB.items() if kind != "polarisation"]
    u = math.hypot(written["standard_uncertainty_db"], *(h / math.sqrt(3) for h in halves))
    assert found["standard_uncertainty_db"] == pytest.approx(u)
    assert "terms of the uncertainty are assumed, not confirmed" in found["flags"]
    assert {link["element"] for link in found["chain"]} > {"drift (assumed)", "isotropy (assumed)"}
    assert "assumed, not confirmed" in run(capsys, arguments).out


def test_show_lists_certificates_and_what_is_assumed(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    path = bare(tmp_path, AMPLIFIER + COUPLED + confirmed("drift", "isotropy"))
    document = run(capsys, ["calibration", "show", path, "--json"]).document
    elements = {element["serial"]: element for element in document["elements"]}
    keys = ("laboratory", "date", "due", "u_db", "k", "unit", "smallest_db")
    assert [elements["p1"][key] for key in keys] == [
        "Tern Hollow", "2020-02-01", "2021-02-01", 0.4, 2.0, "dB", 20.0,
    ]  # fmt: skip
    assert [elements["c2"][key] for key in keys] == [None, None, None, 0.9, 2.0, "dB", 0.5]
    assert [elements["c1"][key] for key in keys][:5] == [None] * 5
    assert document["assumed"] == ["out_of_band", "cross_axis", "near_field", "own_body"]
    assert (document["overdue"], document["overdue_parts"]) == (True, ["preamplifier p1"])
    out = run(capsys, ["calibration", "show", path]).out
    for words in (
        "OVERDUE: preamplifier p1; nothing conforms",
        "assumed, which nobody has confirmed: out_of_band, cross_axis, near_field, own_body;",
        "preamplifier p1: certificate K 8, by Tern Hollow, date 2020-02-01, due 2021-02-01,"
        " U 0.4 dB (k = 2); 1 GHz to 6 GHz, gain 20 to 20 dB",
        "own body (housing) (assumed)",
    ):
        assert words in out
