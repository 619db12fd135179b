"""A probe of the whole field, calibrated as a whole: one channel, no component, isotropy needed."""

from __future__ import annotations

from pathlib import Path

import pytest

from monitor.calfile import load_chain
from monitor.calparts import axes_of, read
from monitor.calterms import needed
from monitor.core.errors import CalibrationError
from monitor.core.flags import Flag
from monitor.sitebands import Band, Channel
from tests.cli.command import run
from tests.monitor.test_detectorfile import PROBE, with_detector

BAND = {"b": Band("b", 8e8, 2e9)}
TYPE = 'type = "probe"\n'


def _file(folder: Path, more: str = "isotropic = true\n") -> Path:
    path = folder / "calibration.toml"
    path.write_text(with_detector(PROBE).replace(TYPE, TYPE + more), encoding="utf-8")
    return path


@pytest.mark.parametrize("axis", ["", "x"])
def test_one_channel_sees_the_whole_field(tmp_path: Path, axis: str) -> None:
    whole = load_chain(_file(tmp_path), [Channel("total", axis, "b")], BAND)
    assert not whole.flags & Flag.COMPONENT_ONLY
    for survey in ("undeclared", "survey"):
        kinds = needed(1, survey, isotropic=True)
        assert "isotropy" in kinds
        assert not {"cross_axis", "polarisation"} & set(kinds)
    part = load_chain(_file(tmp_path, ""), [Channel("x", "x", "b")], BAND)
    assert part.flags & Flag.COMPONENT_ONLY


@pytest.mark.parametrize(
    ("more", "words"),
    [
        ('isotropic = true\naxis = "x"\n', "stands beside isotropic"),
        ("isotropic = 1\n", "isotropic"),
    ],
)
def test_what_such_an_element_cannot_say(tmp_path: Path, more: str, words: str) -> None:
    with pytest.raises(CalibrationError, match=words):
        read(_file(tmp_path, more))


def test_an_antenna_is_never_isotropic(tmp_path: Path) -> None:
    path = tmp_path / "calibration.toml"
    text = with_detector(PROBE).replace(TYPE, 'type = "antenna"\nisotropic = true\n')
    path.write_text(text, encoding="utf-8")
    with pytest.raises(CalibrationError, match="is for a probe calibrated as a whole"):
        read(path)


def test_the_whole_field_is_not_counted_twice(tmp_path: Path) -> None:
    channels = [Channel(axis, axis, "b") for axis in "xy"]
    with pytest.raises(CalibrationError, match="band 'b' has 2 channels, which are summed"):
        load_chain(_file(tmp_path), channels, BAND)
    assert axes_of(read(_file(tmp_path))) == "x"


def test_field_and_show_speak_of_no_component(
    capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    path = _file(tmp_path)
    asked = ["field", "--calibration", path, "--frequency", "900MHz", "--v-per-m", "5"]
    said = run(capsys, asked).out
    assert "fewer than three axes" not in said
    assert "One moment, not an average" in said
    assert "fewer than three axes" not in run(capsys, [*asked, "--json"]).document["flags"]
    shown = run(capsys, ["calibration", "show", path, "--json"])
    assert shown.document["axes"] == ["x"]
    assert "fewer than three axes" not in shown.document["flags"]
