"""What is on the air at the receiver's port: signals of four kinds, each with its true power.

Powers are dBm at the port while a signal is on. A carrier is one line. Noise is very many lines of
equal power and random phase, whose sum is as noise-like as a signal of many carriers. A tdd signal
is such noise switched on and off in a fixed period; pulses are a carrier switched on and off. All
figures are invented.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from simulators import shipped

AIR = Path(__file__).parent / "data" / "air"
KINDS = ("carrier", "noise", "tdd", "pulses")
SHORTEST_PERIOD_S = 50e-6

Row = Mapping[str, object]


@dataclass(frozen=True)
class Signal:
    """One source. steps: (from device second, dBm while on), rising; on_s of each period_s."""

    name: str
    kind: str
    frequency_hz: float
    steps: tuple[tuple[float, float], ...]
    width_hz: float = 0.0
    on_s: float = 0.0
    period_s: float = 0.0

    def level_mw(self, device_s: float) -> float:
        """Power (mW) while on, at a device time; 0 before the first step."""
        held = [level_dbm for from_s, level_dbm in self.steps if device_s >= from_s]
        return math.pow(10.0, held[-1] / 10.0) if held else 0.0

    def spans(self, device_s: float, n: int, rate_hz: float) -> list[tuple[int, int]]:
        """Where it is on among n samples from device_s on, as [first, end) each."""
        if not self.period_s:
            return [(0, n)]
        first = int(device_s // self.period_s)
        last = int((device_s + n / rate_hz) // self.period_s)
        found = []
        for period in range(first, last + 1):
            start = round((period * self.period_s - device_s) * rate_hz)
            end = start + round(self.on_s * rate_hz)
            if end > 0 and start < n:
                found.append((max(start, 0), min(end, n)))
        return found

    def share(self, low_hz: float, high_hz: float) -> float:
        """Share of its mean power between two frequencies, 0..1.

        A carrier is inside or not (the lower edge counts as inside), noise is flat over its
        width, a pulse of length w has the spectrum sinc²(f w). The little that switching a tdd
        signal spreads beyond its width is left out.
        """
        if self.kind == "carrier":
            return float(low_hz <= self.frequency_hz < high_hz)
        if self.kind == "pulses":
            at = np.linspace(low_hz - self.frequency_hz, high_hz - self.frequency_hz, 20_001)
            density = self.on_s * np.sinc(at * self.on_s) ** 2
            return float(np.mean(density) * (high_hz - low_hz))
        left = max(low_hz, self.frequency_hz - self.width_hz / 2.0)
        right = min(high_hz, self.frequency_hz + self.width_hz / 2.0)
        return max(right - left, 0.0) / self.width_hz


@dataclass(frozen=True)
class Spur:
    """A line the receiver makes itself: dBFS at REFERENCE_GAIN_DB; slope: dB for each dB of gain.

    Slope 0 stands for one born behind the amplifier, 1 before it, 3 for a product of third order.
    """

    frequency_hz: float
    level_dbfs: float
    slope: float


@dataclass(frozen=True)
class Front:
    """What the receiver adds. Image figures are those of the Q branch against the I branch."""

    full_scale_dbm: float = -12.0
    noise_figure_db: float = 6.0
    converter_noise_lsb: float = 0.3
    dc_lsb: tuple[float, float] = (0.4, -0.3)
    imbalance_db: float = 0.1
    imbalance_deg: float = 0.5
    crystal_ppm: float = 0.0
    settle_ms: float = 2.0
    gain_error_db: tuple[float, ...] = ()
    auto_wander_db: float = 1.5

    @property
    def noise_mw_per_hz(self) -> float:
        """Noise power density (mW/Hz) at the port: kT at 290 K (-173.98 dBm/Hz) and the figure."""
        return math.pow(10.0, (-173.98 + self.noise_figure_db) / 10.0)


@dataclass(frozen=True)
class Air:
    """A place's signals, the bands whose true power is told, and the receiver that hears them."""

    name: str
    signals: tuple[Signal, ...]
    bands: tuple[tuple[str, float, float], ...]
    spurs: tuple[Spur, ...]
    front: Front

    def shares(self) -> NDArray[np.float64]:
        """Share of each signal's power in each band: float64 (signals, bands)."""
        rows = [[s.share(low, high) for _, low, high in self.bands] for s in self.signals]
        return np.array(rows).reshape(len(self.signals), len(self.bands))


