"""Open a record, and refuse what is none. Never imports sqlite-utils: the daemon comes here."""

from __future__ import annotations

import errno
import os
import sqlite3
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

from monitor.core.errors import RecordError

APPLICATION_ID = 0x46534C4C
SCHEMA_VERSION = 2
DISK_TROUBLE = 75
"""Exit code of the schema's process where only the disk is in the way (EX_TEMPFAIL)."""
_BUSY_MS = 2000
_SHM_BYTES = 32768  # the least that a wal-index in use has (SQLite file format, section 4)
_DISK_CODES = frozenset(
    (sqlite3.SQLITE_FULL, sqlite3.SQLITE_IOERR, sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED)
)
_DISK_ERRNOS = frozenset((errno.ENOSPC, errno.EDQUOT, errno.EIO, errno.EFBIG))


class DiskTroubleError(RecordError):
    """The record may be good, but the disk is full or fails: try again later."""


@dataclass(frozen=True, slots=True)
class Identity:
    """What a file says of itself: schema version and whether its data are simulated."""

    version: int
    simulated: bool


def ensure(path: Path, simulated: bool) -> None:
    """Make the record, or bring an older one up to this version's schema, in a child process.

    RecordError where the file is no record, is newer, or bears the other simulated mark; then
    nothing is written. DiskTroubleError where the disk has no room or fails.
    """
    if path.exists():
        found = identify(path)
        refuse_other_mark(path, found.simulated, simulated)
        if found.version == SCHEMA_VERSION:
            return
    elif not path.parent.is_dir():
        raise RecordError(f"{path}: folder {path.parent} does not exist; make it first")
    package_root = str(Path(__file__).resolve().parents[2])
    search = os.pathsep.join(filter(None, (package_root, os.environ.get("PYTHONPATH"))))
    done = subprocess.run(  # the interpreter itself, no shell
        [sys.executable, "-P", "-m", "monitor.record.schema", str(path)]
        + ["--simulated", "1" if simulated else "0"],
        env={**os.environ, "PYTHONPATH": search},
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        check=False,
    )
    if done.returncode:
        last = (done.stderr.strip().splitlines() or ["no message"])[-1]
        kind = DiskTroubleError if done.returncode == DISK_TROUBLE else RecordError
        raise kind(last if last.startswith(str(path)) else f"{path}: not made: {last}")


def identify(path: Path) -> Identity:
    """Read the marks of a record; RecordError where it is none or is newer than this version."""
    connection = read_only(path)
    try:
        return _identity(path, connection)
    finally:
        connection.close()


def read_only(path: Path) -> sqlite3.Connection:
    """A connection that only reads; it works beside the daemon, after it and after its crash.

    Without write permission, or on a full disk, nobody can make the side files that WAL needs
    once the writer has closed cleanly: then, and only where they hold nothing, the file is read
    as it is.
    """
    if not path.is_file():
        raise RecordError(f"{path}: no such record; start fieldsill measure, or name another")
    connection = _connect(path, "mode=ro")
    try:
        connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
    except sqlite3.OperationalError as error:
        connection.close()
        if _size(path, "-wal") > 0 or _size(path, "-shm") >= _SHM_BYTES:
            text = f"{path}: cannot be read: {error}; check its permissions and the disk"
            raise failure(error)(text) from error
        return _connect(path, "mode=ro&immutable=1")
    except sqlite3.DatabaseError as error:
        connection.close()
        raise _no_record(path) from error
    return connection


def for_writing(path: Path, simulated: bool) -> sqlite3.Connection:
    """The one connection that writes and checkpoints; checks every mark before it writes."""
    found = identify(path)
    refuse_other_mark(path, found.simulated, simulated)
    if found.version != SCHEMA_VERSION:
        raise RecordError(older(path, found))
    connection = _connect(path, "mode=rw", read_only_file=False)
    connection.execute("PRAGMA journal_mode=WAL")
    connection.execute("PRAGMA cell_size_check=ON")
    return connection


def older(path: Path, found: Identity) -> str:
    """What to say of a record that is not yet of this version's schema."""
    return (
        f"{path}: schema {found.version} is older than {SCHEMA_VERSION}; start fieldsill measure, "
        f"or run python -m monitor.record.schema {path} --simulated {int(found.simulated)}"
    )


def failure(error: OSError | sqlite3.Error) -> type[RecordError]:
    """DiskTroubleError where the disk is full, fails or is busy; else RecordError."""
    if isinstance(error, OSError):
        trouble = error.errno in _DISK_ERRNOS
    else:
        trouble = getattr(error, "sqlite_errorcode", 0) & 0xFF in _DISK_CODES
    return DiskTroubleError if trouble else RecordError


def refuse_other_mark(path: Path, found: bool, wanted: bool) -> None:
    """RecordError where real data would meet simulated data."""
    if found != wanted:
        words = {True: "simulated", False: "real"}
        raise RecordError(
            f"{path}: holds {words[found]} data and refuses {words[wanted]} readings; "
            "name another file under record.path"
        )


def _connect(path: Path, mode: str, read_only_file: bool = True) -> sqlite3.Connection:
    try:
        connection = sqlite3.connect(
            f"{path.resolve().as_uri()}?{mode}",
            uri=True,
            isolation_level=None,
            check_same_thread=False,
            timeout=_BUSY_MS / 1000,
        )
    except sqlite3.OperationalError as error:
        text = f"{path}: cannot be opened: {error}; check its permissions"
        raise failure(error)(text) from error
    if read_only_file:
        # Only the writer's connection may checkpoint (SQLite before 3.51.3 can corrupt a WAL
        # that two connections reset).
        connection.execute("PRAGMA wal_autocheckpoint=0")
    return connection


def _size(path: Path, end: str) -> int:
    side = path.with_name(path.name + end)
    return side.stat().st_size if side.exists() else 0


def _identity(path: Path, connection: sqlite3.Connection) -> Identity:
    try:
        (application,) = connection.execute("PRAGMA application_id").fetchone()
        (version,) = connection.execute("PRAGMA user_version").fetchone()
        if application != APPLICATION_ID or version < 1:
            raise _no_record(path)
        if version > SCHEMA_VERSION:
            raise RecordError(
                f"{path}: schema {version} is newer than this version's {SCHEMA_VERSION}; "
                "update fieldsill"
            )
        row = connection.execute("SELECT value FROM meta WHERE key = 'simulated'").fetchone()
    except sqlite3.DatabaseError as error:
        raise failure(error)(f"{path}: cannot be read: {error}; restore a copy") from error
    if row is None or row[0] not in ("0", "1"):
        raise RecordError(f"{path}: says neither simulated nor real; restore a copy")
    return Identity(version, row[0] == "1")


def _no_record(path: Path) -> RecordError:
    return RecordError(f"{path}: is no record of fieldsill; name another file under record.path")
