"""The pages in a real browser: at both widths, with and without script, and when things die."""

from __future__ import annotations

import contextlib
import threading
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from waitress.server import create_server

from tests.dashboard.browser import Browser, needs_browser
from tests.dashboard.fakes import FakeDaemon, FakeRecord, alarm, app_over, controlled, snapshot

pytestmark = needs_browser

SHOWN = {
    "below": snapshot(),
    "over": snapshot(0.72, alarms=[alarm("unacknowledged")]),
    "limit": snapshot(1.3, alarms=[alarm("acknowledged")]),
    "controlled": controlled(0.31),
    "silent": snapshot(last_reading_age_s=300.0),
    "dead": None,
    "simulated": snapshot(simulated=True),
}
MONTH = "/history?averaging=1800&show=ratio&from=2025-02-01&to=2025-03-01"
WIDE_PARTS = (
    "[...document.querySelectorAll('body *')].filter(e => !e.closest('.skip, .spoken, .defs') &&"
    " e.getBoundingClientRect().right > innerWidth + 0.5).map(e => e.outerHTML.slice(0, 90))"
)

CUT_WORDS = (
    "[...document.querySelectorAll('svg text')].filter(t => t.getBoundingClientRect().width)"
    ".filter(t => { const a = t.getBoundingClientRect(), b = t.closest('svg')"
    ".getBoundingClientRect(); return a.left < b.left - 0.5 || a.right > b.right + 0.5 ||"
    " a.top < b.top - 0.5 || a.bottom > b.bottom + 0.5; }).map(t => t.textContent)"
)


class Served:
    """The pages on a free port; fails: every renewal is refused from now on."""

    def __init__(self, folder: Path) -> None:
        self.daemon = FakeDaemon(snapshot())
        self.record = FakeRecord()
        self.fails = False
        app = app_over(self.daemon, self.record, folder)
        app.before_request(lambda: ("", 500) if self.fails else None)
        self._server = create_server(app, host="127.0.0.1", port=0)
        threading.Thread(target=self._run, daemon=True).start()

    def _run(self) -> None:
        with contextlib.suppress(OSError):  # its sockets are closed under it by close()
            self._server.run()

    def address(self, path: str = "/") -> str:
        """The address of a page."""
        return f"{'http'}://127.0.0.1:{self._server.effective_port}{path}"

    def close(self) -> None:
        """Let the port go."""
        self._server.close()


@pytest.fixture(scope="module")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Browser]:
    opened = Browser(tmp_path_factory.mktemp("profile"))
    yield opened
    opened.close()


@pytest.fixture
def served(tmp_path: Path) -> Iterator[Served]:
    pages = Served(tmp_path)
    yield pages
    pages.close()


@pytest.mark.parametrize("width", [390, 1280])
@pytest.mark.parametrize("state", list(SHOWN))
def test_nothing_is_wider_than_the_page(
    state: str, width: int, browser: Browser, served: Served
) -> None:
    served.daemon.now = SHOWN[state]
    served.record.simulated = state == "simulated"
    for path in ("/", "/history", MONTH, "/history?from=2025-02-26T05:30&to=2025-03-01"):
        browser.open(served.address(path), width=width)
        assert browser.value("innerWidth") == width
        assert browser.value("document.documentElement.scrollWidth") <= width
        assert browser.value(WIDE_PARTS) == []
        assert browser.value(CUT_WORDS) == []


@pytest.mark.parametrize("width", [390, 1280])
def test_words_in_the_drawings_are_large_enough_to_read(
    width: int, browser: Browser, served: Served
) -> None:
    sizes = (
        "[...document.querySelectorAll('svg text')].filter(t => t.getBoundingClientRect().width)"
        ".map(t => t.getScreenCTM().a * parseFloat(getComputedStyle(t).fontSize))"
    )
    for path in ("/", "/history?averaging=1800&show=ratio"):
        browser.open(served.address(path), width=width)
        found = [size for size in browser.value(sizes) if size]
        assert len(found) >= 3
        assert min(found) >= 11


def test_the_level_on_screen_is_proportional_between_floor_and_ledge(
    browser: Browser, served: Served
) -> None:
    served.daemon.now = controlled(0.25)
    browser.open(served.address(), width=1280)

    def edge(css: str, side: str) -> float:
        return float(browser.value(
            f"document.querySelector('.recess {css}').getBoundingClientRect().{side}"
        ))  # fmt: skip

    floor, ledge = edge(".back", "bottom"), edge(".ledge", "top")
    level = edge('rect[fill="url(#strata)"]', "top")
    assert (floor - level) / (floor - ledge) == pytest.approx(0.25, abs=0.01)


