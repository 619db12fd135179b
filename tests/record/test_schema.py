"""Records are made whole, migrated whole, and nothing else is touched."""

from __future__ import annotations

import hashlib
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest
from sqlite_utils import Database

from monitor.core.errors import RecordError
from monitor.core.exposure import Verdict
from monitor.core.flags import Flag
from monitor.record import connect, schema
from monitor.record.writer import Writer
from tests.record.making import SCOPES, writer_of


def _pragma(path: Path, name: str) -> object:
    db = sqlite3.connect(path)
    try:
        return db.execute(f"PRAGMA {name}").fetchone()[0]
    finally:
        db.close()


def test_a_new_record_has_its_marks(tmp_path: Path) -> None:
    path = tmp_path / "site.db"
    connect.ensure(path, True)
    assert connect.identify(path) == connect.Identity(2, True)
    assert _pragma(path, "application_id") == 0x46534C4C
    assert _pragma(path, "page_size") == 1024
    assert _pragma(path, "journal_mode") == "wal"
    assert [p.name for p in tmp_path.iterdir() if p.name.endswith(".new")] == []


def test_every_table_is_strict(tmp_path: Path) -> None:
    path = tmp_path / "site.db"
    schema.create(path, False)
    db = sqlite3.connect(path)
    rows = db.execute("SELECT name, wr, strict FROM pragma_table_list WHERE type='table'")
    found = {name: (wr, strict) for name, wr, strict in rows if not name.startswith(("sq", "_sq"))}
    db.close()
    assert {"raw", "blocks", "windows", "fields", "exposures", "events"} <= set(found)
    assert [name for name, (_, strict) in found.items() if not strict] == []
    assert {n for n in ("blocks", "windows", "fields", "exposures") if not found[n][0]} == set()


def test_words_in_the_file_are_those_of_the_core(tmp_path: Path) -> None:
    path = tmp_path / "site.db"
    schema.create(path, False)
    db = sqlite3.connect(path)
    bits = {row[0] for row in db.execute("SELECT bit FROM flag_words")}
    verdicts = dict(db.execute("SELECT verdict, meaning FROM verdict_words"))
    db.close()
    assert bits == {int(flag) for flag in Flag}
    assert verdicts == {int(v): v.name.lower() for v in Verdict}


def test_ensure_leaves_a_current_record_alone(tmp_path: Path) -> None:
    path = tmp_path / "site.db"
    schema.create(path, True)
    before = path.read_bytes()
    connect.ensure(path, True)
    assert path.read_bytes() == before


@pytest.mark.parametrize("content", [b"", b"time,dbm\n0,-50\n" * 400])
def test_a_file_that_is_no_record_is_refused_and_not_written(
    tmp_path: Path, content: bytes
) -> None:
    path = tmp_path / "levels.csv"
    path.write_bytes(content)
    for refuses in (
        lambda: connect.ensure(path, True),
        lambda: schema.create(path, True),
        lambda: Writer(path, simulated=True),
        lambda: connect.identify(path),
    ):
        with pytest.raises(RecordError, match="no record") as caught:
            refuses()
        assert "\n" not in str(caught.value)
    assert path.read_bytes() == content
    assert list(tmp_path.iterdir()) == [path]


def test_another_sqlite_file_is_refused_and_not_written(tmp_path: Path) -> None:
    path = tmp_path / "other.db"
    db = sqlite3.connect(path)
    db.execute("CREATE TABLE meta (key TEXT, value TEXT)")
    db.close()
    before = hashlib.sha256(path.read_bytes()).digest()
    with pytest.raises(RecordError, match="is no record"):
        connect.ensure(path, False)
    assert hashlib.sha256(path.read_bytes()).digest() == before


def test_a_newer_record_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "site.db"
    schema.create(path, False)
    db = sqlite3.connect(path)
    db.execute("PRAGMA user_version = 3")
    db.close()
    with pytest.raises(RecordError, match="newer than this version's 2; update"):
        connect.ensure(path, False)
    with pytest.raises(RecordError, match="newer"):
        Writer(path, simulated=False)


@pytest.mark.parametrize(("made", "asked"), [(True, False), (False, True)])
def test_the_other_mark_is_refused(tmp_path: Path, made: bool, asked: bool) -> None:
    path = tmp_path / "site.db"
    schema.create(path, made)
    words = {True: "simulated", False: "real"}
    message = f"holds {words[made]} data and refuses {words[asked]} readings; name another"
    for refuses in (
        lambda: connect.ensure(path, asked),
        lambda: schema.create(path, asked),
        lambda: Writer(path, simulated=asked),
    ):
        with pytest.raises(RecordError, match=message):
            refuses()


def test_a_folder_that_is_not_there_is_named(tmp_path: Path) -> None:
    with pytest.raises(RecordError, match="gone does not exist"):
        connect.ensure(tmp_path / "gone" / "site.db", False)


def test_a_disk_without_room_leaves_nothing(tmp_path: Path) -> None:
    with pytest.raises(RecordError) as caught:
        connect.ensure(Path("/proc/site.db"), False)
    assert str(caught.value).startswith("/proc/site.db: ")
    assert "\n" not in str(caught.value)


def test_a_migration_that_fails_changes_nothing(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "site.db"
    writer_of(path).close()
    later = schema.Migrations("fieldsill")
    later(name="1")(schema._v1)  # noqa: SLF001
    later(name="2")(schema._v2)  # noqa: SLF001

    @later(name="3")
    def breaks(db: Database) -> None:
        db.execute("ALTER TABLE events ADD COLUMN who TEXT")
        db.execute("PRAGMA user_version = 3")
        db.execute("INSERT INTO nowhere VALUES (1)")

    monkeypatch.setattr(schema, "migrations", later)
    with pytest.raises(RecordError, match="nothing was changed"):
        schema.create(path, True)
    assert _pragma(path, "user_version") == 2
    assert "who" not in {c.name for c in Database(path).table("events").columns}


def test_a_migration_keeps_what_is_there(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "site.db"
    writer_of(path).close()
    later = schema.Migrations("fieldsill")
    later(name="1")(schema._v1)  # noqa: SLF001
    later(name="2")(schema._v2)  # noqa: SLF001

    @later(name="3")
    def widens(db: Database) -> None:
        db.execute("ALTER TABLE events ADD COLUMN who TEXT")
        db.execute("PRAGMA user_version = 3")

    monkeypatch.setattr(schema, "migrations", later)
    schema.create(path, True)
    assert _pragma(path, "user_version") == 3
    assert Database(path).table("scopes").count == len(SCOPES)


def test_the_daemons_side_never_loads_the_schema_tools() -> None:
    code = (
        "import sys, monitor.record.background, monitor.record.reader, monitor.control; "
        "print([m for m in ('sqlite_utils', 'pandas', 'scipy', 'flask') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
