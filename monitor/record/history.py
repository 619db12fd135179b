"""Averages over a span of UTC, reduced for a picture so that no peak and no gap is lost."""

from __future__ import annotations

import sqlite3
from collections.abc import Mapping, Sequence
from contextlib import closing
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from monitor.core.flags import UPPER_BOUND
from monitor.core.interval import total_db
from monitor.core.readings import NS_PER_S
from monitor.record.coverage import Coverage, coverage
from monitor.record.drift import raised, widened
from monitor.record.fetch import columns
from monitor.record.spans import DAY_NS, HOUR_NS
from monitor.record.types import Boot, History, I
from monitor.record.uses import Calibrations, calibrations

_E2 = ("e2_low", "e2_mean", "e2_high", "e2_max")
_VALUES = "e2_low, e2_mean, e2_high, e2_max, u_db, valid_share, flags"
_ADDED = {"fields": "added_e2", "field_spans": "0.0"}
"""A span keeps the largest total of its windows; of a window it is still to be made."""
_RATIOS = "scope, ratio_low, ratio_mean, ratio_high"
_RATIO_U = {"exposures": "u_db, added_ratio", "exposure_spans": "NULL, NULL"}
_OF_AVERAGING = "scope IN (SELECT scope FROM scopes WHERE averaging_s = ?4)"
_DAYS = (
    "WITH RECURSIVE days (d) AS (SELECT ?2 UNION ALL SELECT d + 1 FROM days WHERE d < ?3) "
    "SELECT {} FROM days JOIN {} ON derivation = 0 AND boot = ?1 AND day = d AND hour = 24 AND {}"
)
_HOURS = (
    "SELECT {} FROM {} WHERE derivation = 0 AND boot = ?1 AND day >= ?2 / 24 AND day <= ?3 / 24 "
    "AND hour < 24 AND day * 24 + hour BETWEEN ?2 AND ?3 AND {}"
)
_WINDOWS = (
    "SELECT {} FROM {} WHERE derivation = 0 AND boot = ?1 AND end_ns > ?2 AND end_ns <= ?3 AND {}"
)


@dataclass(frozen=True, slots=True)
class _Source:
    """Where points come from, by the width of a bin. fields, ratios: key, end, ... of each row."""

    unit_ns: int
    fields: str
    ratios: str


def _spans(unit_ns: int, query: str, key: str) -> _Source:
    fields = query.format(
        f"{key}, end_ns, {_VALUES}, {_ADDED['field_spans']}", "field_spans", "averaging_s = ?4"
    )
    ratios = query.format(
        f"{key}, end_ns, {_RATIOS}, {_RATIO_U['exposure_spans']}", "exposure_spans", _OF_AVERAGING
    )
    return _Source(unit_ns, fields, ratios)


_SOURCES = (
    _spans(DAY_NS, _DAYS, "day"),
    _spans(HOUR_NS, _HOURS, "day * 24 + hour"),
    _Source(
        0,
        _WINDOWS.format(
            f"end_ns, end_ns, {_VALUES}, {_ADDED['fields']}", "fields", "averaging_s = ?4"
        ),
        _WINDOWS.format(
            f"end_ns, end_ns, {_RATIOS}, {_RATIO_U['exposures']}", "exposures", _OF_AVERAGING
        ),
    ),
)
"""Coarse to fine: bins at least half as wide as the unit are drawn from its extremes."""
_EXTENT = (
    "SELECT (SELECT min(end_ns) FROM fields WHERE derivation = 0 AND boot = ?1), "
    "(SELECT max(end_ns) FROM fields WHERE derivation = 0 AND boot = ?1)"
)
_OF_RATIO = ("ratio_low", "ratio_mean", "ratio_high", "ratio_u_db", "ratio_added")
_RAISED = ("e2_mean", "e2_high", "ratio_mean", "ratio_high")
_SMALLEST = ("e2_low", "valid_share", "ratio_low")

Column = NDArray[Any]
Table = dict[str, Column]


