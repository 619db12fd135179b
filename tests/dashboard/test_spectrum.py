"""The page of the spectrum: its drawing, its words, and that it needs neither colour nor script."""

from __future__ import annotations

import html
import re
from pathlib import Path
from typing import Any

import pytest

from dashboard import spectrum
from tests.dashboard.browser import needs_browser
from tests.dashboard.fakes import FakeDaemon, FakeRecord, app_over, snapshot
from tests.dashboard.test_browser import CUT_WORDS, WIDE_PARTS, browser, served

__all__ = ["browser", "served"]  # fixtures

MEAN = [-70.0] * 127 + [None, None] + [-70.0] * 127
SCOPE = {"set": "icnirp-2020", "scope": "whole_body", "averaging_s": 1800, "verified": True}


def place(**changes: Any) -> dict[str, Any]:
    """A place of the tuner with a carrier of 40 dB over the floor from 868 to 868.1 MHz."""
    mean = list(MEAN)
    mean[96:104] = [-30.0] * 8
    most = [None if level is None else level + 6.0 for level in mean]
    return {
        "low_hz": 866.8e6, "high_hz": 870.0e6, "age_s": 1.0, "seconds": 3.0, "looked_s": 0.36,
        "piece_s": 0.00032, "mean_dbfs": mean, "max_dbfs": most,
        "outside": {"dbfs": -46.0, "strongest_dbfs": -69.9, "strongest_hz": 869.73e6},
    } | changes  # fmt: skip


def band(name: str, low_mhz: float, high_mhz: float, share: float, **changes: Any) -> dict:
    """A named band; its share of the occupational limit is a fifth of that of the public's."""
    return {
        "name": name, "low_hz": low_mhz * 1e6, "high_hz": high_mhz * 1e6, "mean_dbfs": -16.32,
        "max_dbfs": -12.0, "e_mean": 0.184, "e_max": 0.31, "shares": [share / 5, share],
        "flags": [],
    } | changes  # fmt: skip


def document(**changes: Any) -> dict[str, Any]:
    return {
        "utc": "2025-03-01T12:00:00Z", "simulated": False, "connected": True,
        "site": {"name": "Harrowgate Mill", "place": "Tern Hollow", "occupancy": "public"},
        "places": [place()], "seconds": 2.9,
        "bands": [band("lower carrier", 867.9, 868.6, 0.3), band("upper", 869.0, 869.1, 0.1)],
        "scopes": [SCOPE | {"population": one} for one in ("occupational", "general_public")],
    } | changes  # fmt: skip


def text_of(folder: Path, shown: object, code: int = 200) -> str:
    daemon = FakeDaemon(snapshot())
    daemon.spectrum = shown  # type: ignore[assignment]
    answer = app_over(daemon, FakeRecord(), folder).test_client().get("/spectrum")
    assert answer.status_code == code
    body = answer.text[answer.text.index("<main") : answer.text.index("</main")]
    return re.sub(r"\s+", " ", html.unescape(re.sub(r"<[^>]+>", "", body)))


def test_steps_stand_where_their_levels_are() -> None:
    """Source: 256 equal steps over 3.2 MHz; levels from -70 to -24, so whole tens -70 to -20."""
    frame = spectrum.WIDE
    drawn = spectrum.draw(place(), [], frame)
    width = frame.x1 - frame.left
    start = re.match(r"M([\d.]+) ([\d.]+)H", drawn.mean)
    assert start
    assert float(start[1]) == frame.left
    assert float(start[2]) == frame.y1
    assert drawn.mean.count("M") == 2  # broken once, in the middle
    assert drawn.mean.count("H") == 254
    rise = re.search(r"H([\d.]+)V([\d.]+)H", drawn.mean.replace(f"V{float(frame.y1)}", ""))
    assert rise
    assert float(rise[1]) == pytest.approx(frame.left + width * 96 / 256, abs=0.1)
    assert float(rise[2]) == pytest.approx(frame.y1 - (frame.y1 - frame.top) * 40 / 50, abs=0.1)
    assert [text for _, text in drawn.y_ticks] == ["−70", "−60", "−50", "−40", "−30", "−20"]
    assert "867" in [text for _, text in drawn.x_ticks]


def test_brackets_stand_at_the_edges_and_bear_names_or_numbers() -> None:
    bands = [band("lower carrier", 867.9, 868.6, 0), band("upper", 869.0, 869.1, 0),
             band("far away", 100.0, 101.0, 0)]  # fmt: skip
    drawn = spectrum.draw(place(), bands, spectrum.WIDE)
    left, width = spectrum.WIDE.left, spectrum.WIDE.x1 - spectrum.WIDE.left
    one, other = drawn.brackets
    assert one.x0 == pytest.approx(left + width * 1.1 / 3.2, abs=0.1)
    assert one.x1 == pytest.approx(left + width * 1.8 / 3.2, abs=0.1)
    assert (one.text, other.text) == ("1 lower carrier", "2")
    assert one.row != other.row


def test_a_place_without_a_level_is_drawn_empty() -> None:
    empty = spectrum.draw(place(mean_dbfs=[None] * 256, max_dbfs=[None] * 256), [], spectrum.NARROW)
    assert (empty.mean, empty.most) == ("", "")


