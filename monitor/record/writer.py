"""Write the record: one connection, one transaction per commit, fixed SQL."""

from __future__ import annotations

import fcntl
import hashlib
import os
import sqlite3
import threading
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager, suppress
from dataclasses import fields
from itertools import repeat
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import RecordError
from monitor.core.flags import Flag
from monitor.core.readings import Batch
from monitor.core.rows import BlockRows, ExposureRows, FieldRows, WindowRows, count
from monitor.record import connect, coverage, marks, spans
from monitor.record.eventrows import event_row
from monitor.record.packing import pack
from monitor.record.types import BOOT_KINDS, ClockFix, Commit

if TYPE_CHECKING:
    from monitor.core.limits import Scope

WAL_LIMIT_BYTES = 4 << 20


def _insert(table: str, columns: int) -> str:
    # What was judged first stands: a row that is there already is left as it is.
    return f"INSERT INTO {table} VALUES ({', '.join('?' * columns)}) ON CONFLICT DO NOTHING"  # noqa: S608


_BLOCK = _insert("blocks", 13)
_WINDOW = _insert("windows", 10)
_FIELD = _insert("fields", 14)
_EXPOSURE = _insert("exposures", 10)
_FIX = _insert("clock_fixes", 5)
_RAW = "INSERT INTO raw (boot, start_ns, end_ns, n, channels, body) VALUES (?, ?, ?, ?, ?, ?)"
_MARK = "INSERT INTO raw_marks VALUES (?, ?, ?)"
_EVENT = "INSERT INTO events (boot, boot_ns, kind, name, body) VALUES (?, ?, ?, ?, ?)"
_FIND_SCOPE = (
    "SELECT scope FROM scopes WHERE set_id = ? AND edition = ? AND population = ? "
    "AND scope_kind = ? AND averaging_s = ? AND verified = ? AND clause = ?"
)
_PUT_SCOPE = "INSERT INTO scopes SELECT ifnull(max(scope) + 1, 0), ?, ?, ?, ?, ?, ?, ? FROM scopes"
_META = "INSERT OR REPLACE INTO meta VALUES (?, ?)"


