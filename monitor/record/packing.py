"""Raw counts of one commit as one compact blob, exact to the bit. Layout: FORMAT.md, "raw"."""

from __future__ import annotations

import struct
import zlib

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import RecordError
from monitor.core.readings import Batch

VERSION = 2
_COLUMNS = {1: 2, 2: 3}
"""Columns before the counts, by version: the first had no temperature."""
_HEAD = struct.Struct("<IH")
_COLUMN = struct.Struct("<QQB")
_PLAIN = 128  # bit of the width byte: values, not steps
_LEVEL = 6  # a tenth smaller than level 1; 90 days of raw counts take 3 s longer

U64 = NDArray[np.uint64]


def pack(batch: Batch) -> bytes:
    """All of the batch but its now_ns, which is the row's end_ns."""
    columns = [_packed(x) for x in (batch.times_ns, batch.flags, batch.temperature_dc)]
    columns += [_packed(batch.counts[:, i]) for i in range(batch.counts.shape[1])]
    head = _HEAD.pack(batch.n, batch.counts.shape[1])
    return bytes([VERSION]) + zlib.compress(head + b"".join(columns), _LEVEL)


def unpack(body: bytes, end_ns: int) -> Batch:
    """The very batch that pack() was given. RecordError where the blob is damaged."""
    if not body or body[0] not in _COLUMNS:
        raise RecordError(
            f"raw counts up to boot time {end_ns} ns have packing version "
            f"{body[0] if body else 'none'}, this version reads 1 to {VERSION}; update fieldsill"
        )
    try:
        data = zlib.decompress(body[1:])
        n, channels = _HEAD.unpack_from(data)
        at, columns = _HEAD.size, []
        for _ in range(_COLUMNS[body[0]] + channels):
            column, at = _unpacked(data, at, n)
            columns.append(column)
        if at != len(data):
            raise ValueError(f"{len(data) - at} bytes too many")
    except (zlib.error, struct.error, ValueError) as error:
        raise RecordError(
            f"raw counts up to boot time {end_ns} ns are damaged ({error}); restore a copy"
        ) from error
    before = _COLUMNS[body[0]]
    counts = np.empty((n, channels), np.int32)
    for i, column in enumerate(columns[before:]):
        counts[:, i] = _int32(column)
    temperature_dc = _int32(columns[2]) if before > 2 else None
    times_ns = columns[0].view(np.int64)
    return Batch(times_ns, counts, _int32(columns[1]), end_ns, temperature_dc)


def _packed(values: NDArray[np.signedinteger]) -> bytes:
    """First value; then what follows, as steps or as values, each above the least of them.

    Steps are smaller where a column moves slowly, values where neighbours have nothing to do
    with each other. Arithmetic is modulo 2**64, so that nothing can overflow. Bytes are stored
    plane by plane: all lowest bytes first, because the higher ones hardly vary.
    """
    x = values.astype(np.int64).view(np.uint64)
    if x.size < 2:
        return _COLUMN.pack(int(x[0]) if x.size else 0, 0, 0)
    parts, plain = np.diff(x), 0
    if np.var(values) < np.var(parts.view(np.int64)):
        parts, plain = x[1:], _PLAIN
    least = parts[np.argmin(parts.view(np.int64))]
    above = parts - least
    width = (int(above.max()).bit_length() + 7) // 8
    planes = above.astype("<u8").view(np.uint8).reshape(-1, 8)[:, :width]
    body: bytes = planes.T.tobytes()
    return _COLUMN.pack(int(x[0]), int(least), width | plain) + body


def _int32(column: U64) -> NDArray[np.int32]:
    return column.view(np.int64).astype(np.int32)


def _unpacked(data: bytes, at: int, n: int) -> tuple[U64, int]:
    first, least, kind = _COLUMN.unpack_from(data, at)
    width, plain = kind & ~_PLAIN, kind & _PLAIN
    at += _COLUMN.size
    out = np.empty(n, np.uint64)
    if n:
        length = width * (n - 1)
        planes = np.zeros((n - 1, 8), np.uint8)
        stored = np.frombuffer(data, np.uint8, length, at).reshape(width, n - 1)
        planes[:, :width] = stored.T
        out[0] = first
        out[1:] = planes.view("<u8")[:, 0] + np.uint64(least)
        if not plain:
            np.cumsum(out, out=out)
        at += length
    return out, at
