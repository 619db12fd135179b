"""Read the record: the only SQL that pages, reports and a restarting daemon need."""

from __future__ import annotations

import math
import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path
from types import TracebackType
from typing import Any

import numpy as np

from monitor.core.errors import RecordError
from monitor.core.limits import Scope
from monitor.core.readings import Batch
from monitor.core.rows import BlockRows, ExposureRows, FieldRows, WindowRows
from monitor.record import connect, happened, marks
from monitor.record.eventrows import MalformedError
from monitor.record.fetch import Rows, columns, kinds_of
from monitor.record.fixes import winner
from monitor.record.history import history
from monitor.record.types import (
    Boot,
    ChannelRow,
    ClockFix,
    EventRow,
    History,
    Latest,
    LatestExposure,
    LatestField,
)
from monitor.record.uses import Calibrations, calibrations, starts

FIRST_NS, LAST_NS = -(2**63), 2**63 - 1
_TABLES: dict[type, tuple[str, str]] = {
    BlockRows: ("blocks", "start_ns, channel"),
    WindowRows: ("windows", "end_ns, averaging_s, channel"),
    FieldRows: ("fields", "end_ns, averaging_s"),
    ExposureRows: ("exposures", "end_ns, scope"),
}
_LATEST_FIELDS = (
    "SELECT averaging_s, e2_low, e2_mean, e2_high, e2_max, u_db, k, valid_share, observed_share, "
    "flags, added_e2 FROM fields WHERE derivation = 0 AND boot = ? AND end_ns = ?"
)
_LATEST_EXPOSURES = (
    "SELECT scope, ratio_low, ratio_mean, ratio_high, u_db, verdict, added_ratio FROM exposures "
    "WHERE derivation = 0 AND boot = ? AND end_ns = ?"
)
_FIXES = (
    "SELECT boot, boot_ns, utc_ns - boot_ns, uncertainty_ns FROM clock_fixes "
    "ORDER BY boot, boot_ns, source"
)


