"""FORMAT.md is enough: its SQL and its Python read a record with nothing of ours."""

from __future__ import annotations

import re
import shutil
import sqlite3
import subprocess
from collections.abc import Callable
from importlib.resources import files
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from monitor.core.rows import Event, WindowRows
from monitor.record.types import Commit
from tests.record.making import (
    CHANNELS,
    MINUTE,
    UTC0,
    S,
    blocks,
    exposure_rows,
    field_rows,
    fix,
    raw,
    windows,
    writer_of,
)

PAGE = files("monitor.record").joinpath("FORMAT.md").read_text(encoding="utf-8")
ROWS: WindowRows = windows(0, 20, seed=4)


def _snippets(language: str) -> list[str]:
    return re.findall(rf"```{language}\n(.*?)```", PAGE, re.DOTALL)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """A record of twenty minutes, closed, alone in its folder."""
    writer = writer_of(tmp_path / "made.db")
    boot = writer.begin_boot("b", "rehearsal")
    ends = MINUTE * np.arange(1, 21)
    writer.commit(
        boot,
        Commit(
            raw(0, 77, seed=9), blocks(0, 60), ROWS, field_rows(ends, np.full(20, 4.0)),
            exposure_rows(ends, np.full(20, 0.25)), (Event(5, "note", "n", {"a": 1}),),
            fix().clock_fixes,
        ),
    )  # fmt: skip
    writer.close()
    (tmp_path / "copy").mkdir()
    return Path(shutil.copy(tmp_path / "made.db", tmp_path / "copy" / "record.sqlite"))


def _expected_dbm() -> np.ndarray:
    return 10 * np.log10(1e3 * ROWS.energy_w_ns / ROWS.covered_ns)


def _check(end_utc: list[str], name: list[str], mean_dbm: np.ndarray, within: float) -> None:
    when = pd.to_datetime(end_utc, utc=True).astype("datetime64[ns, UTC]").astype(np.int64)
    assert when.tolist() == (UTC0 + ROWS.end_ns).tolist()
    names = {index: name for index, name, _, _ in CHANNELS}
    assert name == [names[index] for index in ROWS.channel.tolist()]
    assert np.abs(mean_dbm - _expected_dbm()).max() <= within


@pytest.mark.parametrize("which", [0, 1])
def test_the_pages_sql_through_pandas(path: Path, which: int) -> None:
    db = sqlite3.connect(path)
    try:
        frame = pd.read_sql_query(_snippets("sql")[which], db)
    finally:
        db.close()
    within = 0.0005 if which == 0 else 1e-9  # the view rounds to a thousandth of a dB
    _check(frame.end_utc.tolist(), frame.name.tolist(), frame.mean_dbm.to_numpy(), within)


@pytest.mark.skipif(shutil.which("sqlite3") is None, reason="no sqlite3 command on this machine")
def test_the_pages_sql_through_the_sqlite_command(path: Path) -> None:
    done = subprocess.run(
        ["sqlite3", "-readonly", "-csv", str(path), _snippets("sql")[1]],
        capture_output=True, text=True, check=True,
    )  # fmt: skip
    rows = [line.split(",") for line in done.stdout.split()]
    mean = np.array([float(row[2]) for row in rows])
    _check([row[0] for row in rows], [row[1] for row in rows], mean, 1e-6)


def test_the_pages_python_reads_the_raw_counts(path: Path) -> None:
    space: dict[str, Callable[[bytes], list[tuple[int, int, int, list[int]]]]] = {}
    exec(_snippets("python")[0], space)  # noqa: S102 - the page's own decoder is under test
    db = sqlite3.connect(path)
    ((body,),) = db.execute("SELECT body FROM raw").fetchall()
    db.close()
    found = space["readings"](body)
    batch = raw(0, 77, seed=9)
    assert [row[0] for row in found] == batch.times_ns.tolist()
    assert [row[1] for row in found] == batch.flags.tolist()
    assert [row[2] for row in found] == batch.temperature_dc.tolist()
    assert [row[3] for row in found] == batch.counts.tolist()


def test_every_view_answers_in_trade_units(path: Path) -> None:
    db = sqlite3.connect(path)
    db.row_factory = sqlite3.Row
    one = {
        name: db.execute(f"SELECT * FROM {name} LIMIT 1").fetchone()  # noqa: S608
        for (name,) in db.execute("SELECT name FROM sqlite_master WHERE type = 'view'").fetchall()
    }
    db.close()
    assert one["field_levels"]["e_mean_v_per_m"] == 2.0
    assert one["exposure_levels"]["ratio_mean"] == 0.25
    assert one["exposure_levels"]["verdict"] == "conforms"
    assert one["event_log"]["body"] == '{"a": 1}'
    assert one["block_levels"]["name"] == "east"
    assert one["boot_utc"]["offset_ns"] == UTC0
    assert one["block_levels"]["start_utc"] == "2023-11-14T22:13:20.000Z"  # 1.7e9 s of Unix time


def test_the_file_says_what_it_is(path: Path) -> None:
    db = sqlite3.connect(path)
    ((body,),) = db.execute(
        "SELECT cast(body AS TEXT) FROM documents WHERE kind = 'format'"
    ).fetchall()
    meta = dict(db.execute("SELECT * FROM meta").fetchall())
    tables = [r[0] for r in db.execute("SELECT name FROM sqlite_master WHERE type = 'table'")]
    db.close()
    assert body == PAGE
    assert meta["simulated"] == "1"
    assert [t for t in tables if not t.startswith("_") and t not in PAGE] == []
    assert S * 60 == MINUTE
