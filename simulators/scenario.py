"""A simulated radio environment whose truth is known: transmitters round an invented place.

Every figure is made up. Far field only: E = sqrt(30 EIRP) / d (V/m, W, m; Rec. ITU-R P.525,
the free-space form with 120 pi ohm), each transmitter linearly polarised in a fixed direction,
powers of different transmitters added. At an instant a transmitter carries traffic (full EIRP)
or only its idle share; one in time-division duplex is on for its duty of the time.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from simulators import climate, draws, shipped
from simulators.climate import Climate

SCENES = Path(__file__).parent / "data" / "scenes"
DAY_S = 86_400.0
HOUR_S = 3_600.0

Floats = NDArray[np.float64]


def far_field_e_v_per_m(eirp_w: float, distance_m: float) -> float:
    """Rms field strength (V/m) at distance_m (m) in free space: sqrt(30 EIRP) / d."""
    return float(np.sqrt(30.0 * eirp_w) / distance_m)


@dataclass(frozen=True)
class Transmitter:
    """One source that is always there. daily: share of time with traffic, per hour of UTC day."""

    name: str
    frequency_hz: float
    e2_full: float  # V²/m² at the place with full EIRP
    shares: tuple[float, float, float]  # of E² on x, y, z; sum 1
    idle_share: float
    daily: tuple[float, ...]
    spread: float  # natural-log deviation of the traffic from minute to minute
    tdd_duty: float
    tdd_off_db: float


@dataclass(frozen=True)
class Burst:
    """A source that is there now and then: a number a day, each lasting lo..hi seconds."""

    name: str
    frequency_hz: float
    e2_full: float
    shares: tuple[float, float, float]
    per_day: float
    lasting_s: tuple[float, float]


@dataclass(frozen=True)
class Scene:
    """A place, its sources, and how warm the board is there."""

    name: str
    place: str
    transmitters: tuple[Transmitter, ...]
    bursts: tuple[Burst, ...]
    climate: Climate = Climate()

    @property
    def sources(self) -> tuple[Transmitter | Burst, ...]:
        """Transmitters, then bursts: the order of every column."""
        return (*self.transmitters, *self.bursts)


@dataclass(frozen=True)
class Truth:
    """What the field was. times_s (n,) board seconds; e2_by_source (n, s) V²/m² of each source."""

    first_index: int
    times_s: Floats
    e2_by_source: Floats
    shares: Floats  # (s, 3)
    frequencies_hz: Floats  # (s,)

    @property
    def e2_axes(self) -> Floats:
        """E² on x, y, z: float64 (n, 3), V²/m²."""
        out = np.zeros((self.times_s.size, 3))
        for column, share in zip(self.e2_by_source.T, self.shares, strict=True):
            out += column[:, None] * share
        return out

    @property
    def e2(self) -> Floats:
        """E² total: float64 (n,), V²/m²."""
        axes = self.e2_axes
        return axes[:, 0] + axes[:, 1] + axes[:, 2]


def available() -> list[str]:
    """Names of the scenes that are shipped."""
    return shipped.available(SCENES)


def load(name_or_path: str | Path) -> Scene:
    """A shipped scene by its name, or one from a .toml file. Raises ValueError with one line."""
    return shipped.load(SCENES, name_or_path, "scene", _scene)


def _scene(table: Mapping[str, object]) -> Scene:
    head = table["scene"]
    if not isinstance(head, Mapping) or head.get("simulated") is not True:
        raise ValueError("[scene] simulated = true")
    return Scene(
        str(head["name"]),
        str(head["place"]),
        tuple(_transmitter(row) for row in _rows(table, "transmitter")),
        tuple(_burst(row) for row in _rows(table, "burst")),
        _climate(table.get("climate", {})),
    )


def _rows(table: Mapping[str, object], key: str) -> Sequence[Mapping[str, object]]:
    rows = table.get(key, [])
    if not isinstance(rows, list):
        raise ValueError(f"[[{key}]]")
    return rows


def _climate(table: object) -> Climate:
    if not isinstance(table, Mapping):
        raise ValueError("[climate]")
    return climate.read(table)


def _numbers(value: object, n: int) -> tuple[float, ...]:
    if not isinstance(value, list) or len(value) != n:
        raise ValueError(f"a list of {n} numbers")
    return tuple(float(item) for item in value)


def _common(row: Mapping[str, object]) -> tuple[str, float, float, tuple[float, float, float]]:
    x, y, z = _numbers(row["polarisation"], 3)
    length2 = x * x + y * y + z * z
    e_v_per_m = far_field_e_v_per_m(float(str(row["eirp_w"])), float(str(row["distance_m"])))
    shares = (x * x / length2, y * y / length2, z * z / length2)
    return str(row["name"]), float(str(row["frequency_hz"])), e_v_per_m**2, shares


def _transmitter(row: Mapping[str, object]) -> Transmitter:
    return Transmitter(
        *_common(row),
        idle_share=float(str(row.get("idle_share", 1.0))),
        daily=_numbers(row.get("daily", [0.0] * 24), 24),
        spread=float(str(row.get("spread", 0.0))),
        tdd_duty=float(str(row.get("tdd_duty", 1.0))),
        tdd_off_db=float(str(row.get("tdd_off_db", -40.0))),
    )


def _burst(row: Mapping[str, object]) -> Burst:
    low, high = _numbers(row["lasting_s"], 2)
    if not 0 < low <= high <= HOUR_S:
        raise ValueError("lasting_s = [low, high] within 0 and 3600 s")
    return Burst(*_common(row), per_day=float(str(row["per_day"])), lasting_s=(low, high))


def truth(
    scene: Scene | str, seed: int, t0_s: float, n: int, rate_hz: float, midnight_s: float = 0.0
) -> Truth:
    """The field at n instants from t0_s on, rate_hz apart.

    t0_s: board seconds, on the grid k / rate_hz (ValueError if not). midnight_s: seconds after
    midnight UTC at board time 0, for the daily traffic. The values depend on scene, seed, rate
    and instant only, never on where a call begins or ends.
    """
    scene = load(scene) if isinstance(scene, str) else scene
    first = round(t0_s * rate_hz)
    if abs(t0_s * rate_hz - first) > 1e-6:
        raise ValueError(f"t0_s {t0_s} is not on the grid of {rate_hz} readings a second")
    e2 = np.empty((n, len(scene.sources)))
    at = first
    while at < first + n:  # whole cells, so that vector tails cannot differ between cuts
        cell, row = divmod(at, draws.CELL)
        take = min(first + n - at, draws.CELL - row)
        e2[at - first : at - first + take] = _cell_e2(scene, seed, cell, rate_hz, midnight_s)[
            row : row + take
        ]
        at += take
    return Truth(
        first,
        np.arange(first, first + n) / rate_hz,
        e2,
        np.array([source.shares for source in scene.sources]).reshape(-1, 3),
        np.array([source.frequency_hz for source in scene.sources]),
    )


@lru_cache(maxsize=4)
def _cell_e2(scene: Scene, seed: int, cell: int, rate_hz: float, midnight_s: float) -> Floats:
    """E² of every source at each reading of one cell: (CELL, s) V²/m²."""
    first = cell * draws.CELL
    times_s = np.arange(first, first + draws.CELL) / rate_hz
    count = len(scene.transmitters)
    luck = draws.uniforms(seed, draws.READINGS, first, draws.CELL, max(2 * count, 1))
    minute = np.floor(times_s / 60.0).astype(np.int64)
    swing = draws.normals(
        seed, draws.MINUTES, int(minute[0]), int(minute[-1] - minute[0]) + 1, max(count, 1)
    )[minute - minute[0]]
    e2 = np.empty((draws.CELL, len(scene.sources)))
    for i, source in enumerate(scene.transmitters):
        used = _traffic(source, times_s + midnight_s) * np.exp(source.spread * swing[:, i])
        level = np.where(luck[:, 2 * i] < used, 1.0, source.idle_share)
        off = 10.0 ** (source.tdd_off_db / 10.0)
        e2[:, i] = source.e2_full * np.where(luck[:, 2 * i + 1] < source.tdd_duty, level, off)
    for i, burst in enumerate(scene.bursts):
        e2[:, count + i] = burst.e2_full * _on(burst, seed, i, times_s)
    e2.setflags(write=False)
    return e2


def _traffic(source: Transmitter, utc_s: Floats) -> Floats:
    """Share of time with traffic: straight lines between the values at the full hours."""
    daily = np.array([*source.daily, source.daily[0]])
    return np.asarray(np.interp(np.mod(utc_s, DAY_S) / HOUR_S, np.arange(25.0), daily))


def _on(burst: Burst, seed: int, index: int, times_s: Floats) -> NDArray[np.bool_]:
    """Where the burst is on. Each hour has its own draw; none lasts longer than an hour."""
    on = np.zeros(times_s.size, bool)
    low, high = burst.lasting_s
    for hour in range(int(times_s[0] // HOUR_S) - 1, int(times_s[-1] // HOUR_S) + 1):
        source = draws.generator(seed, draws.BURSTS + 256 * (index + 1), hour)
        for _ in range(int(source.poisson(burst.per_day / 24.0))):
            start_s = HOUR_S * (hour + source.random())
            end_s = start_s + low + (high - low) * source.random()
            on |= (times_s >= start_s) & (times_s < end_s)
    return on
