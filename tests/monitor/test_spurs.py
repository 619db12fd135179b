"""[[detector.spur]]: read, refused, and handed to the receiver."""

from __future__ import annotations

from pathlib import Path

import pytest

from monitor import wiring
from monitor.calparts import read
from monitor.config import load_site
from monitor.core.errors import CalibrationError
from monitor.detectorkinds import Spur
from monitor.spurs import cleared, covered_hz, spurs_of
from tests.cli.command import run

EXAMPLES = Path("hardware/examples")
SPUR = """
[[detector.spur]]
frequency = "868.35MHz"
width = "4kHz"
level_dbm = -88
"""


def site_with(folder, spurs):
    text = (EXAMPLES / "iq-stream-calibration.toml").read_text()
    assert "\n[[element]]" in text
    text = text.replace("\n[[element]]", spurs + "\n[[element]]", 1)
    (folder / "iq-stream-calibration.toml").write_text(text)
    (folder / "site.toml").write_text((EXAMPLES / "iq-stream-site.toml").read_text())
    return load_site(folder / "site.toml")


def test_the_receiver_is_told_where_its_own_lines_are(tmp_path):
    site = site_with(tmp_path, SPUR)
    settings = wiring.sensor_settings(site)
    told = cleared(settings, site, wiring.chain_for(site, settings))
    (place,) = told.scheme.tunes
    ((low, high),) = place.spurs
    assert place.centre_hz + low == pytest.approx(868.348e6)
    assert place.centre_hz + high == pytest.approx(868.352e6)
    assert not settings.scheme.tunes[0].spurs


def test_spurs_of_another_gain_step_are_not_left_out(tmp_path):
    text = (EXAMPLES / "iq-stream-calibration.toml").read_text()
    steps = "".join(
        f'[[detector.step]]\ngain = "{gain}"\ntable = [["800MHz", -31.7], ["1GHz", -31.7]]\n'
        for gain in ("19.7", "9.0")
    )
    text = text.replace("dbfs_to_dbm = -12.0\n", "")
    other = SPUR.replace("level_dbm", 'gain = "9.0"\nlevel_dbm').replace("868.35", "868.5")
    mine = SPUR.replace("level_dbm", 'gain = "19.7"\nlevel_dbm')
    text = text.replace("\n[[element]]", "\n" + steps + mine + other + "\n[[element]]", 1)
    (tmp_path / "iq-stream-calibration.toml").write_text(text)
    site_text = (EXAMPLES / "iq-stream-site.toml").read_text()
    for band in ("lower", "upper"):
        named = f'band = "{band} carrier"'
        site_text = site_text.replace(named, named + '\ngain = "19.7"')
    (tmp_path / "site.toml").write_text(site_text)
    site = load_site(tmp_path / "site.toml")
    assert spurs_of(read(site.calibration), site) == ((868.348e6, 868.352e6),)


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('"4kHz"', '"310kHz"', "detector.spur: spurs cover 52% of band 'lower carrier'"),
        ('width = "4kHz"\n', "", "detector.spur[1].width: missing"),
        ("level_dbm = -88", 'level_dbm = -88\ngain = "7"', "detector.spur[1].gain: '7' is not one"),
        ('"4kHz"', '"900MHz"', "detector.spur[1].width: is no less than the frequency"),
        ("level_dbm", "level", "detector.spur[1].level_dbm: missing"),
    ],
)  # fmt: skip
def test_mistakes_are_one_line(tmp_path, old, new, words):
    assert old in SPUR
    site = site_with(tmp_path, SPUR.replace(old, new))
    with pytest.raises(CalibrationError) as caught:
        spurs_of(read(site.calibration), site)
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_levels_in_dbm_have_no_spurs_to_leave_out(tmp_path):
    site = site_with(tmp_path, SPUR)
    text = site.calibration.read_text().replace('quantity = "dbfs"', 'quantity = "dbm"')
    site.calibration.write_text(text.replace("dbfs_to_dbm = -12.0\n", ""))
    with pytest.raises(CalibrationError, match=r'detector.spur: only where quantity is "dbfs"'):
        read(site.calibration)


def test_spurs_that_overlap_count_once():
    spurs = [Spur(100.0, 20.0, -80.0), Spur(105.0, 20.0, -80.0), Spur(200.0, 10.0, -80.0)]
    assert covered_hz(spurs, 95.0, 150.0) == pytest.approx(20.0)


def test_calibration_show_prints_them(tmp_path, capsys):
    site = site_with(tmp_path, SPUR)
    answer = run(capsys, ["calibration", "show", site.calibration])
    assert "  spur 868.35 MHz, 4 kHz wide, -88 dBm: left out of bands" in answer.out
    (detector,) = run(capsys, ["calibration", "show", site.calibration, "--json"]).document[
        "detectors"
    ]
    assert detector["spurs"][0]["width_hz"] == 4000.0
