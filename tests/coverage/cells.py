"""One cell of the campaign: many instruments in one kind of field, and what the product says."""

from __future__ import annotations

import tempfile
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from monitor.calfile import load_chain
from monitor.config import Band, Channel
from monitor.core.averaging_law import Averaging
from monitor.core.blocks import BLOCK_NS, Blocks
from monitor.core.calibration import Chain
from monitor.core.figures import fields
from monitor.core.flags import LOWER_BOUND, UPPER_BOUND
from monitor.core.interval import reported, total_db
from monitor.core.limits import Scope
from monitor.core.readings import NS_PER_S
from monitor.core.station import Station, station
from monitor.core.windows import at_block_ends
from tests.coverage import othermodel
from tests.coverage.instruments import AXES, Response, detector_text, errors_db
from tests.coverage.signals import CLASSES, LOADED, LOG_SCATTER_DB, WINDOW_S, Signal, logs

FILE = Path(__file__).parents[2] / "hardware/examples/detector-board-calibration.toml"
FREQUENCY_HZ = 1.2e9
"""One frequency, half way between rows of the antenna's table: what a band adds is not asked."""
BANDWIDTH_HZ, LOG_TIME_S = 5e6, 0.001
NOISE_DBM, NOISE_U_DB = -57.0, 0.434
"""What the terminated port shows, as entered in the file, and its standard uncertainty: 10 %."""
FLICKER = 0.1
"""Deviation of the noise from reading to reading: what a hundred values of it average to."""
_AT_ONCE = 2_500_000
BLOCKS = round(WINDOW_S * NS_PER_S) // BLOCK_NS
Real = NDArray[np.float64]


@dataclass(frozen=True)
class Cell:
    """Table 1 (the budget's own errors) or 2 (the second world); signal class; mean power on all
    axes together, from and to, dBm; readings a second; noise: the file declares the detector's."""

    table: int
    signal: str
    low_dbm: float
    high_dbm: float
    rate_hz: float = 10.0
    noise: bool = True
    logs: bool = False


class Outcome(NamedTuple):
    """True E squared (n,), the interval that the product states, U in dB (nan below the limit),
    and flags."""

    truth: Real
    low: Real
    high: Real
    u_db: Real
    flags: NDArray[np.int64]


@lru_cache
def chain_of(signal: str, noise: bool, averaged_logs: bool) -> Chain:
    """The example board's chain, at one frequency, with or without a declared noise."""
    band = Band("b", FREQUENCY_HZ, FREQUENCY_HZ, signal=signal, signal_bandwidth_hz=BANDWIDTH_HZ)
    front = Averaging("log", LOG_TIME_S) if averaged_logs else Averaging("none")
    channels, bands = [Channel(a, a, "b") for a in "xyz"], {"b": band}
    if not noise:
        return load_chain(FILE, channels, bands, front)
    keys = f"[detector]\nnoise_dbm = {NOISE_DBM}\nnoise_u_db = {NOISE_U_DB}\n"
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder, FILE.name)
        text = FILE.read_text(encoding="utf-8").replace("[detector]\n", keys)
        path.write_text(text, encoding="utf-8")
        return load_chain(path, channels, bands, front)


def station_of(chain: Chain, hold_s: float = 15.0) -> Station:
    """A station of that chain that judges one scope."""
    scope = Scope("made-up", "1", "general_public", "local", WINDOW_S, True, "test")
    per_watt = np.ones((AXES, 1))
    return station(
        chain, (scope,), per_watt, per_watt, (),
        hold_s=hold_s, silence_s=60.0, field_region="far", outside_excluded=True,
    )  # fmt: skip


def instants(cell: Cell) -> Real:
    """Times of the readings, s: each in the middle of the time it will hold."""
    readings = round(WINDOW_S * cell.rate_hz)
    return (np.arange(readings) + 0.5) / cell.rate_hz


