"""Make a record, or migrate one: python -m monitor.record.schema PATH --simulated 0|1.

Runs in a process of its own, because sqlite-utils costs the daemon's memory and start-up.
"""

from __future__ import annotations

import argparse
import hashlib
import os
import sqlite3
import sys
from importlib.metadata import version
from importlib.resources import files
from pathlib import Path

from sqlite_utils import Database, Migrations

from monitor.core.errors import RecordError
from monitor.core.flags import WORDS
from monitor.record import connect, tables

VERDICT_WORDS = ("undecided", "conforms", "exceeds")

migrations = Migrations("fieldsill")


@migrations(name="1")
def _v1(db: Database) -> None:
    for statement in tables.V1_TABLES.split(";"):
        if statement.strip():
            db.execute(statement)
    for name, select in tables.V1_VIEWS.items():
        db.create_view(name, select)
    db.table("verdict_words").insert_all(
        {"verdict": i, "meaning": word} for i, word in enumerate(VERDICT_WORDS)
    )
    db.execute("PRAGMA user_version = 1")


@migrations(name="2")
def _v2(db: Database) -> None:
    for table, column in tables.V2_COLUMNS:
        if column not in {one.name for one in db.table(table).columns}:
            db.execute(f"ALTER TABLE {table} ADD COLUMN {column} REAL DEFAULT 0.0")
    db.execute(tables.V2_INDEX)
    for name, select in tables.V2_VIEWS.items():
        db.execute(f"DROP VIEW IF EXISTS {name}")
        db.create_view(name, select)
    db.execute("DELETE FROM flag_words")
    db.table("flag_words").insert_all(
        {"bit": int(bit), "meaning": word} for bit, word in WORDS.items()
    )
    body = files("monitor.record").joinpath("FORMAT.md").read_bytes()
    digest = hashlib.sha256(body).hexdigest()
    db.table("documents").insert({"hash": digest, "kind": "format", "body": body}, ignore=True)
    db.execute("PRAGMA user_version = 2")


def create(path: Path, simulated: bool) -> None:
    """Make the record where there is none; else apply what migrations it lacks.

    A new file appears under its name only when it is complete. RecordError where the file is
    no record, is newer, or bears the other simulated mark.
    """
    if path.exists():
        found = connect.identify(path)
        connect.refuse_other_mark(path, found.simulated, simulated)
        _migrate(path)
        return
    draft = path.with_name(f".{path.name}.{os.getpid()}.new")
    try:
        connection = sqlite3.connect(draft)
        try:
            connection.execute("PRAGMA page_size = 1024")
            connection.execute("PRAGMA journal_mode = WAL")
            connection.execute(f"PRAGMA application_id = {connect.APPLICATION_ID}")
            db = Database(connection, execute_plugins=False)
            migrations.apply(db)
            _mark(db, simulated)
        finally:
            connection.close()
        _appear(draft, path)
    except (OSError, sqlite3.Error) as error:
        text = f"{path}: cannot be made: {error}; check folder and space"
        raise connect.failure(error)(text) from error
    finally:
        draft.unlink(missing_ok=True)


def _mark(db: Database, simulated: bool) -> None:
    rows = {"simulated": "1" if simulated else "0", "made_by": f"fieldsill {version('fieldsill')}"}
    with db.atomic():
        db.table("meta").insert_all({"key": key, "value": value} for key, value in rows.items())


def _migrate(path: Path) -> None:
    connection = sqlite3.connect(path)
    try:
        migrations.apply(Database(connection, execute_plugins=False))
    except sqlite3.Error as error:
        text = f"{path}: cannot be migrated: {error}; nothing was changed"
        raise connect.failure(error)(text) from error
    finally:
        connection.close()


def _appear(draft: Path, path: Path) -> None:
    with draft.open("rb") as file:
        os.fsync(file.fileno())
    os.link(draft, path)  # unlike a rename, never replaces a file that came meanwhile
    folder = os.open(path.parent, os.O_RDONLY)
    try:
        os.fsync(folder)
    finally:
        os.close(folder)


def main(argv: list[str] | None = None) -> int:
    """Exit code 0; else 3, or 75 where only the disk is in the way, with one line on stderr."""
    parser = argparse.ArgumentParser(prog="python -m monitor.record.schema")
    parser.add_argument("path", type=Path)
    parser.add_argument("--simulated", choices=("0", "1"), required=True)
    arguments = parser.parse_args(argv)
    try:
        create(arguments.path, arguments.simulated == "1")
    except RecordError as error:
        sys.stderr.write(f"{error}\n")
        trouble = isinstance(error, connect.DiskTroubleError)
        return connect.DISK_TROUBLE if trouble else error.exit_code
    return 0


if __name__ == "__main__":
    sys.exit(main())