def test_the_scope_is_the_strictest_of_the_places_own_population() -> None:
    shown = document()
    assert spectrum.governing(shown, controlled=False) == 1
    assert spectrum.governing(shown, controlled=True) == 0
    assert spectrum.governing(document(scopes=[]), controlled=False) is None
    first, second = spectrum.band_lines(shown, 1)
    assert first.share == "0.30 of the limit (30 %)"
    assert (first.part, second.part) == ("75 % of all named bands", "25 % of all named bands")
    assert first.bar == 0.3
    over = document(bands=[band("a", 868, 869, 7.0)])
    (line,) = spectrum.band_lines(over, 1)
    assert (line.bar, line.part) == (1.0, "")


def test_the_page_says_what_it_shows_and_what_it_does_not(tmp_path: Path) -> None:
    text = text_of(tmp_path, document())
    assert "Outside the named bands: −46.0 dB in all" in text
    assert "strongest near 869.73 MHz, −69.9 dB" in text
    assert "12 % of that time was looked at" in text
    assert "these are no verdicts" in text
    assert "ICNIRP 2020, general public, whole body, 30 min" in text
    assert "0.30 of the limit (30 %); 75 % of all named bands" in text
    assert "Average −16.3 dB, strongest reading −12.0 dB; field strength 0.18 V/m." in text
    assert "pieces of 0.3 ms" in text
    assert "but it is in the figures below" in text
    assert "ago" not in text


def test_of_places_in_turn_nothing_is_said_of_the_time_at_another(tmp_path: Path) -> None:
    """Source: by hand; 0.012 of 3 s are 0.4 %."""
    text = text_of(tmp_path, document(places=[place(looked_s=0.012), place()]))
    assert "Less than 1 % of that time was looked at" in text
    assert "what was measured while the receiver was tuned here, no more" in text
    assert "but it is in the figures" not in text


def test_old_missing_and_doubtful_things_are_told(tmp_path: Path) -> None:
    old = document(places=[place(age_s=75.0, outside=None)], connected=False)
    text = text_of(tmp_path, old)
    assert "not connected; this is the last that it heard" in text
    assert "Over 3.0 s, 75 s ago" in text
    assert "Nothing of this part lies outside the named bands." in text
    unread = band("b", 868, 869, 0.0, shares=[None, None], e_mean=None, flags=["converter clipped"])
    text = text_of(tmp_path, document(bands=[unread]))
    assert "no figure" in text
    assert "With reservations: converter clipped." in text
    early = {"name": "b", "low_hz": 868e6, "high_hz": 869e6}
    text = text_of(tmp_path, document(bands=[early], seconds=None))
    assert "Average no figure dB" in text
    assert "There is no spectrum yet" in text_of(tmp_path, document(places=[]))
    assert "it gives the level of each band as a whole" in text_of(tmp_path, None)


def test_a_daemon_that_is_away_is_named(tmp_path: Path) -> None:
    app = app_over(FakeDaemon(None), FakeRecord(), tmp_path)
    answer = app.test_client().get("/spectrum")
    assert answer.status_code == 503
    assert "the monitor does not answer" in answer.text


def test_simulated_data_are_called_so_and_the_api_gives_the_document(tmp_path: Path) -> None:
    daemon = FakeDaemon(snapshot())
    daemon.spectrum = document(simulated=True)
    client = app_over(daemon, FakeRecord(), tmp_path).test_client()
    page = client.get("/spectrum").text
    assert "Invented data." in page
    assert page.count(">invented data<") == 2  # in both sizes of the drawing
    assert client.get("/api/spectrum").json == {"spectrum": document(simulated=True)}
    assert "<script" not in page


MANY = [band(f"service number {i}", 866.9 + i * 0.15, 867.0 + i * 0.15, 0.01) for i in range(20)]


@needs_browser
@pytest.mark.parametrize("width", [390, 1280])
@pytest.mark.parametrize("bands", [None, MANY])
def test_it_fits_and_can_be_read(width: int, bands: list | None, browser: Any, served: Any) -> None:
    served.daemon.spectrum = document(**({"bands": bands} if bands else {}), simulated=True)
    browser.open(served.address("/spectrum"), width=width, script=False)
    assert browser.value("document.documentElement.scrollWidth") <= width
    assert browser.value(WIDE_PARTS) == []
    assert browser.value(CUT_WORDS) == []
    sizes = browser.value(
        "[...document.querySelectorAll('svg text')].filter(t => t.getBoundingClientRect().width)"
        ".map(t => t.getScreenCTM().a * parseFloat(getComputedStyle(t).fontSize))"
    )
    assert min(sizes) >= 11


@needs_browser
def test_the_lines_differ_without_colour(browser: Any, served: Any) -> None:
    served.daemon.spectrum = document()
    browser.open(served.address("/spectrum"), width=1280)

    def stroke(css: str) -> float:
        return float(browser.value(
            f"parseFloat(getComputedStyle(document.querySelector('.wide {css}')).strokeWidth)"
        ))  # fmt: skip

    assert stroke(".mean-steps") >= 2 * stroke(".most-steps")