def test_it_renews_itself_and_says_in_seconds_that_the_daemon_died(
    browser: Browser, served: Served
) -> None:
    browser.open(served.address(), width=1280)
    assert "Below the alert levels" in browser.value("document.querySelector('h1').textContent")
    served.daemon.now = snapshot(0.72, alarms=[alarm("unacknowledged")])
    browser.wait_for("document.querySelector('h1').textContent.includes('Over an alert')", 6)
    assert "Over an alert" in browser.value("document.getElementById('spoken').textContent")
    served.daemon.now = None
    took = browser.wait_for(
        "document.querySelector('h1').textContent.includes('No measurement since 11:59:57 UTC')", 6
    )
    assert took < 6
    assert browser.value("document.querySelectorAll('.boards').length") == 1


def test_a_page_that_lost_its_source_says_so_by_itself_and_recovers(
    browser: Browser, served: Served
) -> None:
    browser.open(served.address(), width=390)
    assert browser.value("document.getElementById('lost').hidden") is True
    served.fails = True
    browser.wait_for("!document.getElementById('lost').hidden", 6)
    said = browser.value("document.getElementById('lost').textContent")
    assert "This page has lost its source since" in said
    assert "says nothing about the field" in said
    served.fails = False
    browser.wait_for("document.getElementById('lost').hidden", 8)


def test_an_age_grows_between_renewals(browser: Browser, served: Served) -> None:
    browser.open(served.address(), width=1280)
    served.fails = True
    browser.wait_for("document.querySelector('.age').textContent === '5 s'", 6)
    assert browser.value("document.querySelector('.age').dataset.age") == "3.2"


def test_a_person_confirms_with_the_keyboard_alone(browser: Browser, served: Served) -> None:
    served.daemon.now = snapshot(0.72, alarms=[alarm("unacknowledged")])
    browser.open(served.address(), width=1280)
    for _ in range(12):
        browser.press("Tab")
        if browser.value("document.activeElement.id") == "confirm-1":
            break
    outline = browser.value("getComputedStyle(document.activeElement).outlineStyle")
    assert outline == "solid"
    browser.value("document.activeElement.click()")
    browser.wait_for("location.hash === '#alarms'", 6)
    assert served.daemon.asked == [{"do": "acknowledge", "key": "half"}]


def test_a_choice_is_not_taken_away_by_a_renewal(browser: Browser, served: Served) -> None:
    served.daemon.now = snapshot(0.72, alarms=[alarm("unacknowledged")])
    browser.open(served.address(), width=1280)
    browser.value("const s = document.querySelector('select'); s.focus(); s.value = '240'; 1")
    shown = "document.querySelector('.drawn').textContent"
    served.daemon.now = snapshot(0.73, alarms=[alarm("unacknowledged", text="changed")])
    browser.wait_for("document.querySelector('.level-text').textContent.includes('0.73')", 6)
    assert browser.value("document.querySelector('select').value") == "240"
    assert "Drawn" in browser.value(shown)


def test_without_script_everything_is_there(browser: Browser, served: Served) -> None:
    browser.open(served.address(), width=390, script=False)
    text = browser.value("document.body.innerText")
    assert "Below the alert levels" in text
    assert "0.31 of the limit (31 %)" in text
    browser.open(served.address("/history"), width=390, script=False)
    assert "Largest six-minute average" in browser.value("document.body.innerText")


@pytest.mark.parametrize("dark", [False, True])
def test_text_stands_out_from_its_ground(dark: bool, browser: Browser, served: Served) -> None:
    """Contrast of WCAG 2: at least 7 to 1 for running text, 4.5 to 1 for what is quieter."""
    browser.scheme(dark)
    try:
        browser.open(served.address(), width=1280)
        pairs = {"body": 7.0, "figcaption": 4.5, ".note": 4.5, "a[href]": 4.5}
        for css, least in pairs.items():
            colour = browser.value(f"getComputedStyle(document.querySelector('{css}')).color")
            ground = browser.value("getComputedStyle(document.body).backgroundColor")
            assert contrast(colour, ground) >= least, css
    finally:
        browser.scheme(dark=False)


def contrast(one: str, other: str) -> float:
    """WCAG 2 contrast ratio of two rgb() texts."""
    high, low = sorted((_luminance(one), _luminance(other)), reverse=True)
    return (high + 0.05) / (low + 0.05)


def _luminance(colour: str) -> float:
    parts: list[Any] = [float(part) / 255 for part in colour[4:-1].split(",")[:3]]
    linear = [p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]
