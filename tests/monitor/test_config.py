"""Site files: what is read, and the one line that each mistake gets."""

from __future__ import annotations

from pathlib import Path

import pytest

from monitor.config import Band, Channel, default_site_path, load_site
from monitor.core.alarms import AlertRule
from monitor.core.errors import ConfigError, DeviceError

ROOT = Path(__file__).parents[2]
EXAMPLES = ROOT / "hardware" / "examples"

SITE = """
[site]
name = "Roof"
place = "Harrowgate Mill"
simulated = true
occupancy = "public"
field_region = "far"

[record]
path = "data/fieldsill.db"

[sensor]
kind = "detector_board"
device = "/dev/ttyUSB7"
hold_s = 3
calibration = "calibration.toml"

[[band]]
name = "main"
low = "700MHz"
high = 2.7e9

[[channel]]
name = "x"
axis = "x"
band = "main"

[[channel]]
name = "y"
axis = "y"
band = "main"

[limits]
sets = ["icnirp-2020", "fcc-1.1310"]

[[alert]]
name = "half"
set = "icnirp-2020"
population = "general_public"
ratio = 0.5
returns_at = 0.4
delay_s = 10
"""


def written(folder: Path, text: str) -> Path:
    """A site file of that text."""
    path = folder / "site.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_a_site_is_read_as_it_is_written(tmp_path: Path) -> None:
    site = load_site(written(tmp_path, SITE))
    assert (site.name, site.place, site.simulated) == ("Roof", "Harrowgate Mill", True)
    assert (site.occupancy, site.field_region) == ("public", "far")
    assert site.bands == {"main": Band("main", 7e8, 2.7e9)}
    assert site.channels == (Channel("x", "x", "main"), Channel("y", "y", "main"))
    assert site.limit_sets == ("icnirp-2020", "fcc-1.1310")
    assert site.alerts == (
        AlertRule("half", "icnirp-2020", "general_public", "", 0.5, 0.4, 10.0, 0.0),
    )
    assert (site.sensor_kind, site.hold_s) == ("detector_board", 3.0)
    assert dict(site.sensor_options) == {"device": "/dev/ttyUSB7"}
    assert (site.commit_s, site.silence_after_s) == (10.0, 60.0)
    assert (site.host, site.port) == ("127.0.0.1", 8080)


def test_a_band_says_what_it_carries(tmp_path: Path) -> None:
    more = "high = 2.7e9\nsignal = 'noise'\nsignal_bandwidth = '5MHz'\npolarisation = 'survey'"
    band = load_site(written(tmp_path, SITE.replace("high = 2.7e9", more))).bands["main"]
    assert (band.signal, band.signal_bandwidth_hz, band.polarisation) == ("noise", 5e6, "survey")


def test_paths_are_relative_to_the_site_file(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    written(tmp_path, SITE)
    monkeypatch.chdir(tmp_path)
    site = load_site("site.toml")
    assert site.record_path == tmp_path / "data" / "fieldsill.db"
    assert site.control_path == tmp_path / "data" / "fieldsill.sock"
    assert site.calibration == tmp_path / "calibration.toml"
    monkeypatch.chdir("/")
    assert site.path.is_file()


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("[site]", "[site]\ncolour = 1", "site.toml: site.colour: unknown key"),
        ("[record]", "[recrod]", "site.toml: record: missing"),
        ("[limits]", "[extra]\n[limits]", "site.toml: extra: unknown key"),
        ('"Roof"', '" "', "site.toml: site.name: is empty"),
        ('"Roof"', "5", "site.toml: site.name: 5 is not a text"),
        ("simulated = true", "", "site.toml: site.simulated: missing"),
        ('"public"\n', '"nobody"\n', "site.occupancy: 'nobody' is not one of public, controlled"),
        ('"far"', '"near"', "site.field_region: 'near' is not one of"),
        ("hold_s = 3", "hold_s = 0", "sensor.hold_s: 0 is outside"),
        ("hold_s = 3", "hold_s = nan", "sensor.hold_s: nan is outside"),
        ('"700MHz"', '"700Volt"', "band[1].low: '700Volt': not a frequency"),
        ('"700MHz"', "true", "band[1].low: True is not a frequency"),
        ("high = 2.7e9", "high = 2.7e9\noutside = 'hope'", "band[1].outside: 'hope' is not one of"),
        ('"700MHz"', '"3GHz"', "band[1].high: must be above low"),
        ("high = 2.7e9", "high = 2.7e9\nsignal = 'fm'", "band[1].signal: 'fm' is not one of"),
        (
            "high = 2.7e9",
            "high = 2.7e9\nsignal_bandwidth = '2.1GHz'",
            "band[1].signal_bandwidth: is wider than the band",
        ),
        ('axis = "y"', 'axis = "x"', "channel[2].axis: band 'main' has several channels"),
        ('axis = "y"', "", "channel[2].axis: band 'main' has several channels"),
        ('axis = "y"', 'axis = "w"', "channel[2].axis: 'w' is not one of"),
        ('name = "y"', 'name = "x"', "channel[2].name: 'x' is there already"),
        ('"y"\nband = "main"', '"y"\nband = "side"', "channel[2].band: 'side' is not one of main"),
        ('["icnirp-2020", "fcc-1.1310"]', "[]", "limits.sets: must be a list"),
        ('"fcc-1.1310"', '"icnirp-2020"', "limits.sets: names a set twice"),
        ('set = "icnirp-2020"', 'set = "eu"', "alert[1].set: 'eu' is not one of icnirp-2020, fcc"),
        ("returns_at = 0.4", "returns_at = 0.5", "alert[1].returns_at: 0.5 must be below ratio"),
        ("ratio = 0.5", "ratio = -1", "alert[1].ratio: -1 is outside"),
        ("delay_s = 10", "delay = 10", "alert[1].delay: unknown key; did you mean delay_s"),
        ("[site]", "[site", "site.toml: not valid TOML"),
    ],
)
def test_each_mistake_is_one_line_that_names_its_place(
    tmp_path: Path, old: str, new: str, words: str
) -> None:
    assert SITE.count(old) >= 1
    with pytest.raises(ConfigError) as caught:
        load_site(written(tmp_path, SITE.replace(old, new, 1)))
    text = str(caught.value)
    assert words in text
    assert "\n" not in text
    assert caught.value.exit_code == 2


