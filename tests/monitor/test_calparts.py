"""The lines of the budget in a calibration file, and the one line that each mistake gets."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

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
