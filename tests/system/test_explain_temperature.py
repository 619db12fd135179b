"""A board whose temperature changes within the windows, through every process, and replayed."""

from __future__ import annotations

import csv
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest

from monitor import control, rehearsal
from monitor.core.errors import DeviceError
from monitor.record.reader import Record
from monitor.retrace import trace
from tests.cli.command import run
from tests.system.commands import filled, start, wait_for

S = 1_000_000_000
HISTORY_S = 3000
CALIBRATION = Path(__file__).parents[2] / "simulators" / "data" / "board-calibration.toml"
SCENE = """
[scene]
name = "warm and cold"
place = "Harrowgate Mill, Tern Hollow (invented)"
simulated = true

[[transmitter]]
name = "steady"
frequency_hz = 1200e6
eirp_w = 1000
distance_m = 30
polarisation = [0.5, 0.6, 0.7]

[climate]
mean_c = 20
swing_c = 15
period_s = 1500
db_per_k = 0.05
reference_c = 20
"""
LAW = "temperature = [[-20, -2.0], [20, 0.0], [55, 1.75]]"


@pytest.fixture(scope="module", params=[LAW, ""], ids=["table", "none"])
def folder(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A rehearsal whose calibration knows the drift, or does not."""
    place = tmp_path_factory.mktemp("climate") / ("table" if request.param else "none")
    (place.parent / "scene.toml").write_text(SCENE)
    started = datetime(2026, 3, 1, 6, tzinfo=UTC)
    scene = str(place.parent / "scene.toml")
    plan = rehearsal.Rehearsal(place, scene, 2, HISTORY_S, rehearsal.free_port(), started)
    rehearsal.write_site(plan)
    law = {'averages = "none"': f'averages = "none"\n{request.param}'}
    (place / "calibration.toml").write_text(filled(CALIBRATION.read_text(), law))
    mine = {str(CALIBRATION): str(place / "calibration.toml")}
    plan.site_path.write_text(filled(plan.site_path.read_text(), mine))
    board = rehearsal.start_board(plan)
    daemon = start("measure", "--site", plan.site_path, "--history", HISTORY_S)
    try:
        wait_for(lambda: judged(place), 60)
    finally:
        for process in (daemon, board):
            process.terminate()
            process.wait(20)
    return place


def judged(folder: Path) -> bool:
    """Whether the daemon has the whole history behind it."""
    try:
        now = control.ask(folder / "record.sock", {"do": "now"})["now"]
    except DeviceError:
        return False
    return isinstance(now, dict) and now["progress"] is None


def truth_e2(folder: Path) -> float:
    with (folder / "truth.csv").open() as file:
        rows = list(csv.DictReader(line for line in file if not line.startswith("#")))
    found = {row["e2_total_v2_per_m2"] for row in rows}
    assert len(found) == 1  # a steady carrier: only the temperature moves the readings
    return float(found.pop())


def kept(folder: Path) -> tuple[np.ndarray, np.ndarray]:
    """Ends (s) and E squared of the full six-minute windows."""
    with Record.open(folder / "record.db") as record:
        rows = record.fields(record.boots()[0].boot)
    mine = (rows.averaging_s == 360) & (rows.valid_share == 1.0) & (rows.end_ns % (60 * S) == 0)
    return rows.end_ns[mine] // S, rows.e2_mean[mine]


def test_the_average_stands_still_by_the_table_and_follows_the_board_without(folder: Path) -> None:
    """Without a table by 0.05 dB for each kelvin, in the mean of power over six minutes; with one
    not by more than a frame of ten readings lags: 5 s of 15 K in 1500 s, 0.016 dB, and rounding."""
    ends, e2 = kept(folder)
    assert ends.size > 30
    found_db = 10 * np.log10(e2 / truth_e2(folder))
    times_s = np.arange(HISTORY_S) + 6 * 3600 - HISTORY_S - 54_000
    drift_db = 0.05 * 15 * np.cos(2 * np.pi * times_s / 1500)
    mean_db = [10 * np.log10(np.mean(10 ** (drift_db[end - 360 : end] / 10))) for end in ends]
    assert np.ptp(mean_db) > 1.2
    expected_db = 0 * ends if folder.name == "table" else np.array(mean_db)
    apart_db = found_db - expected_db  # and the band's middle for 1200 MHz, the same throughout
    assert np.ptp(apart_db) < 0.05


def test_windows_come_out_again_to_the_bit(folder: Path) -> None:
    with Record.open(folder / "record.db") as record:
        (boot,) = record.boots()
        rows = record.fields(boot.boot)
        told = np.concatenate([b.temperature_dc for b in record.raw_batches(boot.boot)])
    assert (told.min(), told.max()) == (50, 350)
    assert boot.utc_offset_ns is not None
    ends = list(zip(rows.end_ns.tolist(), rows.averaging_s.tolist()))
    for end_ns, averaging_s in [*ends[:2], *ends[2::9], ends[-1]]:
        found = trace(folder / "record.db", end_ns + boot.utc_offset_ns, averaging_s)
        assert found.kept.end_ns == end_ns
        assert (found.equal, found.differs) == (True, ()), (end_ns, averaging_s, found.why)


def test_what_was_taken_off_is_told(capsys: pytest.CaptureFixture[str], folder: Path) -> None:
    """The newest window: 360 s of a course of 1500 s, by its rows of 0.05 dB a kelvin."""
    asked = ["explain", "--record", folder / "record.db"]
    told = run(capsys, [*asked, "--json"]).document
    with Record.open(folder / "record.db") as record:
        end_ns = told["end_boot_ns"]
        raw = list(record.raw_batches(told["boot"], end_ns - 360 * S, end_ns))
    dc = np.concatenate([batch.temperature_dc for batch in raw])
    warmest, coldest = dc.max() / 10, dc.min() / 10
    assert told["temperature"] == {"min_c": coldest, "max_c": warmest, "readings_without": 0}
    out = run(capsys, asked).out
    assert f"the instrument's temperature: {coldest:.1f} to {warmest:.1f} °C\n" in out
    for channel in told["channels"]:
        span = channel["temperature_db_min"], channel["temperature_db_max"]
        if folder.name == "table":
            assert span == pytest.approx((0.05 * (coldest - 20), 0.05 * (warmest - 20)))
        else:
            assert span == (None, None)
    assert ("dB taken off each reading" in out) == (folder.name == "table")
