"""What the simulated board's detector makes of a field: power at its port, volts, counts.

The nominal instrument is the one that data/board-calibration.toml describes; a calibration of
it is therefore exact but for the errors that one asks for. Invented in every figure.
"""

from __future__ import annotations

import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import lru_cache
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from simulators import draws
from simulators.scenario import Truth

CALIBRATION = Path(__file__).parent / "data" / "board-calibration.toml"

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Contribution:
    """One line of the error budget; value_db after its distribution (deviation, half width, U)."""

    name: str
    value_db: float
    distribution: str
    k: float
    shared: bool


@dataclass(frozen=True)
class Board:
    """The nominal instrument. chain: (Hz, dB) tables whose sum is 10 lg(K / 50 ohm)."""

    bits: int
    volts_per_count: float
    curve_dbm: Floats
    curve_v: Floats
    chain: tuple[tuple[Floats, Floats], ...]
    contributions: tuple[Contribution, ...]
    noise_v: float = 0.0004
    """Deviation of the detector's voltage noise at the converter."""

    def chain_db(self, frequencies_hz: Floats) -> Floats:
        """Antenna factor plus losses, dB(1/m): linear in dB over log frequency.

        Raises ValueError for a frequency outside a table.
        """
        total = np.zeros(np.shape(frequencies_hz))
        for table_hz, table_db in self.chain:
            if np.any(frequencies_hz < table_hz[0]) or np.any(frequencies_hz > table_hz[-1]):
                raise ValueError("a source's frequency is outside the board's tables")
            total += np.interp(np.log(frequencies_hz), np.log(table_hz), table_db)
        return total

    def k(self, frequencies_hz: Floats) -> Floats:
        """E² per watt at the detector's port, V²/m² per W, at each frequency."""
        return 50.0 * 10.0 ** (self.chain_db(frequencies_hz) / 10.0)

    def spread_db(self, low_hz: float, high_hz: float) -> float:
        """Half of the chain's variation over a band, dB."""
        knots = [table_hz[(table_hz > low_hz) & (table_hz < high_hz)] for table_hz, _ in self.chain]
        found = self.chain_db(np.concatenate([[low_hz, high_hz], *knots]))
        return float(found.max() - found.min()) / 2.0

    def k_mid(self, low_hz: float, high_hz: float) -> float:
        """The middle (in dB) of k over a band, V²/m² per W."""
        knots = [table_hz[(table_hz > low_hz) & (table_hz < high_hz)] for table_hz, _ in self.chain]
        found = self.k(np.concatenate([[low_hz, high_hz], *knots]))
        return float(np.sqrt(found.max() * found.min()))


@lru_cache(maxsize=4)
def load(path: Path = CALIBRATION) -> Board:
    """The instrument that a calibration file describes (detector kind "log", no axis tables)."""
    with path.open("rb") as handle:
        table = tomllib.load(handle)
    detector = table["detector"]
    curve = np.array(sorted(detector["curve"]), float)
    return Board(
        bits=int(detector["bits"]),
        volts_per_count=float(detector["volts_per_count"]),
        curve_dbm=curve[:, 0],
        curve_v=curve[:, 1],
        chain=tuple(_table(element["table"]) for element in table["element"]),
        contributions=tuple(_contribution(row) for row in table["contribution"]),
    )


def _table(rows: Sequence[Sequence[float]]) -> tuple[Floats, Floats]:
    array = np.array(rows, float)
    return array[:, 0], array[:, 1]


def _contribution(row: Mapping[str, object]) -> Contribution:
    return Contribution(
        str(row["name"]),
        float(str(row["value"])),
        str(row["distribution"]),
        float(str(row.get("k", 1.0))),
        bool(row.get("shared", False)),
    )


def port_power_w(truth: Truth, board: Board, channels: int = 3) -> Floats:
    """Power at the port of each axis' detector: float64 (n, channels), W."""
    per_e2 = 1.0 / board.k(truth.frequencies_hz)
    out = np.zeros((truth.times_s.size, channels))
    for column, share, factor in zip(truth.e2_by_source.T, truth.shares, per_e2, strict=True):
        out += column[:, None] * (share[:channels] * factor)
    return out


def counts(
    power_w: Floats,
    board: Board,
    *,
    seed: int,
    first_index: int = 0,
    errors_db: Floats | None = None,
) -> NDArray[np.int32]:
    """Converter counts of a log detector: int32 (n, c) for power_w float64 (n, c) at its ports.

    seed and first_index (of the first reading in the series) place the noise; errors_db (c,),
    (n, c) or (n, 1) is how much each channel, or each reading, is too high. Outside its curve the
    detector's output stands still.
    """
    n, channels = power_w.shape
    dbm = 10.0 * np.log10(np.maximum(power_w, 1e-30)) + 30.0
    if errors_db is not None:
        dbm = dbm + errors_db
    volts = np.interp(dbm, board.curve_dbm, board.curve_v)
    volts = volts + board.noise_v * draws.normals(seed, draws.NOISE, first_index, n, channels)
    top = (1 << board.bits) - 1
    return np.clip(np.rint(volts / board.volts_per_count), 0, top).astype(np.int32)


def with_converter(board: Board, bits: int, volts_per_count: float) -> Board:
    """The same detector behind another converter."""
    return replace(board, bits=bits, volts_per_count=volts_per_count)
