"""What the pages let in and out: headers, hosts, forms, and what a person does."""

from __future__ import annotations

import re
from html.parser import HTMLParser
from pathlib import Path

import pytest
from flask.testing import FlaskClient

import dashboard
from tests.dashboard.fakes import FakeDaemon, FakeRecord, alarm, app_over, client_over, snapshot

STATIC = Path(dashboard.__file__).parent / "static"
PATHS = (
    "/", "/part", "/history", "/api/now", "/api/history", "/health", "/nowhere", "/static/live.js",
)  # fmt: skip
POLICY = {
    "default-src 'none'", "style-src 'self'", "script-src 'self'", "connect-src 'self'",
    "img-src 'self'", "form-action 'self'", "base-uri 'none'", "frame-ancestors 'none'",
}  # fmt: skip


class Finder(HTMLParser):
    """Collects what a strict policy would block, and every address."""

    def __init__(self) -> None:
        super().__init__()
        self.inline: list[str] = []
        self.addresses: list[str] = []
        self.ids: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        given = dict(attrs)
        if tag == "style" or (tag == "script" and "src" not in given):
            self.inline.append(tag)
        self.inline += [name for name in given if name == "style" or name.startswith("on")]
        self.addresses += [str(given[k]) for k in ("href", "src", "action") if k in given]
        self.ids += [str(given["id"])] if "id" in given else []


def _found(client: FlaskClient, path: str) -> Finder:
    finder = Finder()
    finder.feed(client.get(path).text)
    return finder


@pytest.mark.parametrize("path", PATHS)
def test_headers_are_strict_on_every_answer(path: str, tmp_path: Path) -> None:
    headers = client_over(snapshot(), tmp_path).get(path).headers
    assert set(headers["Content-Security-Policy"].split("; ")) == POLICY
    assert headers["X-Content-Type-Options"] == "nosniff"
    assert headers["Referrer-Policy"] == "no-referrer"
    if not path.startswith("/static"):
        assert headers["Cache-Control"] == "no-store"
    assert "Set-Cookie" not in headers


@pytest.mark.parametrize("path", ["/", "/part", "/history", "/nowhere"])
def test_pages_hold_nothing_inline_and_name_no_other_host(path: str, tmp_path: Path) -> None:
    shown = snapshot(0.72, alarms=[alarm("unacknowledged"), alarm("shelved", "b")])
    found = _found(client_over(shown, tmp_path), path)
    assert found.inline == []
    assert found.addresses or path == "/part"
    assert all(re.match(r"^(/(?!/)|#)", address) for address in found.addresses)
    assert len(found.ids) == len(set(found.ids))


def test_style_and_script_load_nothing_from_elsewhere() -> None:
    for name in ("page.css", "live.js"):
        text = (STATIC / name).read_text(encoding="utf-8")
        assert not re.search(r"https?:|@import|//[a-z]+\.|url\(", text)


def test_every_address_on_the_pages_answers(tmp_path: Path) -> None:
    client = client_over(snapshot(), tmp_path)
    seen: set[str] = set()
    for path in ("/", "/history"):
        seen |= {a for a in _found(client, path).addresses if a.startswith("/")}
    assert len(seen) > 20
    codes = {address: client.get(address).status_code for address in seen}
    assert {address: code for address, code in codes.items() if code not in (200, 405)} == {}


@pytest.mark.parametrize(
    ("host", "code"),
    [
        ("localhost", 200), ("localhost:8080", 200), ("127.0.0.1:5000", 200), ("[::1]:80", 200),
        ("[::1]", 200), ("evil.example", 421), ("evil.example:8080", 421),
        ("localhost.evil.example", 421), ("127.0.0.1.evil.example:80", 421), ("10.0.0.5", 421),
    ],
)  # fmt: skip
def test_other_names_for_this_machine_get_nothing(host: str, code: int, tmp_path: Path) -> None:
    client = client_over(snapshot(), tmp_path)
    answer = client.get("/api/now", headers={"Host": host})
    assert answer.status_code == code
    assert ("exposures" in answer.text) == (code == 200)


def _acting(tmp_path: Path, **more: bool) -> tuple[FakeDaemon, FlaskClient, dict[str, str]]:
    daemon = FakeDaemon(snapshot(0.72, alarms=[alarm("unacknowledged")]))
    client = app_over(daemon, FakeRecord(), tmp_path, **more).test_client()
    fields = re.findall(r'name="(token|key)" value="([^"]+)"', client.get("/").text)
    return daemon, client, dict(fields)


