"""fieldsill calibration compare over elements with certificates, gains and tables of U."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest

from tests.cli.calibrations import FILE
from tests.cli.command import run
from tests.terms import confirmed

AMPLIFIER = """
[[element]]
type = "preamplifier"
serial = "p1"
certificate = "K 8"
due = 2030-01-01
k = 2
table = [["1GHz", 20.0, 0.4], ["6GHz", 20.0, 0.6]]
"""
LINE = """
[[contribution]]
name = "modulation"
table = [["1GHz", 0.3], ["6GHz", 0.6]]
distribution = "rectangular"
shared = true
"""


def written(path: Path, more: str) -> Path:
    path.write_text(
        FILE.format(due="2099-12-31", averages="none", af=30, loss=0, more=more, terms=confirmed())
    )
    return path


def test_what_a_new_certificate_of_an_element_changes(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """1 dB less gain is 1 dB more field; U of the element grows, and nothing stands there twice."""
    old = written(tmp_path / "old.toml", AMPLIFIER + LINE)
    new = AMPLIFIER.replace("20.0, 0.6", "19.0, 0.9").replace("2030", "2031").replace("K 8", "K 9")
    new = written(tmp_path / "new.toml", new + LINE.replace("0.6", "0.7"))
    document = run(capsys, ["calibration", "compare", old, new, "--json"]).document
    found = {row["what"]: (row["a"], row["b"]) for row in document["differences"]}
    assert found == {
        "element preamplifier: certificate": ("K 8", "K 9"),
        "element preamplifier: due": ("2030-01-01", "2031-01-01"),
        "element preamplifier: table": (["6000 MHz 20 dB"], ["6000 MHz 19 dB"]),
        "element preamplifier: U": ("0.6 dB, k = 2", "0.9 dB, k = 2"),
        "element preamplifier: table of U": (["6000 MHz 0.6"], ["6000 MHz 0.9"]),
        "contribution 'modulation': value": ("0.6", "0.7"),
        "contribution 'modulation': table": (["6000 MHz 0.6"], ["6000 MHz 0.7"]),
    }
    assert document["largest_response_db"] == pytest.approx(1.0)
    u = [document["uncertainty"][side]["standard_db"] for side in "ab"]
    assert u[1] > u[0]


def test_an_antenna_by_gain_against_the_same_by_factor(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """30 dB/m at 1 GHz is 0.23 dBi and 15.79 at 6 GHz (20 log f - 29.77 - AF): within 0.01 dB."""
    old = written(tmp_path / "old.toml", "")
    text = old.read_text()
    by_gain = text.replace('type = "antenna"', 'type = "antenna"\nquantity = "gain"')
    by_gain = by_gain.replace('["1GHz", 30], ["6GHz", 30]', '["1GHz", 0.226], ["6GHz", 15.789]')
    new = tmp_path / "new.toml"
    new.write_text(by_gain)
    document = run(capsys, ["calibration", "compare", old, new, "--json"]).document
    assert abs(document["largest_response_db"]) < 0.01
    found = {row["what"]: (row["a"], row["b"]) for row in document["differences"]}
    assert found["element antenna: quantity"] == ("antenna_factor", "gain")
    out = run(capsys, ["calibration", "show", new]).out
    assert "antenna a1: certificate K 1; 1 GHz to 6 GHz, gain 0.226 to 15.789 dBi" in out


def test_show_tells_the_whole_span_of_u_and_what_is_due_first(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    """One figure would pass for that of every frequency; one date for that of the whole chain."""
    soon = datetime.now(UTC).date() + timedelta(days=20)
    path = written(tmp_path / "cal.toml", AMPLIFIER.replace("2030-01-01", f"{soon}"))
    out = run(capsys, ["calibration", "show", path]).out
    assert "U 0.4 to 0.6 dB (k = 2)" in out
    assert "due soon: preamplifier p1, in 20 days" in out
