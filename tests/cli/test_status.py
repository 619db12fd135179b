"""status says how a box is, from the daemon or the record, and puts the worst box first."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner, Result

from monitor.cli.status import STATES, Standing, command, worst_first
from monitor.control import Server
from monitor.core.errors import ConfigError, RecordError
from monitor.record.types import Commit
from tests.record.making import MINUTE, UTC0, exposure_rows, field_rows, fix, raw, writer_of

NOW: dict[str, object] = {
    "utc": "2026-01-01T00:00:00.000Z",
    "last_reading_age_s": 2.0,
    "last_reading_utc": "2026-01-01T00:00:00.000Z",
    "simulated": True,
    "site": {"name": "Harrowgate Mill", "place": "Tern Hollow", "occupancy": "public"},
    "fields": [
        {"averaging_s": 360, "e_low": 1.0, "e_mean": 1.5, "e_high": 2.0, "e_max": 3.0,
         "u_db": 2.5, "k": 1.96, "valid_share": 1.0, "observed_share": 1.0}
    ],
    "exposures": [
        {"set": "icnirp-2020", "population": "general_public", "scope": "local",
         "averaging_s": 360, "ratio_low": 0.1, "ratio_mean": 0.2, "ratio_high": 0.3,
         "u_db": 2.1, "verdict": "conforms"}
    ],
    "alarms": [],
}  # fmt: skip


def _run(*arguments: object) -> Result:
    return CliRunner().invoke(command, [str(a) for a in arguments], catch_exceptions=False)


def _record(path: Path, *, ratio: float = 0.25, empty: bool = False) -> Path:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "series")
    if not empty:
        ends = MINUTE * np.arange(1, 3)
        writer.commit(
            boot,
            Commit(
                raw(0, 100, spacing_s=1), fields=field_rows(ends, np.full(2, 4.0)),
                exposures=exposure_rows(ends, np.full(2, ratio)), clock_fixes=fix().clock_fixes,
            ),
        )  # fmt: skip
    writer.close()
    return path


def _live(path: Path, **changes: object) -> Server:
    return Server(path.with_suffix(".sock"), lambda request: {"now": {**NOW, **changes}})


def test_without_a_daemon_it_says_since_when(tmp_path: Path) -> None:
    path = _record(tmp_path / "mill.db")
    text = _run("--record", path).output
    document = json.loads(_run("--record", path, "--json").output)
    # The hundredth reading came 99 s and a jitter below 0.1 s after 2023-11-14T22:13:20Z.
    assert "no measurement since 2023-11-14T22:14:59.0" in text
    assert "says nothing about the field" in text
    assert "SIMULATED" in text
    said = "exposure ratio 0.25 (between 0.088 and 0.71, by gaps and expanded uncertainty)"
    assert said in text  # 0.125 / 10^(1.5 / 10) and 0.5 * 10^(1.5 / 10)
    assert (document["state"], document["answering"], document["simulated"]) == (
        "stopped", False, True,
    )  # fmt: skip
    assert document["now"]["fields"][0]["e_mean"] == 2.0
    assert document["now"]["exposures"][0]["set"] == "icnirp-2020"
    assert document["now"]["utc"].startswith("2023-11-14T22:15:20")
    assert UTC0 == 1_700_000_000 * 10**9  # 2023-11-14T22:13:20Z


def test_a_record_without_a_window(tmp_path: Path) -> None:
    path = _record(tmp_path / "mill.db", empty=True)
    assert "stopped: no measurement yet" in _run("--record", path).output


def test_the_daemon_is_asked_first(tmp_path: Path) -> None:
    path = _record(tmp_path / "mill.db")
    server = _live(path)
    text = _run("--record", path).output
    document = json.loads(_run("--record", path, "--json").output)
    server.close()
    assert text.startswith("Harrowgate Mill  SIMULATED")
    assert "below each limit that is judged, at the antenna, last reading 2 s ago" in text
    assert "every limit" not in text
    assert text.count("Not judged here: exposures shorter than the averaging time") == 1
    assert "(between 0.061 and 0.49, by gaps and expanded uncertainty), conforms" in text
    assert "E 1.5 V/m, with U 1.1 to 2.0 V/m, largest reading 3.0 V/m, U 2.5 dB" in text
    assert document["now"] == NOW
    assert document["largest_exposure_ratio"] == 0.2


@pytest.mark.parametrize(
    ("changes", "state", "words"),
    [
        ({"last_reading_age_s": None}, "silent", "no reading yet"),
        ({"last_reading_age_s": 95.0}, "silent", "no valid reading since 2026-01-01T00:00:00"),
        ({"exposures": [{"verdict": "exceeds", "ratio_mean": 2.0}]}, "exceeds", "limit is exceed"),
        ({"exposures": [{"verdict": "undecided"}]}, "undecided", "not all can be decided"),
        ({"exposures": []}, "undecided", "not all can be decided"),
        (
            {"alarms": [{"text": "half the limit", "state": "returned_unacknowledged"}]},
            "alarm", "half the limit: was present, gone now, not yet confirmed",
        ),
    ],
)  # fmt: skip
def test_states(tmp_path: Path, changes: dict[str, object], state: str, words: str) -> None:
    path = _record(tmp_path / "mill.db")
    server = _live(path, **changes)
    text = _run("--record", path).output
    document = json.loads(_run("--record", path, "--json").output)
    server.close()
    assert document["state"] == state
    assert words in text
    assert "clear" not in text.lower()
    assert "safe" not in text.lower()


def test_a_folder_worst_first(tmp_path: Path) -> None:
    _record(tmp_path / "stopped.db", ratio=0.3)
    (tmp_path / "roof").mkdir()
    _record(tmp_path / "roof" / "stopped worse.db", ratio=0.7)
    (tmp_path / "torn.db").write_bytes(b"x" * 5000)
    over = _record(tmp_path / "over.db")
    fine = _record(tmp_path / "fine.db")
    servers = [
        _live(over, exposures=[{"verdict": "exceeds", "ratio_mean": 1.2}]), _live(fine),
    ]  # fmt: skip
    lines = _run(tmp_path).output.splitlines()
    boxes = json.loads(_run(tmp_path, "--json").output)["boxes"]
    for server in servers:
        server.close()
    order = [Path(box["record"]).stem for box in boxes]
    assert order == ["over", "torn", "stopped worse", "stopped", "fine"]
    assert [line.split()[0] for line in lines] == [
        "exceeds", "unreadable", "stopped", "stopped", "conforms", "Not",
    ]  # fmt: skip
    assert boxes[1]["simulated"] is None
    assert "is no record" in lines[1]


def _exposure(**changes: object) -> list[dict[str, object]]:
    return [{**NOW["exposures"][0], "verdict": "undecided", **changes}]  # type: ignore[index]


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        (
            {"flags": ["converter clipped"]},
            [
                # 0.1 / 10^(2.1 / 10) and 1 / 10^(2.5 / 20), rounded down
                "ratio at least 0.061 (by gaps and expanded uncertainty; how much more",
                "E at least 0.74 V/m, U is counted in the bound",
            ],
        ),
        (
            {"flags": ["below the detection limit"]},
            ["ratio below 0.30 (by gaps and", "E below 2.0 V/m, U is counted in the bound"],
        ),
        (
            {"exposures": _exposure(ratio_low=27.0, ratio_mean=None, verdict="exceeds")},
            ["ratio at least 16 (", "a limit is exceeded"],
        ),
        (
            {"exposures": _exposure(ratio_low=0.9, ratio_mean=1.1, ratio_high=1.2)},
            ["at or above a limit, cannot be decided", "ratio 1.1 ("],
        ),
    ],
)
def test_bounds_are_said_to_be_bounds(
    tmp_path: Path, changes: dict[str, object], words: list[str]
) -> None:
    path = _record(tmp_path / "mill.db")
    server = _live(path, **changes)
    text = _run("--record", path).output
    server.close()
    assert all(each in text for each in words), text


def test_a_figure_without_a_mean_ranks_by_its_lower_bound(tmp_path: Path) -> None:
    exposures = _exposure(ratio_low=27.0, ratio_mean=None, ratio_high=None, verdict="exceeds")
    path = _record(tmp_path / "mill.db")
    server = _live(path, exposures=exposures)
    line = _run(tmp_path).output.splitlines()[0]
    document = json.loads(_run("--record", path, "--json").output)
    server.close()
    assert "ratio at least 16" in line
    assert document["largest_is"] == "at_least"
    assert document["largest_exposure_ratio"] == pytest.approx(27.0 / 10**0.21)  # U 2.1 dB


def _told(tmp_path: Path, **changes: object) -> str:
    path = _record(tmp_path / "mill.db")
    server = _live(path, **changes)
    text = _run("--record", path).output
    server.close()
    return text


@pytest.mark.parametrize(
    ("device", "flags", "why"),
    [
        ({"connected": True, "text": "board A"}, ["detector voltage outside its valid window"],
         "detector voltage outside its valid window (open or shorted wire?)"),
        ({"connected": False, "text": "port gone"}, [], "the sensor is not connected"),
    ],
)  # fmt: skip
def test_a_silent_box_says_why_and_what_its_device_says(
    tmp_path: Path, device: dict[str, object], flags: list[str], why: str
) -> None:
    silence = {"key": "silence", "text": "no valid reading", "state": "acknowledged"}
    text = _told(tmp_path, last_reading_age_s=1.0, alarms=[silence], device=device, flags=flags)
    assert f"silent: no valid reading since 2026-01-01T00:00:00.000Z: {why}" in text
    state = "connected" if device["connected"] else "not connected"
    assert f"device   {state} ({device['text']})." in text


def test_its_words_are_those_of_the_pages(tmp_path: Path) -> None:
    alarms = [
        {"key": "half | fcc-1.1310 general_public local 360 s", "state": state, "level": 0.5}
        for state in ("unacknowledged", "shelved")
    ]
    exposures = _exposure(set="fcc-1.1310", verdict="conforms")
    text = _told(tmp_path, alarms=alarms, exposures=exposures)
    assert "47 CFR 1.1310, general public, local, 6 min: exposure ratio 0.20" in text
    assert "half: 47 CFR 1.1310, general public, local, 6 min: over, not yet confirmed" in text
    assert "general public, local, 6 min: muted" in text
    for machine in ("fcc-1.1310", "shelved", "acknowledged", "general_public"):
        assert machine not in text


def test_order_of_states() -> None:
    boxes = [Standing(Path(s), s, "", True, False, {}) for s in reversed(STATES)]
    assert [box.state for box in worst_first(boxes)] == list(STATES)


@pytest.mark.parametrize(
    ("arguments", "error", "message"),
    [
        (["{}/gone"], ConfigError, "no such folder"),
        (["{}"], ConfigError, "no record"),
        (["{}", "--record", "x.db"], ConfigError, "not several"),
        (["--record", "{}/gone.db"], RecordError, "no such record"),
        (["--site", "{}/gone.toml"], ConfigError, "gone.toml"),
    ],
)
def test_wrong_input_is_one_line(
    tmp_path: Path, arguments: list[str], error: type[Exception], message: str
) -> None:
    with pytest.raises(error, match=message) as caught:
        _run(*[a.format(tmp_path) for a in arguments])
    assert "\n" not in str(caught.value)
