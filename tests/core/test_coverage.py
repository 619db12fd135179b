"""What the stated interval of a band is worth, step by step through the pipeline.

Few instruments, a signal anywhere in a wide band, two detectors; one frequency, but every class and
decade of level, is in tests/coverage. The detector and the truth are made here, from the
calibration file alone; only the way back, from counts to interval, is the product's.
"""

from __future__ import annotations

import sys
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from monitor.calfile import load_chain
from monitor.config import Band, Channel
from monitor.core import gather, pipeline
from monitor.core.budget import Contribution
from monitor.core.calibration import Chain
from monitor.core.limits import Scope
from monitor.core.quantities import frequency_hz
from monitor.core.readings import Batch
from monitor.core.station import Station, station
from tests.coverage.instruments import errors_db

ROOT = Path(__file__).parents[2]
S = 1_000_000_000
INSTRUMENTS = 400
AXES = "xyz"


@dataclass(frozen=True)
class Case:
    """A calibration file, the band it is used in (Hz) and the mean level of a day (dBm)."""

    file: str
    low_hz: float
    high_hz: float
    level_dbm: float


CASES = [
    Case("simulators/data/board-calibration.toml", 7e8, 2.7e9, -30.0),
    Case("hardware/examples/text-lines-calibration.toml", 4e8, 1e9, -12.0),
]


def band_db(text: dict, case: Case) -> tuple[float, float]:
    """Smallest and largest sum of antenna factor and losses over the band, dB."""
    f = np.geomspace(case.low_hz, case.high_hz, 20_001)
    total = np.zeros(f.size)
    for element in text["element"]:
        rows = np.array([[frequency_hz(a), b] for a, b in element["table"]])
        total += np.interp(np.log(f), np.log(rows[:, 0]), rows[:, 1])
    return float(total.min()), float(total.max())


def counts_of(text: dict, dbm: np.ndarray) -> np.ndarray:
    """What the detector of the file makes of a level at its port."""
    detector = text["detector"]
    curve = np.array(sorted(detector["curve"]))
    if detector["kind"] == "log":
        volts = np.interp(dbm, curve[:, 0], curve[:, 1])
    else:
        volts = np.interp(10 ** (dbm / 20), 10 ** (curve[:, 0] / 20), curve[:, 1])
    return np.rint(volts / detector["volts_per_count"]).astype(np.int32)


def six_minutes(
    text: dict, case: Case, budget: Sequence[Sequence[Contribution]], seed: int
) -> tuple[float, np.ndarray]:
    """True mean of E squared (V2/m2) over 360 s and the counts (360, 3) of one instrument."""
    rng = np.random.default_rng([20_260_301, seed])
    low_db, high_db = band_db(text, case)
    off_db = errors_db(budget, 1, rng)[0]
    e2_per_w = 50 * 10 ** ((low_db + high_db) / 20)
    level_dbm = case.level_dbm + rng.uniform(-6, 6)
    traffic = 10 ** (rng.uniform(-6, 6, 360) / 10)
    e2 = e2_per_w * 1e-3 * 10 ** (level_dbm / 10) * traffic
    per_axis = e2[:, None] * rng.dirichlet([2.0, 2.0, 2.0])
    dbm = 10 * np.log10(per_axis / e2_per_w / 1e-3)
    return float(e2.mean()), counts_of(text, dbm + off_db)


def chain_of(case: Case) -> Chain:
    channels = [Channel(axis, axis, "main") for axis in AXES]
    return load_chain(ROOT / case.file, channels, {"main": Band("main", case.low_hz, case.high_hz)})


def station_of(chain: Chain) -> Station:
    scope = Scope("made-up", "1", "general_public", "local", 360.0, True, "test")
    per_watt = np.ones((3, 1))
    return station(
        chain, (scope,), per_watt, per_watt, (),
        hold_s=3.0, silence_s=60.0, field_region="far", outside_excluded=True,
    )  # fmt: skip


def measured(here: Station, counts: np.ndarray) -> tuple[float, float]:
    """E squared (V2/m2) of the window that ends at 360 s and its U (dB), by the product."""
    times = np.arange(counts.shape[0] + 1, dtype=np.int64) * S
    counts = np.vstack([counts, counts[-1:]])
    batch = Batch(times, counts, np.zeros(times.size, np.int32), int(times[-1]))
    _, out = pipeline.step(pipeline.start(here, 0), batch, here)
    rows = gather.stack(out.fields)
    assert rows is not None
    (at,) = np.flatnonzero((rows.end_ns == 360 * S) & (rows.averaging_s == 360))
    assert rows.valid_share[at] == 1.0
    return float(rows.e2_mean[at]), float(rows.u_db[at])


@pytest.mark.parametrize("case", CASES, ids=lambda case: Path(case.file).stem)
def test_interval_contains_the_truth_as_often_as_it_says(
    case: Case, capsys: pytest.CaptureFixture[str]
) -> None:
    """95 % of 400: 92.5 to 97.5 %; three quarters of U would be too little, 1.3 U too much."""
    text = tomllib.loads((ROOT / case.file).read_text(encoding="utf-8"))
    here = station_of(chain_of(case))
    off_db, u_db = np.empty(INSTRUMENTS), np.empty(INSTRUMENTS)
    for seed in range(INSTRUMENTS):
        truth, counts = six_minutes(text, case, here.chain.contributions, seed)
        e2, u_db[seed] = measured(here, counts)
        off_db[seed] = abs(10 * np.log10(e2 / truth))
    share = float(np.mean(off_db <= u_db))
    with capsys.disabled():
        sys.stdout.write(
            f"\n{Path(case.file).stem}: {share:.1%} of {INSTRUMENTS} intervals hold the truth, "
            f"median U {np.median(u_db):.2f} dB, k {here.k:.3f}\n"
        )
    assert 0.925 <= share <= 0.975
    assert float(np.mean(off_db <= 0.75 * u_db)) < 0.925
    assert float(np.mean(off_db <= 1.3 * u_db)) > 0.975


def test_without_errors_only_the_converter_is_left() -> None:
    """A nominal instrument at the band's middle is right to within its step."""
    case = CASES[0]
    text = tomllib.loads((ROOT / case.file).read_text(encoding="utf-8"))
    low_db, high_db = band_db(text, case)
    k = 50 * 10 ** ((low_db + high_db) / 20)
    dbm = np.linspace(-50, 0, 360)[:, None] - np.array([0.0, 3.0, 6.0])
    truth = float((k * 1e-3 * 10 ** (dbm / 10)).sum(axis=1).mean())
    e2, _ = measured(station_of(chain_of(case)), counts_of(text, dbm))
    assert 10 * np.log10(e2 / truth) == pytest.approx(0.0, abs=0.01)
