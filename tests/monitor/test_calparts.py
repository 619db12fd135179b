"""The lines of the budget in a calibration file, and the one line that each mistake gets."""

from __future__ import annotations

import math
import re
from pathlib import Path

import numpy as np
import pytest
from scipy.interpolate import interp1d

from monitor.calfile import load_chain
from monitor.config import Band, Channel
from monitor.core.errors import CalibrationError
from tests.monitor.test_calfile import FILE, read


def test_a_contribution_in_another_unit_with_degrees_of_freedom(tmp_path: Path) -> None:
    """15 K times 0.04 dB/K is 0.6 dB; left out: 1 dB to the dB and exactly known."""
    mismatch = "value = 0.3\n"
    more = "value = 15\nsensitivity = -0.04\ndegrees_of_freedom = 8\n"
    line = read(tmp_path, FILE.replace(mismatch, more)).contributions[0][1]
    assert line.u == pytest.approx(0.6 / math.sqrt(2))
    assert (line.sensitivity, line.degrees_of_freedom) == (-0.04, 8.0)
    plain = read(tmp_path, FILE).contributions[0][1]
    assert (plain.sensitivity, plain.degrees_of_freedom) == (1.0, math.inf)


@pytest.mark.parametrize(
    ("lines", "words"),
    [
        ("value = 0.3\ndegrees_of_freedom = 0.9", "degrees_of_freedom: 0.9 is outside 1 to"),
        ("value = 0.3\ndegrees_of_freedom = inf", "degrees_of_freedom: inf is outside"),
        ("value = 31", "value: 31 is outside 0 to 30"),
        ("value = 100\nsensitivity = 0.4", "value: times its sensitivity it is beyond 30 dB"),
        ("value = 1\nsensitivity = '2'", "sensitivity: '2' is not a number"),
        ("value = 1\nsensitivty = 2", "unknown key; did you mean sensitivity"),
    ],
)
def test_what_a_contribution_cannot_be(tmp_path: Path, lines: str, words: str) -> None:
    with pytest.raises(CalibrationError, match="calibration.toml: contribution\\[2\\]") as caught:
        read(tmp_path, FILE.replace("value = 0.3", lines))
    assert words in str(caught.value)


TABLE = 'table = [["700MHz", 0.2], ["1GHz", 0.7], ["3GHz", 0.1]]\n'


def test_a_contribution_over_frequency_counts_with_its_largest_in_the_band(tmp_path: Path) -> None:
    """The band is 0.8 to 2 GHz; its row at 1 GHz lies in it. Above it scipy over log f."""
    held = read(tmp_path, FILE.replace("value = 0.3\n", TABLE))
    assert held.contributions[0][1].value == 0.7
    path = tmp_path / "calibration.toml"
    above = {"b": Band("b", 1.5e9, 2e9)}
    line = load_chain(path, [Channel("x", "x", "b")], above).contributions[0][1]
    by_scipy = interp1d(np.log([1e9, 3e9]), [0.7, 0.1])(np.log(1.5e9))
    assert line.value == pytest.approx(float(by_scipy))


@pytest.mark.parametrize(
    ("lines", "words"),
    [
        (TABLE + "value = 0.3\n", "value: stands beside table; give one of the two"),
        (TABLE.replace("700MHz", "900MHz"), "contribution[2].table: 'mismatch' covers 900 MHz to"),
        (TABLE.replace("0.2", "-0.2"), "table: an uncertainty of -0.2; it is zero or more"),
        (TABLE.replace("0.7", "31"), "table: times its sensitivity it is beyond 30 dB"),
        (TABLE.replace("1GHz", "5GHz"), "table: 3 GHz stands out of order"),
    ],
)
def test_what_a_table_of_a_contribution_cannot_be(tmp_path: Path, lines: str, words: str) -> None:
    with pytest.raises(CalibrationError) as caught:
        read(tmp_path, FILE.replace("value = 0.3\n", lines))
    assert words in str(caught.value)


@pytest.mark.parametrize("name", ["", " ", "drift (assumed)"])
def test_a_written_line_does_not_pass_for_an_assumed_one(tmp_path: Path, name: str) -> None:
    with pytest.raises(CalibrationError, match="contribution\\[2\\].name: .* is not a name"):
        read(tmp_path, FILE.replace('name = "mismatch"', f'name = "{name}"'))


