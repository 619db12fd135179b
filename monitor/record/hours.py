"""Each clock hour of a boot in one row: what a page needs to draw ten years without reading them.

An hour keeps the extremes of its windows, so a peak is never averaged away. Extremes can be
merged in any order and any number of times, so a repeated commit changes nothing.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from monitor.core.rows import ExposureRows, FieldRows

HOUR_NS = 3_600_000_000_000
NEVER = np.iinfo(np.int64).max

Order = NDArray[np.intp]


def _wider(operation: str, column: str) -> str:
    return (
        f"{column} = {operation}(coalesce({column}, excluded.{column}), "
        f"coalesce(excluded.{column}, {column}))"
    )


def _upsert(table: str, keys: str, smallest: str, largest: str, extra: str = "") -> str:
    small, large = smallest.split(), largest.split()
    columns = [*keys.split(), *small, *large, *extra.split()]
    updates = [_wider("min", c) for c in small] + [_wider("max", c) for c in large]
    updates += [f"{c} = {c} | excluded.{c}" for c in extra.split()]
    return (
        f"INSERT INTO {table} ({', '.join(columns)}) VALUES ({', '.join('?' * len(columns))}) "  # noqa: S608
        f"ON CONFLICT DO UPDATE SET {', '.join(updates)}"
    )


FIELD_SQL = _upsert(
    "field_hours",
    "derivation boot hour averaging_s",
    "first_ns e2_low valid_share",
    "last_ns end_ns e2_mean e2_high e2_max u_db",
    "flags",
)
EXPOSURE_SQL = _upsert(
    "exposure_hours",
    "derivation boot hour scope",
    "ratio_low",
    "end_ns ratio_mean ratio_high",
)


def hour_of(end_ns: NDArray[np.int64]) -> NDArray[np.int64]:
    """The hour a window belongs to: the one that holds the moment before its end."""
    return (end_ns - 1) // HOUR_NS


def fields_by_hour(derivation: int, boot: int, rows: FieldRows) -> Iterator[tuple[object, ...]]:
    """Parameters of FIELD_SQL."""
    order, starts, hours, kinds = _groups(rows.end_ns, rows.averaging_s)
    good = rows.valid_share > 0
    first = np.minimum.reduceat(np.where(good, rows.end_ns, NEVER)[order], starts)
    last = np.maximum.reduceat(np.where(good, rows.end_ns, -1)[order], starts)
    some = first != NEVER
    least = [np.fmin.reduceat(c[order], starts) for c in (rows.e2_low, rows.valid_share)]
    most = [
        np.fmax.reduceat(c[order], starts)
        for c in (rows.e2_mean, rows.e2_high, rows.e2_max, rows.u_db)
    ]
    ends = np.maximum.reduceat(rows.end_ns[order], starts)
    flags = np.bitwise_or.reduceat(rows.flags[order], starts)
    keys = ((derivation, boot), hours.tolist(), kinds.tolist())
    for i, (hour, kind) in enumerate(zip(keys[1], keys[2])):
        span = (int(first[i]), int(last[i])) if some[i] else (None, None)
        yield (
            *keys[0], hour, kind, span[0], float(least[0][i]), float(least[1][i]),
            span[1], int(ends[i]), *(float(c[i]) for c in most), int(flags[i]),
        )  # fmt: skip


def exposures_by_hour(
    derivation: int, boot: int, rows: ExposureRows, scope: NDArray[np.int64]
) -> Iterator[tuple[object, ...]]:
    """Parameters of EXPOSURE_SQL; scope: the record's numbers, one per row."""
    order, starts, hours, scopes = _groups(rows.end_ns, scope)
    low = np.fmin.reduceat(rows.ratio_low[order], starts)
    ends = np.maximum.reduceat(rows.end_ns[order], starts)
    mean = np.fmax.reduceat(rows.ratio_mean[order], starts)
    high = np.fmax.reduceat(rows.ratio_high[order], starts)
    columns = (hours, scopes, low, ends, mean, high)
    for values in zip(*(c.tolist() for c in columns)):
        yield (derivation, boot, *values)


def _groups(
    end_ns: NDArray[np.int64], key: NDArray[np.int64]
) -> tuple[Order, Order, NDArray[np.int64], NDArray[np.int64]]:
    """Order of the rows by (hour, key), where each group starts, and the groups' hours and keys."""
    hour = hour_of(end_ns)
    order = np.lexsort((key, hour))
    hour, key = hour[order], key[order]
    new = np.r_[True, (np.diff(hour) != 0) | (np.diff(key) != 0)]
    starts = np.flatnonzero(new)
    return order, starts, hour[starts], key[starts]