def available() -> list[str]:
    """Names of the airs that are shipped."""
    return shipped.available(AIR)


def load(name_or_path: str | Path) -> Air:
    """A shipped air by its name, or one from a .toml file. Raises ValueError with one line."""
    return shipped.load(AIR, name_or_path, "air", read)


def read(table: Row) -> Air:
    """An air from its tables. Raises KeyError, TypeError or ValueError that names the key."""
    head = _table(table, "scene")
    if head.get("simulated") is not True:
        raise ValueError("[scene] simulated = true")
    return Air(
        str(head["name"]),
        tuple(_signal(row) for row in _rows(table, "signal")),
        tuple(_band(row) for row in _rows(table, "band")),
        tuple(
            Spur(_number(row, "frequency_hz"), _number(row, "level_dbfs"), _number(row, "slope", 0))
            for row in _rows(table, "spur")
        ),
        _front(_table(table, "receiver")),
    )


def _table(table: Row, key: str) -> Row:
    found = table.get(key, {})
    if not isinstance(found, Mapping):
        raise ValueError(f"[{key}]")
    return found


def _rows(table: Row, key: str) -> Sequence[Row]:
    rows = table.get(key, [])
    if not isinstance(rows, list):
        raise ValueError(f"[[{key}]]")
    return rows


def _number(row: Row, key: str, otherwise: float | None = None) -> float:
    value = row[key] if otherwise is None else row.get(key, otherwise)
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise ValueError(f"{key} {value!r} is not a number")
    return float(value)


def _signal(row: Row) -> Signal:
    name, kind = str(row["name"]), str(row["kind"])
    if kind not in KINDS:
        raise ValueError(f"{name}: kind {kind!r}; there are {', '.join(KINDS)}")
    steps = row.get("steps", [[0.0, row.get("level_dbm")]])
    if not isinstance(steps, list) or not steps:
        raise ValueError(f"{name}: level_dbm, or steps = [[from_s, dBm], ...]")
    pairs = tuple((float(from_s), float(level_dbm)) for from_s, level_dbm in steps)
    if sorted(pairs) != list(pairs):
        raise ValueError(f"{name}: steps must rise in time")
    wide, switched = kind in ("noise", "tdd"), kind in ("tdd", "pulses")
    signal = Signal(
        name,
        kind,
        _number(row, "frequency_hz"),
        pairs,
        _number(row, "width_hz") if wide else 0.0,
        _number(row, "on_us") * 1e-6 if switched else 0.0,
        _number(row, "period_us") * 1e-6 if switched else 0.0,
    )
    if wide and not signal.width_hz > 0:
        raise ValueError(f"{name}: width_hz must be more than zero")
    if switched and not (0 < signal.on_s <= signal.period_s >= SHORTEST_PERIOD_S):
        raise ValueError(f"{name}: on_us within 0..period_us, period_us 50 or more")
    return signal


def _band(row: Row) -> tuple[str, float, float]:
    name, low_hz, high_hz = str(row["name"]), _number(row, "low_hz"), _number(row, "high_hz")
    if not 0 <= low_hz < high_hz or "," in name:
        raise ValueError(f"band {name!r}: low_hz below high_hz, no comma in the name")
    return name, low_hz, high_hz


def _front(table: Row) -> Front:
    strange = sorted(set(table) - set(Front.__dataclass_fields__))
    if strange:
        raise ValueError(f"[receiver] {strange[0]}")
    values: dict[str, object] = {}
    for key, value in table.items():
        if key in ("dc_lsb", "gain_error_db"):
            wanted = len(Front().dc_lsb) if key == "dc_lsb" else 29
            if not isinstance(value, list) or len(value) != wanted:
                raise ValueError(f"[receiver] {key}: a list of {wanted} numbers")
            values[key] = tuple(float(item) for item in value)
        else:
            values[key] = _number(table, key)
    return Front(**values)  # type: ignore[arg-type]
