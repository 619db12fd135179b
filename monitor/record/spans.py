"""Each hour and each day of a boot in one row: what draws ten years without reading them.

A span keeps the extremes of its windows, so a peak is never averaged away. Extremes can be
merged in any order and any number of times, so a repeated commit changes nothing. A day's row
stands behind its hours (hour 24), so that both are written to one page.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from monitor.core.interval import total_db
from monitor.core.rows import ExposureRows, FieldRows

HOUR_NS = 3_600_000_000_000
DAY_NS = 24 * HOUR_NS
WHOLE_DAY = 24

Order = NDArray[np.intp]
Whole = NDArray[np.int64]


def _wider(operation: str, column: str) -> str:
    return (
        f"{column} = {operation}(coalesce({column}, excluded.{column}), "
        f"coalesce(excluded.{column}, {column}))"
    )


def _upsert(table: str, key: str, smallest: str, largest: str, joined: str = "") -> str:
    keys = ["derivation", "boot", "day", "hour", key]
    small, large, bits = smallest.split(), largest.split(), joined.split()
    columns = [*keys, *small, *large, *bits]
    updates = [_wider("min", c) for c in small] + [_wider("max", c) for c in large]
    updates += [f"{c} = {c} | excluded.{c}" for c in bits]
    return (
        f"INSERT INTO {table} ({', '.join(columns)}) VALUES ({', '.join('?' * len(columns))}) "  # noqa: S608
        f"ON CONFLICT DO UPDATE SET {', '.join(updates)}"
    )


FIELD_SQL = _upsert(
    "field_spans",
    "averaging_s",
    "e2_low valid_share",
    "end_ns e2_mean e2_high e2_max u_db",
    "flags",
)
EXPOSURE_SQL = _upsert("exposure_spans", "scope", "ratio_low", "end_ns ratio_mean ratio_high")


def of_fields(derivation: int, boot: int, rows: FieldRows) -> Iterator[tuple[object, ...]]:
    """Parameters of FIELD_SQL; rows: at least one."""
    for order, starts, day, hour, kind in _groups(rows.end_ns, rows.averaging_s):
        least = [np.fmin.reduceat(c[order], starts) for c in (rows.e2_low, rows.valid_share)]
        most = [np.maximum.reduceat(rows.end_ns[order], starts)]
        u_db = total_db(rows.u_db, rows.e2_mean, rows.added_e2, rows.flags)
        most += [
            np.fmax.reduceat(c[order], starts)
            for c in (rows.e2_mean, rows.e2_high, rows.e2_max, u_db)
        ]
        bits = np.bitwise_or.reduceat(rows.flags[order], starts)
        columns = (day, hour, kind, *least, *most, bits)
        for values in zip(*(c.tolist() for c in columns)):
            yield (derivation, boot, *values)


def of_exposures(
    derivation: int, boot: int, rows: ExposureRows, scope: Whole
) -> Iterator[tuple[object, ...]]:
    """Parameters of EXPOSURE_SQL; rows: at least one; scope: the record's number of each."""
    for order, starts, day, hour, number in _groups(rows.end_ns, scope):
        low = np.fmin.reduceat(rows.ratio_low[order], starts)
        ends = np.maximum.reduceat(rows.end_ns[order], starts)
        mean = np.fmax.reduceat(rows.ratio_mean[order], starts)
        high = np.fmax.reduceat(rows.ratio_high[order], starts)
        for values in zip(*(c.tolist() for c in (day, hour, number, low, ends, mean, high))):
            yield (derivation, boot, *values)


def _groups(end_ns: Whole, key: Whole) -> Iterator[tuple[Order, Order, Whole, Whole, Whole]]:
    """For hours, then for days: the rows' order, where each group starts, its day, hour and key.

    A window belongs to the span that holds the moment before its end.
    """
    hours = (end_ns - 1) // HOUR_NS
    for index, whole in ((hours, False), (hours // 24, True)):
        order = np.lexsort((key, index))
        index, keys = index[order], key[order]
        starts = np.flatnonzero(np.r_[True, (np.diff(index) != 0) | (np.diff(keys) != 0)])
        index = index[starts]
        if whole:
            yield order, starts, index, np.full(index.size, WHOLE_DAY), keys[starts]
        else:
            yield order, starts, index // 24, index % 24, keys[starts]