def test_confirming_and_muting_go_to_the_daemon(tmp_path: Path) -> None:
    daemon, client, form = _acting(tmp_path)
    assert client.post("/alarms", data={**form, "do": "acknowledge"}).status_code == 303
    assert client.post("/alarms", data={**form, "do": "shelve", "minutes": "60"}).status_code == 303
    assert client.post("/alarms", data={**form, "do": "unshelve"}).status_code == 303
    assert daemon.asked == [
        {"do": "acknowledge", "key": "half"},
        {"do": "shelve", "key": "half", "for_s": 3600},
        {"do": "unshelve", "key": "half"},
    ]


@pytest.mark.parametrize(
    ("change", "headers", "code"),
    [
        ({"token": ""}, {}, 403),
        ({"token": "ä"}, {}, 403),
        ({}, {"Origin": "https" + "://evil.example"}, 403),
        ({"do": "stop"}, {}, 400),
        ({"do": "note"}, {}, 400),
        ({"key": ""}, {}, 400),
        ({"do": "shelve", "minutes": "999999"}, {}, 400),
        ({"do": "shelve"}, {}, 400),
        ({"key": "x" * 9000}, {}, 413),
    ],
)
def test_forged_and_senseless_forms_do_nothing(
    change: dict[str, str], headers: dict[str, str], code: int, tmp_path: Path
) -> None:
    daemon, client, form = _acting(tmp_path)
    data = {**form, "do": "acknowledge", **change}
    assert client.post("/alarms", data=data, headers=headers).status_code == code
    assert daemon.asked == []


def test_the_own_origin_may_post(tmp_path: Path) -> None:
    daemon, client, form = _acting(tmp_path)
    data = {**form, "do": "acknowledge"}
    answer = client.post("/alarms", data=data, headers={"Origin": "http" + "://localhost"})
    assert answer.status_code == 303
    assert len(daemon.asked) == 1


def test_what_the_daemon_refuses_is_said(tmp_path: Path) -> None:
    daemon, client, form = _acting(tmp_path)
    daemon.refusal = "no alarm 'half'"
    refused = client.post("/alarms", data={**form, "do": "acknowledge"})
    assert refused.status_code == 400
    assert "not done: no alarm &#39;half&#39;" in refused.text
    daemon.now = None
    gone = client.post("/alarms", data={**form, "do": "acknowledge"})
    assert gone.status_code == 503
    assert "not done: the monitor does not answer" in gone.text


def test_beyond_this_machine_the_pages_only_show(tmp_path: Path) -> None:
    daemon, client, form = _acting(tmp_path, loopback=False)
    assert form == {}
    page = client.get("/", headers={"Host": "box.example"})
    assert page.status_code == 200
    assert "confirmed and muted on the monitor itself" in page.text
    assert client.post("/alarms", data={"do": "acknowledge", "key": "half"}).status_code == 403
    assert daemon.asked == []


def test_health_and_the_moment_as_json(tmp_path: Path) -> None:
    client = client_over(snapshot(), tmp_path)
    health = client.get("/health")
    assert (health.status_code, health.json["state"]) == (200, "measuring")
    now = client.get("/api/now").json
    assert now["now"]["exposures"][0]["ratio_mean"] == 0.31
    assert now["last_reading_age_s"] == 3.2
    dead = client_over(None, tmp_path)
    assert dead.get("/health").status_code == 503
    assert dead.get("/health").json["last_reading_utc"] == "2025-03-01T07:12:00Z"
    gone = dead.get("/api/now").json
    assert (gone["state"], gone["now"]) == ("stopped", None)
    assert "says nothing about the field" in gone["words"]
    quiet = client_over(snapshot(last_reading_age_s=99.0), tmp_path)
    assert quiet.get("/health").status_code == 503


def test_an_unexpected_error_is_a_page_without_its_inside(tmp_path: Path) -> None:
    class Broken(FakeRecord):
        def events(self, start_utc_ns: int, end_utc_ns: int, limit: int) -> list:
            raise ZeroDivisionError("inner detail")

    answer = client_over(snapshot(), tmp_path, Broken()).get("/history")
    assert answer.status_code == 500
    assert "This cannot be shown" in answer.text
    assert "inner detail" not in answer.text