def run(cell: Cell, draws: int, seed: int) -> Outcome:
    """Draw instruments and fields, and have the product state their six-minute averages."""
    rng = np.random.default_rng([20_260_817, seed])
    here = station_of(chain_of(cell.signal, cell.noise, cell.logs))
    at_s = instants(cell)
    size = max(1, _AT_ONCE // (at_s.size * AXES))
    made = [
        _part(cell, here.chain, at_s, min(size, draws - start), rng)
        for start in range(0, draws, size)
    ]
    truth = np.concatenate([true for true, _ in made])
    return stated(here, truth, [counts for _, counts in made])


def _part(
    cell: Cell, chain: Chain, at_s: Real, n: int, rng: np.random.Generator
) -> tuple[Real, NDArray[np.int32]]:
    """True E squared (n,) and counts (n, r, 3)."""
    level_w = 1e-3 * 10.0 ** (rng.uniform(cell.low_dbm, cell.high_dbm, n) / 10.0)
    if cell.table == 1:
        errors = errors_db(chain.contributions, n, rng)
        share = rng.dirichlet([2.0] * AXES, n) * 10.0 ** (errors / 10.0)
        bend, zero = np.zeros((n, AXES)), np.repeat(rng.standard_normal((n, 1)), AXES, axis=1)
    else:
        share, bend, zero = othermodel.front(cell.signal, n, rng)
    noise_w = np.maximum(chain.noise_w + zero * chain.noise_u_w, 0.0)
    axis_w = level_w[:, None] * share
    if cell.logs:
        power, mean = _log_readings(cell, axis_w, noise_w, at_s.size, rng), np.ones(n)
    else:
        classes: dict[str, Signal] = CLASSES if cell.table == 1 else LOADED
        sent = classes[cell.signal](at_s, n, rng)
        relative = sent.power
        if cell.table == 2:
            relative = relative * 10.0 ** (othermodel.gain_db(at_s, n, rng) / 10.0)
        mean = sent.mean
        power = relative[:, :, None] * axis_w[:, None, :].astype(np.float32)
        power += _noise(noise_w, at_s.size, rng)
    truth = level_w * mean * float(chain.k_mid[0])
    response = _response()
    power = power.astype(np.float32)
    if cell.table == 2:
        power *= np.float32(1.0) + response.bend(power) * (bend[:, None, :] * np.log(10) / 10)
        power = power.astype(np.float32)
    return truth, response.counts(power)


def _noise(noise_w: Real, readings: int, rng: np.random.Generator) -> NDArray[np.float32]:
    """The detector's own power (n, r, 3): steady but for what its smoothing leaves."""
    flicker = rng.standard_normal((noise_w.shape[0], readings, AXES), np.float32)
    flicker *= np.float32(FLICKER)
    flicker += np.float32(1.0)
    return np.asarray(flicker * noise_w[:, None, :].astype(np.float32))


def _log_readings(
    cell: Cell, axis_w: Real, noise_w: Real, readings: int, rng: np.random.Generator
) -> Real:
    """Geometric means (n, r, 3) of signal and noise over the time that each log is averaged."""
    n = axis_w.shape[0]
    seen = logs(cell.signal, n, rng)
    power = seen.states[:, :, None] * axis_w[:, None, :] + noise_w[:, None, :]
    log_db = (seen.shares[:, :, None] * 10.0 * np.log10(power)).sum(axis=1) - seen.short_db
    jitter_db = rng.standard_normal((n, readings, 1)) * (
        LOG_SCATTER_DB / np.sqrt(BANDWIDTH_HZ * LOG_TIME_S)
    )
    return np.asarray(10.0 ** ((log_db[:, None, :] + jitter_db) / 10.0))


@lru_cache
def _response() -> Response:
    return Response(detector_text(FILE))


def stated(here: Station, truth: Real, counts: list[NDArray[np.int32]]) -> Outcome:
    """What the product states of consecutive windows of readings (n, r, 3) each."""
    sums = at_block_ends(
        blocks_of(here, counts), BLOCKS - 1, BLOCKS, BLOCK_NS, batched=here.batched
    )
    rows = fields(sums.at(np.arange(0, sums.end_ns.size, BLOCKS)), round(WINDOW_S), here)
    assert np.all(rows.valid_share > 0.5)
    ends = reported(rows.e2_low, rows.e2_high, rows.u_db, rows.added_e2, rows.flags)
    flags = rows.flags.astype(np.int64) | here.chain.flags
    lower, upper = (flags & int(bits) != 0 for bits in (LOWER_BOUND, UPPER_BOUND))
    return Outcome(
        truth,
        np.where(upper, 0.0, ends.low),
        np.where(lower, np.inf, ends.high),
        total_db(rows.u_db, rows.e2_mean, rows.added_e2, flags),
        flags,
    )


def blocks_of(here: Station, counts: list[NDArray[np.int32]]) -> Blocks:
    """Blocks of readings that come evenly, each of the power that its count stands for."""
    parts = [_blocks(here, one) for one in counts]
    energy, covered, low, high, n, flags = (np.concatenate(column) for column in zip(*parts))
    return Blocks(0, energy, covered, covered, low, high, n, flags)


def _blocks(here: Station, counts: NDArray[np.int32]) -> tuple[NDArray[np.generic], ...]:
    draws, readings, channels = counts.shape
    each = readings // BLOCKS
    columns = [table.convert(counts[:, :, c]) for c, table in enumerate(here.chain.tables)]
    power, bits = (np.stack(column, axis=2) for column in zip(*columns))
    power = power.reshape(draws * BLOCKS, each, channels)
    bits = bits.reshape(power.shape)
    valid = ~np.isnan(power)
    power = np.where(valid, power, 0.0)
    span_ns = BLOCK_NS // each
    return (
        power.sum(axis=1) * span_ns,
        valid.sum(axis=1) * span_ns,
        np.where(valid, power, np.inf).min(axis=1),
        power.max(axis=1),
        np.full((draws * BLOCKS, channels), each, np.int64),
        np.bitwise_or.reduce(bits, axis=1).astype(np.int64),
    )
