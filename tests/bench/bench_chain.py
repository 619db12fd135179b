"""A million readings of three axes from counts to E squared, beside scipy.interpolate.

Both begin with the same counts and end with the same sum over the axes, which is checked here
before anything is timed. The other way reads its figures out of the calibration file's text and
knows no function of ours: counts to volts, the detector's curve to dBm, dBm to W, antenna factor
and losses at one frequency. Ours gives the flags of every reading besides.
"""

from __future__ import annotations

import tomllib
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import scipy
from scipy.interpolate import interp1d, make_interp_spline

from monitor import calparts, calreview
from monitor.core.calibration import Chain
from tests.bench.measure import Figure, compare

FILE = Path(__file__).parents[2] / "hardware/examples/detector-board-calibration.toml"
READINGS = 1_000_000
AXES = "xyz"
FREQUENCY_HZ = 900e6
"""A row of the antenna's table, so that the chain's grid holds it."""
ALLOWED = 1e-9
UNITS_HZ = {"MHz": 1e6, "GHz": 1e9}
Interpolation = Callable[[np.ndarray, np.ndarray], Callable[[np.ndarray], np.ndarray]]
WAYS: dict[str, Interpolation] = {
    "interp1d": interp1d,
    "make_interp_spline k=1": lambda x, y: make_interp_spline(x, y, k=1),
}


def _chain() -> Chain:
    low_hz, high_hz = FREQUENCY_HZ * 0.9, FREQUENCY_HZ * 1.1
    return calreview.view(calparts.read(FILE), AXES, (low_hz, high_hz)).chain


def _counts(chain: Chain) -> np.ndarray:
    """Counts (axes, readings) at random, such as are readings without a flag."""
    random = np.random.default_rng(30)
    rows = []
    for table in chain.tables:
        good = np.flatnonzero((table.flags == 0) & np.isfinite(table.power_w))
        rows.append(random.choice(good, READINGS) + table.first_count)
    return np.array(rows, np.int32)


def ours(chain: Chain, counts: np.ndarray) -> np.ndarray:
    """E squared (readings,) by count tables and E squared per watt."""
    total = np.zeros(counts.shape[1])
    for table, f, k, row in zip(chain.tables, chain.frequencies_hz, chain.k, counts):
        power_w, _ = table.convert(row)
        total += power_w * k[np.searchsorted(f, FREQUENCY_HZ)]
    return total


def _hz(text: str) -> float:
    return float(text[:-3]) * UNITS_HZ[text[-3:]]


def other(way: Interpolation) -> Callable[[np.ndarray], np.ndarray]:
    """The same by interpolation: the curves are made here, once, and then only evaluated."""
    file = tomllib.loads(FILE.read_text(encoding="utf-8"))
    detector = file["detector"]
    volts_per_count = detector["reference_v"] / 2 ** detector["bits"] / detector["gain"]
    dbm, volts = np.array(sorted(detector["curve"], key=lambda row: row[1]), np.float64).T
    level = way(volts, dbm)
    tables = [
        way(
            np.log([_hz(f) for f, _ in element["table"]]),
            np.array([d for _, d in element["table"]]),
        )
        for element in file["element"]
    ]

    def e2(counts: np.ndarray) -> np.ndarray:
        db = sum(float(table(np.log(FREQUENCY_HZ))) for table in tables)
        total = np.zeros(counts.shape[1])
        for row in counts:
            power_w = 1e-3 * 10.0 ** (level(row * volts_per_count) / 10.0)
            total += power_w * 50.0 * 10.0 ** (db / 10.0)
        return total

    return e2


def largest_difference(a: np.ndarray, b: np.ndarray) -> float:
    """Largest relative difference; nan where either has a gap."""
    return float(np.abs(a / b - 1.0).max())


def bench_chain() -> Iterator[Figure]:
    """ns per reading, counts to E squared."""
    chain = _chain()
    counts = _counts(chain)
    for name, way in WAYS.items():
        theirs = other(way)
        difference = largest_difference(ours(chain, counts), theirs(counts))
        if not difference <= ALLOWED:
            raise ValueError(f"the fields differ by {difference:.3g}, allowed is {ALLOWED:.0e}")
        yield Figure("largest relative difference between the two", difference, "")
        taken = compare(
            "counts to E squared, 1,000,000 readings of 3 axes",
            lambda: ours(chain, counts),
            lambda theirs=theirs: theirs(counts),
            f"scipy {scipy.__version__} {name}, numpy {np.__version__}",
        )
        scale = 1e9 / counts.size
        assert taken.reference is not None
        yield replace(
            taken, value=taken.value * scale, unit="ns/reading", reference=taken.reference * scale
        )