class Writer:
    """The only writer of a record. Methods may be called from any thread, one at a time.

    RecordError where the file is no record, is newer, bears the other simulated mark, or has
    another writer. sqlite3.Error passes through where the disk is full or fails.
    """

    def __init__(self, path: Path | str, *, simulated: bool) -> None:
        self.path = Path(path)
        self.simulated = simulated
        self._lock = threading.RLock()
        connect.identify(self.path)
        self._claim = _claim(self.path)
        try:
            self._db = connect.for_writing(self.path, simulated)
            self._db.execute(f"PRAGMA journal_size_limit={WAL_LIMIT_BYTES}")
        except (RecordError, sqlite3.Error):
            os.close(self._claim)
            raise
        self._scope_numbers = np.empty(0, np.int64)
        self._calibrations: dict[str, int] = {}
        self._ends: dict[int, tuple[int, int]] = {}
        self._mark = -1, -1

    def begin_boot(self, boot_id: str, kind: str) -> int:
        """Number of the boot; the same again when boot_id and kind were here before."""
        if kind not in BOOT_KINDS:
            raise RecordError(f"{self.path}: boot kind {kind!r} is not one of {BOOT_KINDS}")
        # What can be measured again need not wait for the disk; a power cut then takes back
        # the last commits, whole.
        level = "FULL" if kind == "machine" else "NORMAL"
        with self._lock:
            self._db.execute(f"PRAGMA synchronous={level}")
            with self._transaction():
                number = self._number(
                    "SELECT boot FROM boots WHERE boot_id = ? AND kind = ?",
                    "INSERT INTO boots (boot_id, kind) VALUES (?, ?)",
                    (boot_id, kind),
                )
                self._db.execute(_META, ("current_boot", str(number)))
        return number

    def put_document(self, kind: str, body: bytes) -> str:
        """Keep a calibration, a limit set, a site file; returns its SHA-256 in hex."""
        digest = hashlib.sha256(body).hexdigest()
        with self._transaction():
            self._number(
                "SELECT document FROM documents WHERE hash = ?1",
                "INSERT INTO documents (hash, kind, body) VALUES (?, ?, ?)",
                (digest, kind, body),
            )
        return digest

    def put_channels(self, channels: Sequence[tuple[int, str, str, str]]) -> None:
        """(index, name, axis, band) of each column of raw counts; a record has one layout."""
        wanted = [tuple(row) for row in channels]
        with self._transaction():
            found = self._db.execute("SELECT * FROM channels ORDER BY channel").fetchall()
            if not found:
                self._db.executemany("INSERT INTO channels VALUES (?, ?, ?, ?)", wanted)
            elif found != wanted:
                names = ", ".join(f"{row[1]} {row[2]} {row[3]}".strip() for row in found)
                raise RecordError(
                    f"{self.path}: holds other channels ({names}); "
                    "name a new file under record.path"
                )

    def put_scopes(self, scopes: Sequence[Scope]) -> tuple[int, ...]:
        """Say what ExposureRows.scope counts from now on; returns the record's own numbers."""
        with self._transaction():
            numbers = tuple(
                self._number(_FIND_SCOPE, _PUT_SCOPE, (
                    s.set_id, s.edition, s.population, s.scope, float(s.averaging_s),
                    int(s.verified), s.clause,
                ))
                for s in scopes
            )  # fmt: skip
        self._scope_numbers = np.array(numbers, np.int64)
        return numbers

    def commit(self, boot: int, commit: Commit, derivation: int = 0) -> None:
        """All of the commit or nothing, in one transaction.

        Readings, blocks and windows that are there already are passed over, so a commit may be
        repeated. A derivation other than 0 takes no raw counts.
        """
        if derivation and commit.raw is not None:
            raise RecordError(f"{self.path}: raw counts belong to derivation 0")
        self._refuse_simulated(commit)
        with self._transaction():
            ends = self._put_raw(boot, commit.raw) if commit.raw is not None else None
            if commit.blocks is not None:
                self._put_blocks(derivation, boot, commit.blocks, commit)
            if commit.windows is not None:
                self._put(_WINDOW, derivation, boot, commit.windows)
            if commit.fields is not None:
                self._put_fields(derivation, boot, commit.fields)
            if commit.exposures is not None:
                self._put_exposures(derivation, boot, commit.exposures)
            self._db.executemany(_FIX, (_fix_row(boot, fix) for fix in commit.clock_fixes))
            self._db.executemany(_EVENT, (event_row(boot, event) for event in commit.events))
        if ends is not None:
            self._ends[boot] = ends
        self._bound_wal()

    def close(self) -> None:
        """Bring the WAL into the file and let it go."""
        with self._lock:
            self._db.close()
            if self._claim >= 0:
                os.close(self._claim)
                self._claim = -1

    @contextmanager
    def _transaction(self) -> Iterator[None]:
        with self._lock:
            self._db.execute("BEGIN IMMEDIATE")
            try:
                yield
                self._db.execute("COMMIT")
            except BaseException as error:
                self._calibrations.clear()
                self._mark = -1, -1
                if self._db.in_transaction:
                    self._db.execute("ROLLBACK")
                if isinstance(error, sqlite3.IntegrityError):
                    raise RecordError(f"{self.path}: a row was refused: {error}") from error
                raise

    def _number(self, select: str, insert: str, values: tuple[object, ...]) -> int:
        wanted = values[: select.count("?")]
        row = self._db.execute(select, wanted).fetchone()
        return int(row[0] if row else self._db.execute(insert, values).lastrowid or 0)

    def _refuse_simulated(self, commit: Commit) -> None:
        for rows in (commit.raw, commit.blocks, commit.windows, commit.fields):
            if rows is not None and not self.simulated and np.any(rows.flags & Flag.SIMULATED):
                connect.refuse_other_mark(self.path, False, True)

    def _put_raw(self, boot: int, batch: Batch) -> tuple[int, int]:
        if boot not in self._ends:
            self._ends[boot] = marks.stored_until(self._db, boot)
        last, end = self._ends[boot]
        new = int(np.searchsorted(batch.times_ns, last, side="right"))
        if new:
            batch = batch.part(slice(new, None), batch.now_ns)
        if batch.n == 0 and batch.now_ns <= end:
            return last, end
        start = int(batch.times_ns[0]) if batch.n else batch.now_ns
        row = (boot, start, batch.now_ns, batch.n, batch.counts.shape[1], pack(batch))
        seq = self._db.execute(_RAW, row).lastrowid
        if self._mark != (boot, start // spans.HOUR_NS):
            self._mark = boot, start // spans.HOUR_NS
            self._db.execute(_MARK, (seq, boot, start))
        return (int(batch.times_ns[-1]) if batch.n else last), max(end, batch.now_ns)

    def _put_blocks(self, derivation: int, boot: int, rows: BlockRows, commit: Commit) -> None:
        if not count(rows):
            return
        calibration = self._calibration(commit.calibration)
        reach = (derivation, boot, int(rows.start_ns.min()), int(rows.start_ns.max()))
        known = {start for (start,) in self._db.execute(coverage.KNOWN_SQL, reach)}
        self._db.executemany(coverage.SQL, coverage.of_blocks(derivation, boot, rows, known))
        self._put(_BLOCK, derivation, boot, rows, repeat(commit.temperature_c), repeat(calibration))

    def _put_fields(self, derivation: int, boot: int, rows: FieldRows) -> None:
        self._put(_FIELD, derivation, boot, rows)
        if count(rows):
            self._db.executemany(spans.FIELD_SQL, spans.of_fields(derivation, boot, rows))

    def _put_exposures(self, derivation: int, boot: int, rows: ExposureRows) -> None:
        if not count(rows):
            return
        if not 0 <= rows.scope.min() <= rows.scope.max() < self._scope_numbers.size:
            raise RecordError(f"{self.path}: an exposure names a scope that was never put")
        scope: NDArray[np.int64] = self._scope_numbers[rows.scope]
        columns = [rows.end_ns, scope, rows.ratio_low, rows.ratio_mean, rows.ratio_high]
        columns += [rows.u_db, rows.verdict, rows.added_ratio]
        lists = (column.tolist() for column in columns)
        self._db.executemany(_EXPOSURE, zip(repeat(derivation), repeat(boot), *lists))
        extremes = spans.of_exposures(derivation, boot, rows, scope)
        self._db.executemany(spans.EXPOSURE_SQL, extremes)

    def _put(
        self, sql: str, derivation: int, boot: int, rows: BlockRows | WindowRows | FieldRows,
        *more: Iterable[object],
    ) -> None:  # fmt: skip
        columns = [getattr(rows, column.name).tolist() for column in fields(rows)]
        if len({len(column) for column in columns}) != 1:
            raise RecordError(f"{self.path}: columns of {type(rows).__name__} differ in length")
        self._db.executemany(sql, zip(repeat(derivation), repeat(boot), *columns, *more))

    def _calibration(self, identity: str) -> int | None:
        if not identity:
            return None
        if identity not in self._calibrations:
            self._calibrations[identity] = self._number(
                "SELECT calibration FROM calibrations WHERE identity = ?",
                "INSERT INTO calibrations (identity) VALUES (?)",
                (identity,),
            )
        return self._calibrations[identity]

    def _bound_wal(self) -> None:
        """A long reader keeps the WAL from starting over; once it has gone, cut the WAL back."""
        # The commit stands whatever becomes of this: an error here must not repeat it.
        with suppress(FileNotFoundError, sqlite3.OperationalError):
            if os.path.getsize(f"{self.path}-wal") > 4 * WAL_LIMIT_BYTES:
                self._db.execute("PRAGMA wal_checkpoint(TRUNCATE)").fetchone()


def _claim(path: Path) -> int:
    """Keep a second daemon off; the kernel lets go when this process ends, however it ends."""
    handle = os.open(path.with_name(path.name + ".lock"), os.O_RDWR | os.O_CREAT, 0o600)
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError as error:
        os.close(handle)
        raise RecordError(
            f"{path}: another daemon writes it; stop that one or name another record.path"
        ) from error
    return handle


def _fix_row(boot: int, fix: ClockFix) -> tuple[object, ...]:
    return boot, fix.boot_ns, fix.utc_ns, fix.source, fix.uncertainty_ns
