"""fieldsill check: what it finds, what it refuses, and that it leaves nothing behind."""

from __future__ import annotations

import gzip
import json
import shutil
from pathlib import Path

import pytest

from monitor.calfile import load_chain
from monitor.checks import Finding, findings
from monitor.cli import main
from monitor.config import load_site

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
SITE = "level-series-site.toml"
CALIBRATION = "level-series-calibration.toml"
NS_PER_DAY = 86_400_000_000_000
NOW_NS = 1_790_000_000_000_000_000
"""In September 2026."""


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """The example of a recorded level series, with a series to go with it."""
    for name in (SITE, CALIBRATION):
        shutil.copy(EXAMPLES / name, tmp_path)
    with gzip.open(tmp_path / "levels.csv.gz", "wt", encoding="utf-8") as series:
        series.write("time,rsl\n2026-03-01 00:00:00,-40.565\n2026-03-01 00:01:00,-40.594\n")
    return tmp_path


def change(path: Path, old: str, new: str) -> None:
    """Replace a text in a file; it must be there."""
    text = path.read_text(encoding="utf-8")
    assert old in text
    path.write_text(text.replace(old, new, 1), encoding="utf-8")


def run(*arguments: str) -> int:
    """The exit code of fieldsill check with those arguments."""
    with pytest.raises(SystemExit) as ended:
        main(["check", *arguments])
    return int(ended.value.code or 0)