UNEVEN = [[-1.0, 0.0], [0.0, 2.0], [1.0, 0.0]]


def test_a_distribution_from_a_table(tmp_path: Path) -> None:
    """A triangle of half width 1: u is 1 over the root of six (GUM 4.3.9)."""
    text = FILE.replace("value = 0.3\n", f"points = {UNEVEN}\n")
    line = read(tmp_path, text.replace('"u_shaped"', '"tabulated"')).contributions[0][1]
    assert line.u == pytest.approx(1 / math.sqrt(6))


@pytest.mark.parametrize("lines", ["reflection = [0.2, 0.1]", "vswr = [1.5, 1.2222222222]"])
def test_mismatch_of_two_sides_of_a_joint(tmp_path: Path, lines: str) -> None:
    """By hand: 20 log(1 - 0.2 * 0.1), over root two (GUM H.1.3.4); VSWR 1.5 reflects 0.2."""
    line = read(tmp_path, FILE.replace("value = 0.3", lines)).contributions[0][1]
    assert line.u == pytest.approx(-20 * math.log10(1 - 0.02) / math.sqrt(2), rel=1e-6)


@pytest.mark.parametrize(
    ("lines", "words"),
    [
        ("reflection = [0.2, 1.0]", "reflection: a reflection of 1; must be from 0 to below 1"),
        ("vswr = [0.9, 1.5]", "vswr: a standing wave ratio of 0.9; must be 1 or more"),
        ("vswr = [1.5]", "vswr: [1.5] is not two numbers"),
        ('reflection = [0.1, "a"]', "reflection: [0.1, 'a'] is not two numbers"),
        (f"points = {UNEVEN}", "points: is for distribution = 'tabulated'; it is 'u_shaped'"),
        ("value = 1\nvswr = [1.5, 2]", "value: stands beside vswr"),
    ],
)
def test_what_a_mismatch_cannot_be(tmp_path: Path, lines: str, words: str) -> None:
    with pytest.raises(CalibrationError) as caught:
        read(tmp_path, FILE.replace("value = 0.3", lines))
    assert words in str(caught.value)


@pytest.mark.parametrize(
    ("lines", "words"),
    [
        ("value = 0.3", "points: missing; a tabulated distribution needs them"),
        ("points = [[0, 1], [1, 1]]", "points: their mean is 0.5, not zero"),
        ("points = [[0, 1]]", "points: must be a list of 2 to"),
    ],
)
def test_what_points_cannot_be(tmp_path: Path, lines: str, words: str) -> None:
    text = FILE.replace("value = 0.3", lines).replace('"u_shaped"', '"tabulated"')
    with pytest.raises(CalibrationError) as caught:
        read(tmp_path, text)
    assert "calibration.toml: contribution[2]." in str(caught.value)
    assert words in str(caught.value)


@pytest.mark.parametrize("day", ["9999-12-31", '"9999-12-31"', "2262-01-01"])
def test_a_due_day_that_no_clock_here_reaches_is_told(tmp_path: Path, day: str) -> None:
    """64 bits of nanoseconds end on 2262-04-11; the day after 9999-12-31 does not exist."""
    text = re.sub("(?m)^due = .*$", f"due = {day}", FILE)
    assert text != FILE
    with pytest.raises(CalibrationError, match="calibration.due: .* is too far ahead; the last"):
        read(tmp_path, text)


def test_the_last_day_is_taken(tmp_path: Path) -> None:
    held = read(tmp_path, re.sub("(?m)^due = .*$", "due = 2261-12-31", FILE))
    assert held.due_utc_ns is not None
    assert held.due_utc_ns < 2**63


@pytest.mark.parametrize("frequency", ["1e-300", '"1e-300Hz"', "0", "-1", "1e300", "inf", "nan"])
def test_a_table_does_not_begin_at_nothing(tmp_path: Path, frequency: str) -> None:
    text = FILE.replace('["700MHz"', f"[{frequency}", 1)
    assert text != FILE
    with pytest.raises(CalibrationError, match="row 1: .* not a (frequency|number)"):
        read(tmp_path, text)
