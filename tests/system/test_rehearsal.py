"""Two hours of rehearsal through every process: against the scenario's truth, and replayed."""

from __future__ import annotations

import csv
from dataclasses import fields
from pathlib import Path

import numpy as np
import pytest

from monitor import wiring
from monitor.config import load_site
from monitor.core import pipeline
from monitor.core.flags import Flag
from monitor.core.gather import nothing, stack
from monitor.core.rows import BlockRows, FieldRows, WindowRows
from monitor.core.station import Station
from monitor.record.reader import Record
from tests.system.commands import fieldsill

HISTORY_S = 7200


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("rehearsal") / "new"
    done = fieldsill(
        "rehearse", "--history", f"{HISTORY_S}s", "--seed", 7, "--exit", "--folder", place
    )
    assert done.returncode == 0, done.stderr
    assert "invented" in done.stdout
    assert str(place / "record.db") in done.stdout
    assert f"rm -r {place}" in done.stdout
    return place


def station(folder: Path) -> Station:
    site = load_site(folder / "site.toml")
    return wiring.station_for(site, wiring.chain_for(site, wiring.sensor_settings(site)))


def truth_e2(folder: Path) -> np.ndarray:
    with (folder / "truth.csv").open() as file:
        lines = [line for line in file if not line.startswith("#")]
    rows = list(csv.DictReader(lines))
    column = next(name for name in rows[0] if name.startswith("e2_total"))
    return np.array([float(row[column]) for row in rows])


def test_the_averages_contain_the_truth(folder: Path) -> None:
    """Mean of the scenario's E squared over each full six minutes lies within U (95 %)."""
    e2 = truth_e2(folder)
    with Record.open(folder / "record.db") as record:
        assert record.simulated
        rows = record.fields(record.boots()[0].boot)
    full = (
        (rows.averaging_s == 360) & (rows.valid_share == 1.0) & (rows.end_ns % 60_000_000_000 == 0)
    )
    ends = rows.end_ns[full] // 1_000_000_000
    assert ends.size > 100
    truth = np.array([e2[end - 360 : end].mean() for end in ends])
    error_db = 10 * np.log10(rows.e2_mean[full] / truth)
    assert np.all(np.abs(error_db) < rows.u_db[full])
    assert np.all(rows.flags[full] & Flag.SIMULATED)


def test_the_stored_counts_replay_to_the_bit(folder: Path) -> None:
    """Blocks, windows and fields computed anew from raw counts, in other portions, are equal."""
    here = station(folder)
    out, state = nothing(), pipeline.start(here, 0)
    with Record.open(folder / "record.db") as record:
        boot = record.boots()[0].boot
        raw = list(record.raw_batches(boot))
        kept = record.blocks(boot), record.windows(boot), record.fields(boot)
    assert sum(batch.n for batch in raw) >= HISTORY_S
    for batch in raw:
        for part in np.array_split(np.arange(batch.n), min(7, batch.n)):
            piece = batch.part(slice(part[0], part[-1] + 1), int(batch.times_ns[part[-1]]))
            state, found = pipeline.step(state, piece, here)
            out.extend(found)
    again = stack(out.blocks), stack(out.windows), stack(out.fields)
    for kind, left, right in zip((BlockRows, WindowRows, FieldRows), kept, again):
        assert right is not None
        for field in fields(kind):
            a, b = getattr(left, field.name), getattr(right, field.name)
            assert a.size > 200
            assert a.tobytes() == b.astype(a.dtype).tobytes(), (kind, field.name)


def test_the_record_says_that_it_is_simulated_and_refuses_real_readings(folder: Path) -> None:
    text = (folder / "site.toml").read_text().replace("simulated = true", "simulated = false")
    real = folder / "real.toml"
    real.write_text(text)
    before = (folder / "record.db").read_bytes()
    done = fieldsill("measure", "--site", real)
    assert done.returncode == 3
    assert done.stderr.count("\n") == 1
    assert "simulated" in done.stderr
    assert (folder / "record.db").read_bytes() == before


def test_a_folder_that_is_there_is_not_touched(folder: Path) -> None:
    done = fieldsill("rehearse", "--history", "1h", "--exit", "--folder", folder)
    assert done.returncode == 2
    assert str(folder) in done.stderr


@pytest.mark.parametrize("history", ["7", "-1h", "1 year"])
def test_a_history_that_is_no_span_is_refused(history: str, tmp_path: Path) -> None:
    done = fieldsill("rehearse", "--exit", "--folder", tmp_path / "x", f"--history={history}")
    assert (done.returncode, done.stderr.count("\n")) == (2, 1)
    assert list(tmp_path.iterdir()) == []