def test_a_band_without_a_channel_is_a_mistake(tmp_path: Path) -> None:
    text = SITE + '[[band]]\nname = "high"\nlow = "3GHz"\nhigh = "4GHz"\n'
    with pytest.raises(ConfigError, match="band: 'high' has no channel"):
        load_site(written(tmp_path, text))


def test_bands_that_overlap_would_count_a_signal_twice(tmp_path: Path) -> None:
    text = SITE + '[[band]]\nname = "b"\nlow = "2GHz"\nhigh = "4GHz"\n'
    with pytest.raises(ConfigError, match=r"band\[2\].low: overlaps band 'main'"):
        load_site(written(tmp_path, text))


def test_bands_may_touch(tmp_path: Path) -> None:
    text = (
        SITE
        + '[[band]]\nname = "b"\nlow = "2.7GHz"\nhigh = "4GHz"\n'
        + '[[channel]]\nname = "b"\nband = "b"\n'
    )
    site = load_site(written(tmp_path, text))
    assert site.channels[2] == Channel("b", "", "b")


@pytest.mark.parametrize("outside", ["filter", "survey", "undeclared"])
def test_what_rules_out_signals_beyond_a_band(tmp_path: Path, outside: str) -> None:
    text = SITE.replace("high = 2.7e9", f'high = 2.7e9\noutside = "{outside}"')
    assert load_site(written(tmp_path, text)).bands == {"main": Band("main", 7e8, 2.7e9, outside)}


def test_nothing_said_about_signals_beyond_a_band_is_undeclared(tmp_path: Path) -> None:
    assert load_site(written(tmp_path, SITE)).bands["main"].outside == "undeclared"


def test_a_site_file_that_is_not_there_is_wrong_input(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match="no site file .*none.toml") as caught:
        load_site(tmp_path / "none.toml")
    assert not isinstance(caught.value, DeviceError)


def test_a_site_file_that_is_no_text(tmp_path: Path) -> None:
    path = tmp_path / "site.toml"
    path.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(ConfigError, match="not UTF-8"):
        load_site(path)


def test_which_site_file_is_used(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("FIELDSILL_SITE", raising=False)
    assert default_site_path("/a/b.toml") == Path("/a/b.toml")
    (tmp_path / "site.toml").touch()
    assert default_site_path(None) == Path("site.toml")
    monkeypatch.setenv("FIELDSILL_SITE", "/from/environment.toml")
    assert default_site_path(None) == Path("/from/environment.toml")
    assert default_site_path("/a/b.toml") == Path("/a/b.toml")


@pytest.mark.skipif(Path("/etc/fieldsill/site.toml").exists(), reason="a site is installed here")
def test_without_any_site_file_the_places_are_named(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("FIELDSILL_SITE", raising=False)
    with pytest.raises(ConfigError) as caught:
        default_site_path(None)
    for part in ("site.toml", "/etc/fieldsill/site.toml", "hardware/examples", "rehearse"):
        assert part in str(caught.value)


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*-site.toml")), ids=lambda p: p.stem)
def test_every_example_is_a_site(path: Path) -> None:
    site = load_site(path)
    assert site.sensor_kind == path.stem.removesuffix("-site").replace("-", "_")
    assert site.calibration.is_file()
    assert not site.simulated
    assert {band.outside for band in site.bands.values()} == {"undeclared"}


def test_the_rehearsal_declares_its_filter(tmp_path: Path) -> None:
    text = (ROOT / "simulators" / "data" / "rehearsal-site.toml.in").read_text(encoding="utf-8")
    site = load_site(written(tmp_path, text.replace("{port}", "8080")))
    assert {band.outside for band in site.bands.values()} == {"filter"}
