"""What fieldsill check notes about a band and a temperature, and bands that are not received."""

from __future__ import annotations

import shutil
from dataclasses import replace
from pathlib import Path

import pytest

from hardware import settings_for
from monitor.checks import Finding, compare_bands, findings, refuse_future
from monitor.config import Site, load_site
from monitor.core.errors import CalibrationError, ConfigError

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
BINS_HZ = 1.92e6 / 1024
NOW_NS = 1_790_000_000_000_000_000
"""In September 2026."""


def example(kind: str) -> Site:
    """The site of an example."""
    return load_site(EXAMPLES / f"{kind}-site.toml")


def noted(site: Site, where: str) -> list[Finding]:
    """What is found about one thing; the front end is left out."""
    return [found for found in findings(site, NOW_NS, lambda _: []) if found.where == where]


@pytest.mark.parametrize(
    ("outside", "words", "ok"),
    [
        ("undeclared", "700-2700: undeclared: nothing will ever conform", False),
        ("filter", "700-2700: a filter keeps out signals outside it", True),
        ("survey", "700-2700: a survey rules out signals outside it", True),
    ],
)
def test_what_rules_out_signals_beyond_a_band_is_said(outside: str, words: str, ok: bool) -> None:
    site = example("detector-board")
    bands = {name: replace(band, outside=outside) for name, band in site.bands.items()}
    assert noted(replace(site, bands=bands), "band.outside") == [Finding("band.outside", words, ok)]


def test_each_band_is_asked() -> None:
    texts = [found.text for found in noted(example("iq-file"), "band.outside")]
    assert [text.split(":")[0] for text in texts] == ["lower half", "upper half"]


@pytest.mark.parametrize(
    ("kind", "span"),
    [("text-lines", "0 and 45"), ("level-series", "-33 and 55"), ("iq-file", "0 and 40")],
)
def test_a_sensor_that_tells_no_temperature_is_noted(kind: str, span: str) -> None:
    (found,) = noted(example(kind), "sensor")
    assert found.text == (
        f"tells no temperature; whether it is between {span} °C is not known: nothing will conform"
    )
    assert not found.ok


def test_a_board_tells_its_temperature() -> None:
    assert noted(example("detector-board"), "sensor") == []


def test_the_example_of_a_recording_names_the_bands_it_receives(tmp_path: Path) -> None:
    for path in EXAMPLES.glob("iq-file-*"):
        shutil.copy(path, tmp_path)
    (tmp_path / "recording.cu8").write_bytes(bytes(4096))
    site = load_site(tmp_path / "iq-file-site.toml")
    settings = settings_for(site.sensor_kind, site.sensor_options, tmp_path)
    compare_bands(site, settings.bands_hz, settings.bin_hz)
    elsewhere = settings_for(
        site.sensor_kind, {**site.sensor_options, "centre_hz": 868e6}, tmp_path
    )
    with pytest.raises(ConfigError) as caught:
        compare_bands(site, elsewhere.bands_hz, elsewhere.bin_hz)
    text = str(caught.value)
    assert "band 'lower half': 2644.1 to 2644.99 MHz" in text
    assert "sensor.bands[1] round the recording's centre is 867.1 to 867.99 MHz" in text
    assert "\n" not in text


HALVES = ((2644.1e6, 2644.99e6), (2645.01e6, 2645.9e6))


@pytest.mark.parametrize("edge", range(4))
@pytest.mark.parametrize("sign", [-1, 1])
def test_an_edge_may_be_off_by_a_bin_and_no_more(edge: int, sign: int) -> None:
    site = example("iq-file")

    def moved(by_hz: float) -> list[tuple[float, float]]:
        edges = [hz for band in HALVES for hz in band]
        edges[edge] += sign * by_hz
        return [(edges[0], edges[1]), (edges[2], edges[3])]

    compare_bands(site, moved(0.99 * BINS_HZ), BINS_HZ)
    with pytest.raises(ConfigError, match=rf"sensor.bands\[{1 + edge // 2}\]"):
        compare_bands(site, moved(1.01 * BINS_HZ), BINS_HZ)


def test_bands_that_changed_places_are_refused() -> None:
    with pytest.raises(ConfigError, match="band 'lower half'"):
        compare_bands(example("iq-file"), HALVES[::-1], BINS_HZ)


def test_a_channel_without_a_band_of_its_own_is_refused() -> None:
    with pytest.raises(ConfigError, match="sensor.bands: 1 bands for 2 channels"):
        compare_bands(example("iq-file"), HALVES[:1], BINS_HZ)


def test_a_sensor_without_bands_has_none_to_compare() -> None:
    assert compare_bands(example("detector-board"), None, 0.0) is None


def test_an_examples_figures_are_noted_as_invented() -> None:
    texts = [found.text for found in noted(example("detector-board"), "calibration")]
    assert [text for text in texts if "invented" in text] == [
        "figures of an example, invented: nothing will ever conform; once every figure and every"
        " name is yours, take out invented = true"
    ]


@pytest.mark.parametrize("hours", [-14.5, -13.5])
def test_a_calibration_of_tomorrow_is_one_of_today_elsewhere_and_of_later_none(
    hours: float,
) -> None:
    """It is dated 2024-09-14; the earliest time zone is 14 h ahead of UTC."""
    now_ns = 1_726_272_000_000_000_000 + round(hours * 3600e9)
    site = example("detector-board")
    if hours > -14:
        assert refuse_future(site, now_ns) is None
        return
    with pytest.raises(CalibrationError) as caught:
        refuse_future(site, now_ns)
    assert str(caught.value) == (
        "detector-board-calibration.toml: calibration.date: 2024-09-14 lies in the future, this"
        " machine's clock says 2024-09-13; look at the date or the clock"
    )
    with pytest.raises(CalibrationError, match="lies in the future"):
        list(findings(site, now_ns, lambda _: []))


@pytest.mark.parametrize(
    ("region", "words", "ok"),
    [
        ("far", "far field", True),
        ("radiating_near", "nothing will conform", False),
        ("reactive_near", "no verdict from E alone", False),
        ("undeclared", "nothing will ever conform", False),
    ],
)
def test_only_the_far_field_lets_anything_conform(region: str, words: str, ok: bool) -> None:
    (found,) = noted(replace(example("detector-board"), field_region=region), "site.field_region")
    assert words in found.text
    assert found.ok is ok
