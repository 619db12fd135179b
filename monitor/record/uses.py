"""Which calibrations the figures of a record rest on, and what was found out about them later."""

from __future__ import annotations

import sqlite3
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.record.eventrows import RARE, MalformedError, body_of

_STARTS = (
    f"SELECT boot, boot_ns, body FROM events WHERE {RARE} AND kind = 'start' "  # noqa: S608
    "ORDER BY event"
)
_DRIFTS = (
    f"SELECT body FROM events WHERE {RARE} AND kind = 'calibration' "  # noqa: S608
    "AND name = 'drift' ORDER BY event"
)
_LAST_NS = 2**63 - 1
MOST_DB = 1000.0
"""No drift is larger; beyond it nothing could be worked out."""

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741


@dataclass(frozen=True, slots=True)
class Use:
    """From boot_ns of a boot on, until its next use; hashes: SHA-256 of each document by name."""

    boot: int
    boot_ns: int
    hashes: Mapping[str, str]

    @property
    def calibration(self) -> str:
        """SHA-256 of the calibration file; '' where the start does not name it."""
        return self.hashes.get("calibration", "")


@dataclass(frozen=True, slots=True)
class Drift:
    """What calibration next found of the one before: documents are the SHA-256 of its files."""

    documents: frozenset[str]
    next: str
    drift_db: float


@dataclass(frozen=True, slots=True)
class Segment:
    """A part of a boot, [start_ns, end_ns), whose calibration was found to have drifted."""

    start_ns: int
    end_ns: int
    drift_db: float


@dataclass(frozen=True, slots=True)
class Calibrations:
    """Every start of the program with its documents, and every drift, in order."""

    uses: tuple[Use, ...]
    drifts: tuple[Drift, ...]

    def drifted(self, boot: int) -> list[Segment]:
        """The parts of a boot that rest on a calibration that had drifted when next looked at."""
        mine = [use for use in self.uses if use.boot == boot]
        ends = [use.boot_ns for use in mine[1:]] + [_LAST_NS]
        found = [
            Segment(use.boot_ns, end_ns, self._drift_db(use.calibration))
            for use, end_ns in zip(mine, ends)
        ]
        return [segment for segment in found if segment.drift_db > 0.0]

    def _drift_db(self, calibration: str) -> float:
        """What was said last counts: a later file may correct an earlier one."""
        said = [drift.drift_db for drift in self.drifts if calibration in drift.documents]
        return abs(said[-1]) if said else 0.0


def drift_over(segments: Sequence[Segment], after_ns: I, until_ns: I) -> F:
    """Per span (n,), boot ns: the largest drift of the segments that it touches, dB, else 0."""
    out = np.zeros(after_ns.size)
    for segment in segments:
        touches = (after_ns < segment.end_ns) & (until_ns > segment.start_ns)
        out[touches] = np.maximum(out[touches], segment.drift_db)
    return out


def calibrations(db: sqlite3.Connection) -> Calibrations:
    """What the events of a record say of its calibrations; MalformedError for one that is none."""
    return Calibrations(starts(db), tuple(_drift(body_of(body)) for (body,) in db.execute(_DRIFTS)))


def starts(db: sqlite3.Connection) -> tuple[Use, ...]:
    """Every start of the program, in order; MalformedError as of calibrations."""
    return tuple(
        Use(boot, boot_ns, {str(name): str(value) for name, value in body_of(body).items()})
        for boot, boot_ns, body in db.execute(_STARTS)
    )


def _drift(body: Mapping[str, object]) -> Drift:
    """What a drift widens must be known: figures are not to be read as if there were none."""
    documents, later, drift_db = (body.get(key) for key in ("documents", "next", "drift_db"))
    if not (isinstance(documents, list) and all(isinstance(one, str) for one in documents)):
        raise MalformedError("the event of a drift names no documents")
    if isinstance(drift_db, bool) or not isinstance(drift_db, (int, float)):
        raise MalformedError("the event of a drift has no drift_db")
    if not abs(drift_db) <= MOST_DB:
        raise MalformedError(f"the event of a drift has a drift_db of {drift_db}")
    return Drift(frozenset(documents), str(later), float(drift_db))