def files(folder: Path) -> dict[str, bytes]:
    return {str(path): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def test_a_site_that_runs(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    before = files(folder)
    assert run("--site", str(folder / SITE)) == 0
    out = capsys.readouterr().out
    assert "Link level, recorded, public; readings are real" in out
    assert "18 GHz to 18.2 GHz, 1 of 3 axes; a component only" in out
    assert "undeclared: nothing will ever conform" in out
    assert "level: -90.0 to -15.0 dBm" in out
    assert files(folder) == before


def test_the_same_as_one_document(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("--site", str(folder / SITE), "--json") == 0
    document = json.loads(capsys.readouterr().out)
    assert document["site"] == str(folder / SITE)
    assert document["runs"] is True
    assert document["ok"] is False
    assert {"where", "text", "ok"} == set(document["findings"][0])
    noted = [row["where"] for row in document["findings"] if not row["ok"]]
    assert {"site.field_region", "band", "limits"} <= set(noted)


def test_limits_that_rest_on_memory_are_noted(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run("--site", str(folder / SITE), "--json") == 0
    rows = json.loads(capsys.readouterr().out)["findings"]
    limits = [row["text"] for row in rows if row["where"] == "limits"]
    assert len(limits) == 6
    remembered = [text for text in limits if "from memory" in text]
    assert len(remembered) == 1
    assert remembered[0].startswith("icnirp-2020: occupational, whole_body, 1800 s")


@pytest.mark.parametrize(
    ("days", "words", "ok"),
    [(-1, "overdue, was due 2027-02-01", False), (30, "in 30 days", False), (61, "due 2027", True)],
)
def test_calibration_due_and_overdue(folder: Path, days: int, words: str, ok: bool) -> None:
    site = load_site(folder / SITE)
    due = load_chain(site.calibration, site.channels, site.bands).due_utc_ns
    assert due is not None
    found = [f for f in findings(site, due - days * NS_PER_DAY, lambda _: []) if "due" in f.text]
    assert len(found) == 1
    assert words in found[0].text
    assert found[0].ok is ok


def test_what_limits_a_verdict_is_noted(folder: Path) -> None:
    change(folder / CALIBRATION, 'averages = "power"', 'averages = "log"')
    change(folder / CALIBRATION, "value = 2.0", "value = 5.0")
    change(folder / SITE, '"undeclared"', '"reactive_near"')
    notes = [f.text for f in findings(load_site(folder / SITE), NOW_NS, lambda _: []) if not f.ok]
    assert any("averages logs" in text for text in notes)
    assert any("above 4 dB nothing will conform" in text for text in notes)
    assert any("no verdict from E alone" in text for text in notes)
    assert any("range ends at" in text for text in notes)


def test_an_alert_beyond_the_detectors_range_is_noted(folder: Path) -> None:
    """It can never be raised: somebody would wait for it in vain."""

    def alert() -> Finding:
        found = findings(load_site(folder / SITE), NOW_NS, lambda _: [])
        return next(f for f in found if f.where == "alert")

    change(folder / SITE, "ratio = 0.1\nreturns_at = 0.08", "ratio = 1e-6\nreturns_at = 8e-7")
    assert alert().ok
    change(folder / SITE, "ratio = 1e-6\nreturns_at = 8e-7", "ratio = 1e6\nreturns_at = 8e5")
    assert not alert().ok
    assert "in 6 of them the detector's range ends below that: never raised there" in alert().text


def test_terms_that_nobody_wrote_are_named(folder: Path) -> None:
    site = load_site(folder / SITE)
    assert not [f for f in findings(site, NOW_NS, lambda _: []) if "assumed" in f.text]
    change(folder / CALIBRATION, 'kind = "drift"', "")
    change(folder / CALIBRATION, 'kind = "near_field"', "")
    (found,) = [f for f in findings(site, NOW_NS, lambda _: []) if "assumed" in f.text]
    assert "nobody has confirmed: near_field, drift; nothing will conform" in found.text
    assert not found.ok


def test_the_element_that_is_due_is_named(folder: Path) -> None:
    change(folder / CALIBRATION, 'serial = "waveguide"', 'serial = "waveguide"\ndue = 2026-08-31')
    texts = [f.text for f in findings(load_site(folder / SITE), NOW_NS, lambda _: [])]
    assert "overdue, was due 2026-08-31 (cable waveguide): nothing will conform" in texts


def test_a_survey_stands_for_the_other_axes(folder: Path) -> None:
    change(folder / SITE, 'polarisation = "undeclared"', 'polarisation = "survey"')
    found = list(findings(load_site(folder / SITE), NOW_NS, lambda _: []))
    (band,) = [f for f in found if f.where == "band"]
    assert band.text.endswith("1 of 3 axes; a survey stands for the others")
    assert band.ok
    assert any("nobody has confirmed: polarisation;" in f.text for f in found)


@pytest.mark.parametrize(
    ("name", "old", "new", "code", "words"),
    [
        (
            SITE,
            'low = "18GHz"',
            'low = "17GHz"',
            2,
            "element[1].table: antenna serial number covers",
        ),
        (
            SITE,
            "hold_s = 60",
            "hold = 60",
            2,
            "site.toml: sensor.hold_s: missing; did you mean hold_s by hold?",
        ),
        (
            SITE,
            "occupancy",
            "ocupancy",
            2,
            "site.occupancy: missing; did you mean occupancy by ocupancy?",
        ),
        (SITE, 'occupancy = "public"', "", 2, "site.occupancy: missing; add occupancy = ..."),
        (CALIBRATION, "date = 2024", "date = 2084", 2, "due"),
        (CALIBRATION, "2024-02-01\ndue = 2027", "2084-02-01\ndue = 2085", 2, "look at the date"),
        (CALIBRATION, "invented = true", "invented = 1", 2, "calibration.invented: 1 is neither"),
        (SITE, "[silence]", "[silense]", 2, "silense: unknown key; did you mean silence?"),
        (SITE, 'pace = "full"', 'speed = "full"', 2, "sensor.speed: unknown key"),
        (SITE, '"icnirp-2020"', '"icnirp-2021"', 2, "'icnirp-2021' is not known; known: "),
        (SITE, '"fcc-1.1310"', '"icnirp-1998"', 2, "icnirp-1998 has no limit for a field strength"),
        (SITE, "ratio = 0.1", 'scope = "brief"\nratio = 0.1', 2, "a tenth of a limit"),
        (SITE, "levels.csv", "level.csv", 3, "sensor.file: "),
        (SITE, CALIBRATION, "none.toml", 3, "none.toml: the calibration file cannot be read"),
        (SITE, "resolution = 0.001", "resolution = 0.01", 2, "sensor.resolution: 0.01 differs"),
        (CALIBRATION, "0.9]]", "-0.9]]", 2, "element[2].table: a loss of -0.9 dB"),
    ],
)
def test_one_line_and_nothing_written(
    folder: Path,
    capsys: pytest.CaptureFixture[str],
    name: str,
    old: str,
    new: str,
    code: int,
    words: str,
) -> None:
    change(folder / name, old, new)
    before = files(folder)
    assert run("--site", str(folder / SITE)) == code
    said = capsys.readouterr()
    assert words in said.err
    assert said.err.count("\n") == 1
    assert said.out == ""
    assert files(folder) == before


def test_the_site_of_the_environment(
    folder: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("FIELDSILL_SITE", str(folder / "no.toml"))
    assert run() == 2
    assert "no site file" in capsys.readouterr().err
    monkeypatch.setenv("FIELDSILL_SITE", str(folder / SITE))
    assert run() == 0
