"""How a stored window came about: found in a record, and worked out again from its counts."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass, fields, replace
from pathlib import Path

import numpy as np

from monitor import calfile, calparts, limitsets, wiring
from monitor.config import Site, site_of
from monitor.core.calibration import CountTable
from monitor.core.errors import ConfigError, FieldsillError
from monitor.core.limits import LimitSet, Scope
from monitor.core.readings import NS_PER_S, Batch
from monitor.core.replay import raw_span_ns, taken, window_again
from monitor.core.rows import BlockRows, ExposureRows, FieldRows, WindowRows
from monitor.core.station import Station
from monitor.record.reader import FIRST_NS, LAST_NS, Record
from monitor.record.types import Boot, ChannelRow
from monitor.record.uses import drift_over
from monitor.times import text_of

DAY_NS = 86_400 * NS_PER_S
MOST_EVENTS = 1 << 40
"""More than any record holds."""


@dataclass(frozen=True, slots=True)
class Kept:
    """A window as the record holds it, with the counts, blocks and start of the program below it.

    hashes: name of a document (calibration, site, a limit set, counts and a channel) to SHA-256.
    restarted: the program began anew within the window, so other documents may bear on its start.
    drift_db: of its calibration, as a later one found it.
    """

    boot: Boot
    end_ns: int
    utc_ns: int | None
    averaging_s: int
    simulated: bool
    channels: list[ChannelRow]
    scopes: Mapping[int, Scope]
    windows: WindowRows
    field: FieldRows
    exposures: ExposureRows
    blocks: BlockRows
    raw: list[Batch]
    hashes: Mapping[str, str]
    restarted: bool
    drift_db: float = 0.0


@dataclass(frozen=True, slots=True)
class Basis:
    """What the stored documents say: site, limit sets and the station that they make.

    other_tables: channels whose stored count table is not what today's program makes of the
    calibration; the stored one is used.
    """

    site: Site
    sets: Mapping[str, LimitSet]
    here: Station
    other_tables: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Traced:
    """A window, its basis, and whether it comes out again. equal None: it could not be tried, why.

    differs: the columns that came out otherwise, as 'fields.e2_mean'.
    """

    kept: Kept
    basis: Basis | None
    equal: bool | None
    why: str
    differs: tuple[str, ...]


def trace(path: Path, at_utc_ns: int | None, averaging_s: int) -> Traced:
    """The newest window of that averaging time that ends at or before at_utc_ns (None: of all).

    RecordError where the file is no record; ConfigError where it holds no such window.
    """
    with Record.open(path) as record:
        kept = _kept(record, *_newest(record, at_utc_ns, averaging_s), averaging_s)
        try:
            basis = _basis(record, kept)
        except FieldsillError as error:
            return Traced(kept, None, None, str(error), ())
        span = raw_span_ns(kept.end_ns, averaging_s, basis.here)
        again = window_again(
            basis.here, list(record.raw_batches(kept.boot.boot, *span)), kept.end_ns, averaging_s
        )
    if again is None:
        return Traced(kept, basis, None, "the raw counts do not reach the window's end", ())
    differs = _differs(kept, basis.here, again)
    why = ""
    if differs and kept.restarted:
        why = "the program began anew within the window, perhaps with other files"
    return Traced(kept, basis, not differs, why, differs)


def _newest(record: Record, at_utc_ns: int | None, averaging_s: int) -> tuple[Boot, int]:
    """Boot and end (boot ns) of the window; of several boots the one that ends last in UTC."""
    best: tuple[int, Boot, int] | None = None
    latest = record.latest() if at_utc_ns is None else None
    for boot in record.boots():
        if at_utc_ns is None:
            until = latest.end_ns if latest and latest.boot == boot.boot else FIRST_NS
        elif boot.utc_offset_ns is None:
            continue
        else:
            until = min(max(at_utc_ns - boot.utc_offset_ns, FIRST_NS), LAST_NS - 1)
        end_ns = _last_end(record, boot, until, averaging_s)
        utc_ns = (end_ns or 0) + (boot.utc_offset_ns or 0)
        if end_ns is not None and (best is None or utc_ns > best[0]):
            best = utc_ns, boot, end_ns
    if best is None:
        when = "" if at_utc_ns is None else f" ends at or before {text_of(at_utc_ns)}"
        raise ConfigError(
            f"{record.path}: no window of {averaging_s} s{when}; fieldsill averages lists them"
        )
    return best[1], best[2]


def _last_end(record: Record, boot: Boot, until_ns: int, averaging_s: int) -> int | None:
    for first in (max(until_ns - DAY_NS, FIRST_NS), FIRST_NS):
        rows = record.fields(boot.boot, first, until_ns + 1)
        ends = rows.end_ns[rows.averaging_s == averaging_s]
        if ends.size:
            return int(ends[-1])
    return None


def _kept(record: Record, boot: Boot, end_ns: int, averaging_s: int) -> Kept:
    begin_ns, number = end_ns - averaging_s * NS_PER_S, boot.boot
    windows = record.windows(number, end_ns, end_ns + 1)
    field = record.fields(number, end_ns, end_ns + 1)
    exposures = record.exposures(number, end_ns, end_ns + 1)
    scopes = record.scopes()
    of_time = [round(scopes[number].averaging_s) == averaging_s for number in exposures.scope]
    starts = [
        event
        for event in record.events(limit=MOST_EVENTS)
        if event.boot == number and event.kind == "start" and event.boot_ns <= end_ns
    ]
    hashes = {name: str(value) for name, value in starts[-1].body.items()} if starts else {}
    return Kept(
        boot, end_ns, None if boot.utc_offset_ns is None else end_ns + boot.utc_offset_ns,
        averaging_s, record.simulated,
        record.channels(), scopes,
        taken(windows, windows.averaging_s == averaging_s),
        taken(field, field.averaging_s == averaging_s),
        taken(exposures, np.array(of_time, np.bool_)),
        record.blocks(number, begin_ns, end_ns),
        list(record.raw_batches(number, begin_ns, end_ns)),
        hashes, any(event.boot_ns > begin_ns for event in starts),
        _drift_db(record, number, begin_ns, end_ns),
    )  # fmt: skip


def _drift_db(record: Record, boot: int, begin_ns: int, end_ns: int) -> float:
    drifted = record.calibrations().drifted(boot)
    return float(drift_over(drifted, np.array([begin_ns]), np.array([end_ns]))[0])


def _basis(record: Record, kept: Kept) -> Basis:
    """Site, limit sets and station of the stored documents; an error where one is missing."""
    site = site_of(_document(record, kept, "site"), record.path.with_name("site.toml"))
    sets = {name: limitsets.parse(_document(record, kept, name), name) for name in site.limit_sets}
    calibration = calparts.parse(_document(record, kept, "calibration"))
    front = wiring.averaging_of(site)
    chain = calfile.chain(calibration, site.channels, site.bands, front)
    names = [channel.name for channel in site.channels]
    tables = tuple(
        CountTable.from_bytes(_document(record, kept, f"counts {name}")) for name in names
    )
    others = tuple(
        name for name, old, new in zip(names, tables, chain.tables) if old.identity != new.identity
    )
    here = wiring.station_for(site, replace(chain, tables=tables), sets.__getitem__)
    return Basis(site, sets, here, others)


def _document(record: Record, kept: Kept, name: str) -> bytes:
    digest = kept.hashes.get(name)
    found = record.document(digest) if digest else None
    if found is None:
        raise ConfigError(f"the record does not hold the document {name!r} of that time")
    if hashlib.sha256(found[1]).hexdigest() != digest:
        raise ConfigError(f"the document {name!r} in the record is damaged: its hash is another")
    return found[1]


def _differs(
    kept: Kept, here: Station, again: tuple[WindowRows, FieldRows, ExposureRows]
) -> tuple[str, ...]:
    """Columns that are not equal to the bit; exposures by the scopes' numbers in the record."""
    numbers = {scope: number for number, scope in kept.scopes.items()}
    known = [numbers.get(here.scopes[index], -1) for index in again[2].scope]
    judged = replace(again[2], scope=np.array(known, np.int64))
    judged = taken(judged, np.argsort(judged.scope, kind="stable"))  # type: ignore[arg-type]
    pairs = (
        ("windows", kept.windows, again[0]),
        ("fields", kept.field, again[1]),
        ("exposures", kept.exposures, judged),
    )
    return tuple(
        f"{table}.{column.name}"
        for table, old, new in pairs
        for column in fields(old)
        if not _same(getattr(old, column.name), getattr(new, column.name))
    )


def _same(old: np.ndarray, new: np.ndarray) -> bool:
    """Equal to the bit; a figure that is not there equals another that is not."""
    new = new.astype(old.dtype)
    if old.shape != new.shape:
        return False
    bare = np.isnan(old) & np.isnan(new) if old.dtype.kind == "f" else np.zeros(old.shape, bool)
    return bool(old[~bare].tobytes() == new[~bare].tobytes())
