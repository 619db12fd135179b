"""What the board's converter sees, reading by reading, and the truth file beside it."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import TextIO

import numpy as np
from numpy.typing import NDArray

from simulators import detector, instruments, scenario


@dataclass(frozen=True)
class Setup:
    """What is simulated. errors: seed of the instrument's errors, None for the nominal one."""

    scene: scenario.Scene
    seed: int
    rate_hz: float
    channels: int
    bits: int
    start_utc: datetime
    history_s: float
    errors: int | None = None

    def __post_init__(self) -> None:
        """Raises ValueError for a setup that the line protocol cannot carry."""
        if not 1 <= self.channels <= 3:
            raise ValueError(f"{self.channels} channels; 1 to 3 are possible")
        if not 8 <= self.bits <= 16:
            raise ValueError(f"{self.bits} bits; 8 to 16 are possible")
        if not 0 < self.rate_hz <= 1000 or 1000.0 / self.rate_hz % 1.0:
            raise ValueError(f"{self.rate_hz} readings a second: whole milliseconds between them")
        if self.history_s < 0 or self.seed < 0:
            raise ValueError("history and seed must be 0 or more")

    @property
    def spacing_ms(self) -> int:
        """Milliseconds between readings."""
        return round(1000.0 / self.rate_hz)

    @property
    def midnight_s(self) -> float:
        """Seconds after midnight UTC at board time 0."""
        utc = self.start_utc.astimezone(UTC)
        return float(utc.hour * 3600 + utc.minute * 60 + utc.second) + utc.microsecond / 1e6


class Source:
    """Readings in order. take() may be asked for any stretch; the truth file grows with it."""

    def __init__(self, setup: Setup, truth_path: Path | None = None) -> None:
        """Raises OSError where the truth file cannot be written."""
        self.setup = setup
        board = detector.load()
        scale = 2.0 ** (board.bits - setup.bits)
        self._board = detector.with_converter(board, setup.bits, board.volts_per_count * scale)
        self._errors_db: NDArray[np.float64] | None = None
        if setup.errors is not None:
            drawn = instruments.draw(setup.errors, board, band_hz=None)
            self._errors_db = drawn.errors_db[: setup.channels]
        self._file: TextIO | None = None
        if truth_path is not None:
            self._file = truth_path.open("w", encoding="ascii")
            self._file.write(_head(setup))

    def take(self, first: int, n: int) -> NDArray[np.int32]:
        """Counts of readings first..first+n: int32 (n, channels)."""
        setup = self.setup
        truth = scenario.truth(
            setup.scene, setup.seed, first / setup.rate_hz, n, setup.rate_hz, setup.midnight_s
        )
        if self._file is not None:
            self._file.write(_rows(truth))
        power_w = detector.port_power_w(truth, self._board, setup.channels)
        errors_db = self._errors_db
        if setup.scene.climate.db_per_k:
            drift_db = setup.scene.climate.drift_db(truth.times_s + setup.midnight_s)[:, None]
            errors_db = drift_db if errors_db is None else errors_db + drift_db
        return detector.counts(
            power_w, self._board, seed=setup.seed, first_index=first, errors_db=errors_db
        )

    def flush(self) -> None:
        """Bring the truth file up to date."""
        if self._file is not None:
            self._file.flush()

    def close(self) -> None:
        """Close the truth file."""
        if self._file is not None:
            self._file.close()


def _head(setup: Setup) -> str:
    start = setup.start_utc.astimezone(UTC).isoformat().replace("+00:00", "Z")
    return (
        "# SIMULATED: every figure is invented; the field as the scenario has it, without any\n"
        "# error of an instrument, at the instant of each reading of all three axes\n"
        f"# scene {setup.scene.name}, {setup.scene.place}, seed {setup.seed}\n"
        f"# time_s: seconds since the board's first start, which was {start}\n"
        "time_s,e2_total_v2_per_m2,e2_x_v2_per_m2,e2_y_v2_per_m2,e2_z_v2_per_m2\n"
    )


def _rows(truth: scenario.Truth) -> str:
    columns = np.column_stack([truth.times_s, truth.e2, truth.e2_axes])
    row = "%.3f,%.9g,%.9g,%.9g,%.9g\n"
    return (row * len(columns)) % tuple(columns.ravel().tolist())