def history(
    db: sqlite3.Connection, boots: Sequence[Boot], span: tuple[int, int], averaging_s: int,
    at_most: int,
) -> History:  # fmt: skip
    """See Record.history; span: (start, end] in UTC ns. Boots without a clock fix are left out.

    Bins divide the part of the span that has data. Where they would be half an hour (half a
    day) or wider, points come from the hours (days) of the boot that touch the span.
    """
    first_ns, last_ns = _part_with_data(db, boots, span)
    width = -(-(last_ns - first_ns) // at_most)
    source = next(source for source in _SOURCES if 2 * width >= source.unit_ns)
    held = calibrations(db)
    tables = [
        _of_boot(db, boot, boot.utc_offset_ns, span, averaging_s, source, held)
        for boot in boots
        if boot.utc_offset_ns is not None
    ]
    names = list(dict.fromkeys(name for table in tables for name in table)) or ["utc_ns"]
    merged = {name: _joined(tables, name) for name in names}
    order = np.argsort(merged["utc_ns"], kind="stable")
    merged = {name: column[order] for name, column in merged.items()}
    reduced = merged["utc_ns"].size > at_most
    if reduced:
        merged = _in_bins(merged, (merged["utc_ns"] - first_ns - 1) // width)
    bin_ns = width if reduced else source.unit_ns
    return _as_history(merged, averaging_s, bin_ns, span, coverage(db, boots, span))


def _part_with_data(
    db: sqlite3.Connection, boots: Sequence[Boot], span: tuple[int, int]
) -> tuple[int, int]:
    start, end = span[1], span[0]
    for boot in boots:
        offset = boot.utc_offset_ns
        first, last = db.execute(_EXTENT, (boot.boot,)).fetchone()
        if offset is not None and first is not None:
            start, end = min(start, first + offset - 1), max(end, last + offset)
    start, end = max(start, span[0]), min(end, span[1])
    return (start, end) if start < end else span


def _of_boot(
    db: sqlite3.Connection, boot: Boot, offset: int, span: tuple[int, int], averaging_s: int,
    source: _Source, held: Calibrations,
) -> Table:  # fmt: skip
    """One row for each window end (or hour or day) that has a field or a ratio."""
    start, end = (limit - offset for limit in span)
    if source.unit_ns:
        start, end = start // source.unit_ns, (end - 1) // source.unit_ns
    values = (boot.boot, start, end, averaging_s)
    with closing(db.execute(source.fields, values)) as cursor:
        key, ends, *fields, flags, added = columns(cursor, "iiffffffif")
    base_u_db = fields[4]
    fields[4] = total_db(fields[4], fields[1], added, flags if not source.unit_ns else 0)
    with closing(db.execute(source.ratios, values)) as cursor:
        judged, judged_ends, scope, *ratios = columns(cursor, "iiifffff")
    keys = np.union1d(key, judged)
    utc = np.zeros(keys.size, np.int64)
    utc[np.searchsorted(keys, judged)] = judged_ends
    utc[np.searchsorted(keys, key)] = ends
    table: Table = {"utc_ns": np.clip(utc + offset, span[0] + 1, span[1])}
    place = np.searchsorted(keys, key)
    named = zip((*_E2, "u_db", "valid_share"), fields)
    for name, column in (*named, ("base_u_db", base_u_db), ("added_e2", added)):
        table[name] = _placed(keys.size, place, column)
    start_ns = keys * (source.unit_ns or 1) - averaging_s * NS_PER_S
    end_ns = (keys + 1) * source.unit_ns if source.unit_ns else keys
    wider = widened(db, held, boot.boot, start_ns, end_ns, table["u_db"])
    table["u_db"], table["widened_by_drift_db"] = wider
    table["flags"] = _placed(keys.size, place, flags, 0)
    drift_db = table["widened_by_drift_db"]
    bound = (table["flags"] & int(UPPER_BOUND)) != 0
    # the mean of a row that stands for several is a bound only where none of them has a U
    mean_too = bound & np.isnan(table["u_db"])
    table |= _of_scopes(keys, judged, scope, ratios)
    for name, column in table.items():
        kind = name.split()[0]
        if kind in ("base_u_db", "ratio_u_db"):
            table[name] = widened(db, held, boot.boot, start_ns, end_ns, column)[0]
        elif kind in _RAISED:
            table[name] = raised(column, mean_too if "mean" in kind else bound, drift_db)
    return table


def _of_scopes(keys: I, judged: I, scope: I, ratios: Sequence[Column]) -> Table:
    """The columns of every scope, one row for each key."""
    table: Table = {}
    for number in np.unique(scope).tolist():
        rows = scope == number
        place = np.searchsorted(keys, judged[rows])
        for name, column in zip(_OF_RATIO, ratios):
            table[f"{name} {number}"] = _placed(keys.size, place, column[rows])
    return table


def _placed(size: int, place: NDArray[np.intp], column: Column, empty: float = np.nan) -> Column:
    out = np.full(size, empty, column.dtype)
    out[place] = column
    return out


def _joined(tables: Sequence[Table], name: str) -> Column:
    """One column of all boots; a scope that a boot did not judge is nan there."""
    parts = [table.get(name, np.full(table["utc_ns"].size, np.nan)) for table in tables]
    return np.concatenate(parts) if parts else np.empty(0, np.int64)


def _in_bins(table: Table, bins: I) -> Table:
    """The extremes in each bin that has rows; the bin's time is that of its last row."""
    starts = np.flatnonzero(np.r_[True, np.diff(bins) != 0])
    out: Table = {}
    for name, column in table.items():
        if name == "flags":
            out[name] = np.bitwise_or.reduceat(column, starts)
        else:
            smallest = name.split()[0] in _SMALLEST
            out[name] = (np.fmin if smallest else np.fmax).reduceat(column, starts)
    return out


def _as_history(
    table: Mapping[str, Column], averaging_s: int, bin_ns: int, span: tuple[int, int],
    measured: Coverage,
) -> History:  # fmt: skip
    def column(name: str) -> Column:
        return table.get(name, np.empty(0))

    e_low, e_mean, e_high, e_max = (np.sqrt(column(name)) for name in _E2)
    numbers = sorted(int(name.split()[1]) for name in table if name.startswith("ratio_low"))
    return History(
        averaging_s=averaging_s,
        utc_ns=table["utc_ns"],
        e_low=e_low,
        e_mean=e_mean,
        e_high=e_high,
        e_max=e_max,
        valid_share=column("valid_share"),
        u_db=column("u_db"),
        flags=table.get("flags", np.empty(0, np.int64)),
        ratios={
            n: (column(f"ratio_low {n}"), column(f"ratio_mean {n}"), column(f"ratio_high {n}"))
            for n in numbers
        },
        ratio_u={n: (column(f"ratio_u_db {n}"), column(f"ratio_added {n}")) for n in numbers},
        gaps=measured.gaps(*span),
        bin_ns=bin_ns,
        measured_share=measured.share(span[0], min(span[1], measured.until_ns)),
        coverage=measured,
        widened_by_drift_db=column("widened_by_drift_db"),
        base_u_db=column("base_u_db"),
        added_e2=column("added_e2"),
    )
