"""A record of schema 1 goes on: nothing of it is lost, and what is new is added beside it."""

from __future__ import annotations

import sqlite3
import zlib
from pathlib import Path

import numpy as np
import pytest

from monitor.core.errors import RecordError
from monitor.core.readings import MISSING, Batch
from monitor.record import connect, schema
from monitor.record.packing import pack, unpack
from monitor.record.reader import Record
from monitor.record.types import Commit
from monitor.record.writer import Writer
from tests.record.making import (
    CHANNELS,
    MINUTE,
    SCOPES,
    check_same,
    exposure_rows,
    field_rows,
    fix,
    raw,
)

OLD_BODY = bytes([1]) + zlib.compress(
    bytes.fromhex(
        "02000000 0100"
        "6400000000000000 0a00000000000000 00"
        "0000000000000000 0000000000000000 00"
        "0700000000000000 0300000000000000 00"
    )
)
"""By hand: two readings of one channel, steps of 10 ns and 3; no column of temperatures."""


@pytest.fixture
def path(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A record as schema 1 made it, with two minutes in it."""
    first = schema.Migrations("fieldsill")
    first(name="1")(schema._v1)  # noqa: SLF001
    with monkeypatch.context() as then:
        then.setattr(schema, "migrations", first)
        schema.create(tmp_path / "site.db", True)
    db = sqlite3.connect(tmp_path / "site.db")
    scope = ("icnirp-2020", "2020", "general_public", "local", 360.0, 1, "Table 6")
    db.execute("INSERT INTO scopes VALUES (1, ?, ?, ?, ?, ?, ?, ?)", scope)
    db.execute("INSERT INTO boots VALUES (1, 'b', 'rehearsal')")
    db.execute("INSERT INTO clock_fixes VALUES (1, 0, ?, 'rtc', 1)", (1_700_000_000 * 10**9,))
    for i in (1, 2):
        values = (0, 1, i * MINUTE, 360, 4.0, 4.0, 4.0, 9.0, 2.5, 2.0, 1.0, 1.0, 0)
        db.execute(f"INSERT INTO fields VALUES ({', '.join('?' * 13)})", values)
        values = (0, 1, i * MINUTE, 1, 0.25, 0.25, 0.25, 2.5, 0)
        db.execute(f"INSERT INTO exposures VALUES ({', '.join('?' * 9)})", values)
    db.commit()
    db.close()
    return tmp_path / "site.db"


def test_it_is_brought_up_and_its_figures_stay(path: Path) -> None:
    connect.ensure(path, True)
    assert connect.identify(path).version == connect.SCHEMA_VERSION
    with Record.open(path) as record:
        rows, ratios = record.fields(1), record.exposures(1)
        past = record.history(1_700_000_000 * 10**9, 1_700_000_200 * 10**9, 360)
    assert rows.e2_mean.tolist() == [4.0, 4.0]
    assert rows.u_db.tolist() == [2.5, 2.5]
    assert rows.added_e2.tolist() == [0.0, 0.0]
    assert ratios.added_ratio.tolist() == [0.0, 0.0]
    shown = past.u_db[np.isfinite(past.u_db)]
    assert shown.tolist() == pytest.approx([2.5, 2.5])


def test_the_writer_goes_on_in_it(path: Path) -> None:
    connect.ensure(path, True)
    writer = Writer(path, simulated=True)
    writer.put_channels(CHANNELS)
    writer.put_scopes(SCOPES)
    boot = writer.begin_boot("next", "rehearsal")
    ends, batch = MINUTE * np.arange(1, 4), raw(0, 20)
    fields, ratios = field_rows(ends, np.full(3, 4.0)), exposure_rows(ends, np.full(3, 0.25))
    writer.commit(
        boot,
        Commit(batch, None, None, fields, ratios, clock_fixes=fix().clock_fixes),
    )
    writer.close()
    with Record.open(path) as record:
        assert record.fields(boot).end_ns.tolist() == ends.tolist()
        (read,) = record.raw_batches(boot)
    check_same(read, batch)


def test_words_and_views_are_those_of_a_new_record(path: Path, tmp_path: Path) -> None:
    connect.ensure(path, True)
    connect.ensure(tmp_path / "new.db", True)
    queries = (
        "SELECT * FROM flag_words",
        "SELECT name, sql FROM sqlite_master WHERE type = 'view' ORDER BY name",
        "SELECT hash FROM documents WHERE kind = 'format'",
    )
    found = []
    for each in (path, tmp_path / "new.db"):
        db = sqlite3.connect(each)
        found.append([db.execute(query).fetchall() for query in queries])
        db.close()
    assert found[0] == found[1]
    assert len(found[0][0]) > 10


def test_before_that_a_reader_says_what_to_do(path: Path) -> None:
    with Record.open(path) as record, pytest.raises(RecordError) as caught:
        record.fields(1)
    assert str(caught.value) == (
        f"{path}: schema 1 is older than 2; start fieldsill measure, or run "
        f"python -m monitor.record.schema {path} --simulated 1"
    )
    assert schema.main([str(path), "--simulated", "1"]) == 0
    with Record.open(path) as record:
        assert record.fields(1).end_ns.size == 2


def test_raw_counts_without_temperatures_are_read() -> None:
    batch = unpack(OLD_BODY, 110)
    assert batch.times_ns.tolist() == [100, 110]
    assert batch.counts.tolist() == [[7], [10]]
    assert batch.temperature_dc.tolist() == [MISSING, MISSING]


def test_a_body_with_a_column_too_many_is_damaged() -> None:
    batch = Batch(np.array([1], np.int64), np.array([[5]], np.int32), np.zeros(1, np.int32), 1)
    with pytest.raises(RecordError, match="17 bytes too many"):
        unpack(bytes([1]) + pack(batch)[1:], 1)
