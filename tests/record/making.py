"""Rows for a record, drawn from a seed."""

from __future__ import annotations

from dataclasses import fields
from pathlib import Path

import numpy as np

from monitor.core.limits import Scope
from monitor.core.readings import Batch
from monitor.core.rows import BlockRows, ExposureRows, FieldRows, WindowRows
from monitor.record import schema
from monitor.record.types import ClockFix, Commit
from monitor.record.writer import Writer

S = 1_000_000_000
MINUTE = 60 * S
UTC0 = 1_700_000_000 * S
CHANNELS = [(0, "east", "x", "mast"), (1, "north", "y", "mast"), (2, "up", "z", "mast")]
SCOPES = (
    Scope("icnirp-2020", "2020", "general_public", "whole_body", 1800.0, True, "Table 5"),
    Scope("icnirp-2020", "2020", "general_public", "local", 360.0, True, "Table 6"),
)


def writer_of(path: Path, *, simulated: bool = True) -> Writer:
    """A writer on a record with channels and scopes, new where there is none."""
    schema.create(path, simulated)
    writer = Writer(path, simulated=simulated)
    writer.put_channels(CHANNELS)
    writer.put_scopes(SCOPES)
    return writer


def raw(first_s: float, n: int, *, seed: int = 0, spacing_s: float = 1.0) -> Batch:
    """n readings of three channels with jittered times, vouched for until the next is due."""
    rng = np.random.default_rng(seed)
    step = int(spacing_s * S)
    times = int(first_s * S) + step * np.arange(n) + rng.integers(0, step // 10, n)
    counts = rng.integers(-(2**31), 2**31, (n, 3)).astype(np.int32)
    flags = rng.integers(0, 4, n).astype(np.int32)
    temperature_dc = (210 + rng.integers(-2, 3, n)).astype(np.int32)
    return Batch(times, counts, flags, int(first_s * S) + n * step, temperature_dc)


def blocks(first_s: int, n: int, *, seed: int = 0) -> BlockRows:
    """n ten-second blocks of three channels, any double for the power."""
    rng = np.random.default_rng(seed)
    size = 3 * n
    start = np.repeat(first_s * S + 10 * S * np.arange(n), 3)
    energy = rng.random(size) * 10.0 ** rng.integers(-300, 3, size)
    covered = rng.integers(1, 10 * S, size)
    return BlockRows(
        start, np.tile(np.arange(3), n), energy, covered, covered, energy / 3, energy * 3,
        rng.integers(1, 100, size), rng.integers(0, 8, size),
    )  # fmt: skip


def heard(end_ns: np.ndarray, *, covered_s: int = 60) -> BlockRows:
    """The first and the last block of each minute that ends at end_ns, of one channel.

    They claim the whole minute's valid time, covered_s, so as to save the four between them.
    """
    start = (end_ns.astype(np.int64)[:, None] - (MINUTE, 10 * S)).ravel()
    half = np.full(start.size, covered_s * S // 2)
    ones, none = np.ones(start.size), np.zeros(start.size, np.int64)
    return BlockRows(start, none, ones, half, half, ones, ones, none + 1, none)


def windows(first_s: int, n: int, *, seed: int = 0, averaging_s: int = 360) -> WindowRows:
    """n minutes of windows on three channels, from first_s on."""
    rng = np.random.default_rng(seed)
    size = 3 * n
    end = np.repeat(first_s * S + MINUTE * np.arange(1, n + 1), 3)
    covered = rng.integers(1, averaging_s * S, size)
    power = 10.0 ** rng.uniform(-9, -3, size)
    return WindowRows(
        end, np.full(size, averaging_s), np.tile(np.arange(3), n), power * covered, covered,
        covered, power * 2, np.zeros(size, np.int64),
    )  # fmt: skip


def field_rows(end_ns: np.ndarray, e2: np.ndarray, *, averaging_s: int = 360) -> FieldRows:
    """One field a window end; nan in e2 means that nothing was valid."""
    size = end_ns.size
    share = np.where(np.isnan(e2), 0.0, 1.0)
    return FieldRows(
        end_ns.astype(np.int64), np.full(size, averaging_s), np.nan_to_num(e2) / 2, e2, e2 * 2,
        e2 * 3, np.full(size, 2.5), np.full(size, 1.96), share, share, np.zeros(size, np.int64),
        np.zeros(size),
    )  # fmt: skip


def exposure_rows(end_ns: np.ndarray, ratio: np.ndarray, *, scope: int = 1) -> ExposureRows:
    """One ratio a window end, for one scope of SCOPES."""
    size = end_ns.size
    return ExposureRows(
        end_ns.astype(np.int64), np.full(size, scope), ratio / 2, ratio, ratio * 2,
        np.full(size, 1.5), np.full(size, 1), np.zeros(size),
    )  # fmt: skip


def fix(boot_ns: int = 0, utc_ns: int = UTC0, uncertainty_ns: int = 0) -> Commit:
    """A commit that only says what time it is."""
    return Commit(clock_fixes=(ClockFix(boot_ns, utc_ns, "test", uncertainty_ns),))


def check_same(a: object, b: object) -> None:
    """Batches or rows are equal to the bit and of one type; nan equals nan."""
    for column in fields(a):  # type: ignore[arg-type]
        x, y = getattr(a, column.name), getattr(b, column.name)
        if isinstance(x, np.ndarray):
            assert x.dtype == y.dtype, column.name
            assert x.shape == y.shape, column.name
            assert x.tobytes() == y.tobytes(), column.name
        else:
            assert x == y, column.name
