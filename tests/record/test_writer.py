"""What goes in comes out to the bit, once, and only into the right file."""

from __future__ import annotations

import sqlite3
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from monitor.core.errors import RecordError
from monitor.core.flags import Flag
from monitor.core.limits import Scope
from monitor.core.rows import Event
from monitor.record import schema
from monitor.record.reader import Record
from monitor.record.types import Commit
from monitor.record.writer import WAL_LIMIT_BYTES, Writer
from tests.record.making import (
    CHANNELS,
    MINUTE,
    SCOPES,
    S,
    blocks,
    check_same,
    exposure_rows,
    field_rows,
    raw,
    windows,
    writer_of,
)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """Where the test's record goes."""
    return tmp_path / "site.db"


def _full_commit(first_s: int) -> Commit:
    ends = first_s * S + MINUTE * np.arange(1, 6)
    return Commit(
        raw(first_s, 300, seed=first_s), blocks(first_s, 30), windows(first_s, 5),
        field_rows(ends, np.array([1.0, np.nan, 2.0, 0.1, 3.0])),
        exposure_rows(ends, np.array([0.1, np.nan, 0.2, 0.3, np.inf])),
        temperature_c=21.5, calibration="cal",
    )  # fmt: skip


def test_rows_come_back_to_the_bit(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    commit = _full_commit(600)
    writer.commit(boot, commit)
    with Record.open(path) as record:
        check_same(record.blocks(boot), commit.blocks)
        check_same(record.windows(boot), commit.windows)
        check_same(record.fields(boot), commit.fields)
        check_same(record.exposures(boot), commit.exposures)
        (batch,) = record.raw_batches(boot)
        check_same(batch, commit.raw)
    writer.close()


def test_a_repeated_commit_changes_nothing(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    writer.commit(boot, _full_commit(600))
    before = sorted(_dump(path))
    writer.commit(boot, _full_commit(600))
    writer.close()
    again = Writer(path, simulated=True)
    assert again.begin_boot("b", "machine") == boot
    again.put_scopes(SCOPES)
    again.commit(boot, _full_commit(600))
    again.close()
    assert sorted(_dump(path)) == before


def _dump(path: Path) -> list[str]:
    db = sqlite3.connect(path)
    try:
        return list(db.iterdump())
    finally:
        db.close()


def test_readings_that_are_there_are_passed_over(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("series", "series")
    whole = raw(0, 100)
    first = whole.part(slice(60), int(whole.times_ns[59]))
    writer.commit(boot, Commit(first))
    writer.commit(boot, Commit(whole))
    writer.close()
    with Record.open(path) as record:
        found = list(record.raw_batches(boot))
    assert np.concatenate([b.times_ns for b in found]).tolist() == whole.times_ns.tolist()
    assert np.concatenate([b.counts for b in found]).tolist() == whole.counts.tolist()
    temperature_dc = np.concatenate([b.temperature_dc for b in found])
    assert temperature_dc.tolist() == whole.temperature_dc.tolist()


def test_boots_are_numbered_by_identity_and_kind(path: Path) -> None:
    writer = writer_of(path)
    numbers = [
        writer.begin_boot(*boot)
        for boot in [("a", "machine"), ("b", "machine"), ("a", "series"), ("a", "machine")]
    ]
    assert numbers[3] == numbers[0]
    assert len(set(numbers)) == 3
    with pytest.raises(RecordError, match="'dream'"):
        writer.begin_boot("a", "dream")
    writer.close()


def test_only_the_machines_own_boot_waits_for_the_disk(path: Path) -> None:
    writer = writer_of(path)
    levels = {}
    for kind in ("series", "machine", "rehearsal"):
        writer.begin_boot("b", kind)
        levels[kind] = writer._db.execute("PRAGMA synchronous").fetchone()[0]  # noqa: SLF001
    writer.close()
    assert levels == {"machine": 2, "series": 1, "rehearsal": 1}  # FULL, NORMAL


@pytest.mark.parametrize("part", ["raw", "blocks", "windows", "fields"])
def test_simulated_rows_never_enter_a_real_record(path: Path, part: str) -> None:
    writer = writer_of(path, simulated=False)
    boot = writer.begin_boot("b", "machine")
    rows = getattr(_full_commit(0), part)
    marked = replace(rows, flags=rows.flags | int(Flag.SIMULATED))
    with pytest.raises(RecordError, match="holds real data and refuses simulated readings"):
        writer.commit(boot, Commit(**{part: marked}))
    writer.commit(boot, Commit(**{part: rows}))
    writer.close()


def test_a_second_writer_is_refused_until_the_first_has_gone(path: Path) -> None:
    writer = writer_of(path)
    with pytest.raises(RecordError, match="another daemon writes it"):
        Writer(path, simulated=True)
    writer.close()
    Writer(path, simulated=True).close()
    assert not path.with_name("site.db-wal").exists()


@pytest.mark.parametrize("hole", ["energy_w_ns"])
def test_a_figure_that_is_none_is_refused_whole(path: Path, hole: str) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    good = _full_commit(0)
    assert good.blocks is not None
    broken = getattr(good.blocks, hole).copy()
    broken[-1] = np.nan
    with pytest.raises(RecordError, match=f"a row was refused: .*{hole}"):
        writer.commit(boot, replace(good, blocks=replace(good.blocks, **{hole: broken})))
    with Record.open(path) as record:
        assert record.blocks(boot).n.size == 0
        assert list(record.raw_batches(boot)) == []
    writer.commit(boot, good)
    with Record.open(path) as record:
        check_same(record.blocks(boot), good.blocks)
    writer.close()


def test_columns_of_unequal_length_are_refused(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    rows = blocks(0, 3)
    with pytest.raises(RecordError, match="BlockRows differ in length"):
        writer.commit(boot, Commit(blocks=replace(rows, n=rows.n[:-1])))
    writer.close()


def test_a_record_has_one_set_of_channels(path: Path) -> None:
    writer = writer_of(path)
    writer.put_channels(CHANNELS)
    with pytest.raises(RecordError, match="other channels .*east x mast.*; name a new file"):
        writer.put_channels(CHANNELS[:2])
    writer.close()


def test_scopes_keep_their_numbers_whatever_the_order(path: Path) -> None:
    writer = writer_of(path)
    assert writer.put_scopes(SCOPES) == (0, 1)
    third = Scope("fcc-1.1310", "2020", "occupational", "whole_body", 360.0, False, "(e)(1)")
    assert writer.put_scopes([third, SCOPES[1]]) == (2, 1)
    boot = writer.begin_boot("b", "machine")
    ends = MINUTE * np.arange(1, 3)
    writer.commit(boot, Commit(exposures=exposure_rows(ends, np.ones(2), scope=0)))
    with pytest.raises(RecordError, match="never put"):
        writer.commit(boot, Commit(exposures=exposure_rows(ends, np.ones(2), scope=2)))
    writer.close()
    with Record.open(path) as record:
        assert record.scopes() == {0: SCOPES[0], 1: SCOPES[1], 2: third}
        assert record.exposures(boot).scope.tolist() == [2, 2]


def test_documents_are_kept_by_their_hash(path: Path) -> None:
    writer = writer_of(path)
    digest = writer.put_document("calibration", b"abc")
    assert writer.put_document("calibration", b"abc") == digest
    writer.close()
    # SHA-256 of "abc": FIPS 180-4, example 1
    assert digest == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    with Record.open(path) as record:
        assert record.document(digest) == ("calibration", b"abc")
        assert record.document("00") is None


def test_a_derivation_stands_beside_the_live_figures(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    writer.commit(boot, Commit(blocks=blocks(0, 3, seed=1)))
    writer.commit(boot, Commit(blocks=blocks(0, 3, seed=2)), derivation=1)
    with pytest.raises(RecordError, match="derivation 0"):
        writer.commit(boot, Commit(raw=raw(0, 3)), derivation=1)
    writer.close()
    with Record.open(path) as record:
        check_same(record.blocks(boot), blocks(0, 3, seed=1))


@pytest.mark.parametrize(
    "bad",
    [
        Event(1, "fault", "f", {"value": float("nan")}),
        Event(1, "fault", "f", {"value": object()}),
        Event(2**70, "fault", "f", {}),
    ],
)
def test_an_event_that_cannot_be_kept_becomes_a_fault_and_costs_nothing_else(
    path: Path, bad: Event
) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    good = Event(1, "note", "n", {"value": 1.5})
    writer.commit(boot, Commit(raw=raw(0, 9), events=(bad, good)))
    writer.close()
    with Record.open(path) as record:
        fault, kept = record.events()
        assert sum(batch.n for batch in record.raw_batches(boot)) == 9
    assert (fault.kind, fault.name) == ("fault", "event not kept")
    assert fault.body["why"]
    assert kept.body == {"value": 1.5}


def test_what_is_no_character_is_mended(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "machine")
    body = {"text": "\ud800 hello \ud83d\ude00 ü"}
    writer.commit(boot, Commit(events=(Event(1, "note", "me\udc80", body),)))
    writer.close()
    with Record.open(path) as record:
        (event,) = record.events()
    assert event.name == "me\ufffd"
    assert event.body == {"text": "\ufffd hello \U0001f600 ü"}


def test_the_log_is_cut_back_once_a_long_reader_has_gone(path: Path) -> None:
    writer = writer_of(path)
    boot = writer.begin_boot("b", "rehearsal")
    wal = path.with_name("site.db-wal")
    reader = sqlite3.connect(f"file:{path}?mode=ro", uri=True, isolation_level=None)
    reader.execute("BEGIN")
    reader.execute("SELECT count(*) FROM blocks").fetchone()
    for hour in range(200):
        writer.commit(boot, Commit(blocks=blocks(3600 * hour, 360), raw=raw(3600 * hour, 3600)))
        if wal.stat().st_size > 4 * WAL_LIMIT_BYTES:
            break
    assert wal.stat().st_size > 4 * WAL_LIMIT_BYTES
    reader.execute("COMMIT")
    reader.close()
    writer.commit(boot, Commit(blocks=blocks(900_000, 1)))
    assert wal.stat().st_size <= WAL_LIMIT_BYTES
    writer.close()


def test_an_older_record_asks_for_its_migration(
    path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    schema.create(path, False)
    monkeypatch.setattr("monitor.record.connect.SCHEMA_VERSION", 3)
    with pytest.raises(RecordError, match="schema 2 is older than 3; start fieldsill"):
        Writer(path, simulated=False)