class Record:
    """A record opened for reading; open one for each page, and close it."""

    def __init__(self, path: Path, db: sqlite3.Connection, simulated: bool) -> None:
        self.path = path
        self.simulated = simulated
        self._db = db

    @classmethod
    def open(cls, path: Path | str) -> Record:
        """Open read only. RecordError where it is missing, is no record, or is newer."""
        path = Path(path)
        found = connect.identify(path)
        return cls(path, connect.read_only(path), found.simulated)

    def close(self) -> None:
        """Let the file go."""
        self._db.close()

    def __enter__(self) -> Record:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:  # fmt: skip
        self.close()

    def boots(self) -> list[Boot]:
        """Every boot, with its UTC offset by the rule of view boot_utc."""
        with self._one_line(), closing(self._db.execute(_FIXES)) as cursor:
            boot, boot_ns, offset, error = columns(cursor, "iiii")
        known: dict[int, tuple[int, int]] = {}
        for part in np.split(np.arange(boot.size), np.flatnonzero(np.diff(boot)) + 1):
            if part.size:
                at = part[winner(boot_ns[part], offset[part], error[part])]
                known[int(boot[at])] = int(offset[at]), int(error[at])
        rows = self._all("SELECT boot, boot_id, kind FROM boots ORDER BY boot")
        return [Boot(*row, *known.get(row[0], (None, None))) for row in rows]

    def boot_number(self, boot_id: str, kind: str) -> int | None:
        """The boot's number; None where it was never here."""
        rows = self._all("SELECT boot FROM boots WHERE boot_id = ? AND kind = ?", boot_id, kind)
        return int(rows[0][0]) if rows else None

    def clock_fixes(self, boot: int) -> list[ClockFix]:
        """Every clock fix of a boot in the order of time."""
        query = (
            "SELECT boot_ns, utc_ns, source, uncertainty_ns FROM clock_fixes "
            "WHERE boot = ? ORDER BY boot_ns, source"
        )
        return [ClockFix(*row) for row in self._all(query, boot)]

    def channels(self) -> list[ChannelRow]:
        """The channels in the order of the raw counts' columns."""
        return [ChannelRow(*row) for row in self._all("SELECT * FROM channels ORDER BY channel")]

    def scopes(self) -> dict[int, Scope]:
        """Every scope that was ever judged, by the record's number."""
        return {
            number: Scope(set_id, edition, population, kind, averaging_s, bool(verified), clause)
            for number, set_id, edition, population, kind, averaging_s, verified, clause in (
                self._all("SELECT * FROM scopes ORDER BY scope")
            )
        }

    def document(self, digest: str) -> tuple[str, bytes] | None:
        """(kind, body) of the document with that SHA-256."""
        rows = self._all("SELECT kind, body FROM documents WHERE hash = ?", digest)
        return rows[0] if rows else None

    def resume(self, boot: int, since_ns: int) -> tuple[BlockRows, list[Batch]]:
        """What a daemon needs to go on within a boot: blocks from since_ns and raw from there.

        Both are equal to the bit to what was committed.
        """
        return self.blocks(boot, since_ns), list(self.raw_batches(boot, since_ns))

    def raw_batches(
        self, boot: int, start_ns: int | None = None, end_ns: int | None = None
    ) -> Iterator[Batch]:
        """Raw counts with start_ns <= time < end_ns, in the order of time, cut to the span."""
        start = FIRST_NS if start_ns is None else start_ns
        end = LAST_NS if end_ns is None else end_ns
        with self._one_line():
            for batch in marks.batches(self._db, boot, start, end):
                first, last = np.searchsorted(batch.times_ns, (start, end))
                if first == last and batch.now_ns <= start:
                    continue
                if first > 0 or last < batch.n:
                    batch = batch.part(slice(first, last), min(batch.now_ns, end))
                yield batch

    def blocks(self, boot: int, start_ns: int = FIRST_NS, end_ns: int = LAST_NS) -> BlockRows:
        """Blocks with start_ns <= start < end_ns as judged live (derivation 0)."""
        return self._read(BlockRows, boot, start_ns, end_ns)

    def windows(self, boot: int, start_ns: int = FIRST_NS, end_ns: int = LAST_NS) -> WindowRows:
        """Windows whose end is in [start_ns, end_ns)."""
        return self._read(WindowRows, boot, start_ns, end_ns)

    def fields(self, boot: int, start_ns: int = FIRST_NS, end_ns: int = LAST_NS) -> FieldRows:
        """Fields whose window's end is in [start_ns, end_ns)."""
        return self._read(FieldRows, boot, start_ns, end_ns)

    def exposures(self, boot: int, start_ns: int = FIRST_NS, end_ns: int = LAST_NS) -> ExposureRows:
        """Exposure ratios whose window's end is in [start_ns, end_ns); scope as in scopes()."""
        return self._read(ExposureRows, boot, start_ns, end_ns)

    def latest(self) -> Latest | None:
        """The newest windows: of the boot that was written last, else of the latest in UTC."""
        current = self._all("SELECT value FROM meta WHERE key = 'current_boot'")
        ends = []
        for boot in self.boots():
            query = "SELECT max(end_ns) FROM fields WHERE derivation = 0 AND boot = ?"
            ((end_ns,),) = self._all(query, boot.boot)
            if end_ns is not None:
                is_current = bool(current) and int(current[0][0]) == boot.boot
                utc_ns = _utc(boot.utc_offset_ns, end_ns)
                ends.append(((is_current, utc_ns or 0, boot.boot), boot, end_ns))
        return self._latest(*max(ends, key=lambda item: item[0])[1:]) if ends else None

    def history(
        self, start_utc_ns: int, end_utc_ns: int, averaging_s: int, at_most: int = 1000
    ) -> History:
        """Averages whose windows end in (start, end] of UTC, reduced to at_most points.

        ValueError unless start < end and at_most > 0.
        """
        if not start_utc_ns < end_utc_ns or at_most < 1:
            raise ValueError("a history needs start < end and at_most > 0")
        span = start_utc_ns, end_utc_ns
        with self._one_line():
            return history(self._db, self.boots(), span, averaging_s, at_most)

    def events(
        self, start_utc_ns: int | None = None, end_utc_ns: int | None = None, limit: int = 1000,
        *, rare: str = "",
    ) -> list[EventRow]:  # fmt: skip
        """The newest events in [start, end) of UTC, oldest first. rare: of one kind only.

        Events of a boot without a clock fix are given only where no span is asked for.
        """
        boots = self.boots()
        with self._one_line():
            return happened.between(self._db, boots, (start_utc_ns, end_utc_ns), limit, rare)

    def calibrations(self) -> Calibrations:
        """The calibrations that figures rest on, and the drifts that were found of them."""
        with self._one_line():
            return calibrations(self._db)

    def starts(self, boot: int) -> list[tuple[int, str]]:
        """(boot_ns, identity of the chain) of each start of the daemon in a boot, in order."""
        with self._one_line():
            found = starts(self._db)
        return [(use.boot_ns, use.hashes.get("chain", "")) for use in found if use.boot == boot]

    def alarm_events(self) -> list[EventRow]:
        """The few events that leave every alarm as all events would, oldest first.

        Of each name: the newest alarm event, the newest that raised it, and the newest confirmed
        and muted events; a confirmed one only where it came after the alarm was last raised.
        """
        boots = self.boots()
        with self._one_line():
            return happened.of_alarms(self._db, boots)

    def last_reading_ns(self, boot: int) -> int | None:
        """Boot time of the last raw reading; None before the first."""
        with self._one_line():
            reading, _ = marks.stored_until(self._db, boot)
        return reading if reading >= 0 else None

    def _latest(self, boot: Boot, end_ns: int) -> Latest:
        fields = self._all(_LATEST_FIELDS, boot.boot, end_ns)
        exposures = self._all(_LATEST_EXPOSURES, boot.boot, end_ns)
        scopes = self.scopes()
        reading = self.last_reading_ns(boot.boot)
        offset = boot.utc_offset_ns
        flags = 0
        for row in fields:
            flags |= row[-2]
        return Latest(
            boot.boot, boot.kind, end_ns, _utc(offset, end_ns), reading, _utc(offset, reading),
            tuple(_latest_field(*row) for row in fields),
            tuple(_latest_exposure(scopes, *row) for row in exposures),
            flags,
        )  # fmt: skip

    def _read(self, shape: type[Rows], boot: int, start_ns: int, end_ns: int) -> Rows:
        table, order = _TABLES[shape]
        time = order.split(",")[0]
        query = (
            f"SELECT {', '.join(shape.__slots__)} FROM {table} WHERE derivation = 0 "  # noqa: S608
            f"AND boot = ? AND {time} >= ? AND {time} < ? ORDER BY {order}"
        )
        with self._one_line(), closing(self._db.execute(query, (boot, start_ns, end_ns))) as rows:
            return shape(*columns(rows, kinds_of(shape)))

    def _all(self, query: str, *values: object) -> list[tuple[Any, ...]]:
        with self._one_line(), closing(self._db.execute(query, values)) as cursor:
            return cursor.fetchall()

    @contextmanager
    def _one_line(self) -> Iterator[None]:
        try:
            yield
        except (sqlite3.DatabaseError, MalformedError) as error:
            found = connect.identify(self.path)
            if found.version < connect.SCHEMA_VERSION:
                raise RecordError(connect.older(self.path, found)) from error
            raise RecordError(f"{self.path}: cannot be read: {error}; restore a copy") from error


def _utc(offset_ns: int | None, boot_ns: int | None) -> int | None:
    return None if offset_ns is None or boot_ns is None else boot_ns + offset_ns


def _number(value: float | None) -> float:
    return math.nan if value is None else value


def _latest_field(
    averaging_s: int, low: float | None, mean: float | None, high: float | None,
    largest: float | None, u_db: float | None, k: float | None, valid: float, observed: float,
    flags: int, added: float | None,
) -> LatestField:  # fmt: skip
    e_low, e_mean, e_high, e_max = (math.sqrt(_number(e2)) for e2 in (low, mean, high, largest))
    return LatestField(
        averaging_s, e_low, e_mean, e_high, e_max, _number(u_db), _number(k), valid, observed,
        flags, _number(added),
    )  # fmt: skip


def _latest_exposure(
    scopes: dict[int, Scope], number: int, low: float | None, mean: float | None,
    high: float | None, u_db: float | None, verdict: int, added: float | None,
) -> LatestExposure:  # fmt: skip
    ratios = (_number(low), _number(mean), _number(high), _number(u_db))
    return LatestExposure(number, scopes[number], *ratios, verdict, _number(added))
