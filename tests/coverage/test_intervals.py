"""A short campaign, and what the campaign itself rests on. The whole one: make coverage."""

from __future__ import annotations

import sys

import numpy as np
import pytest

from monitor.core import gather, pipeline
from monitor.core.readings import NS_PER_S, Batch
from monitor.core.uncertainty import equal_shares, standard_db
from tests.coverage.cells import FILE, Cell, chain_of, instants, run, stated, station_of
from tests.coverage.instruments import SIMULATED_OTHERWISE, Response, detector_text, errors_db
from tests.coverage.signals import CLASSES, LOADED, Signal
from tests.coverage.tables import Count, Row, cells, counted, text

DRAWS = 2_000
SHORT = [
    Cell(1, "carrier", -62.0, -52.0),
    Cell(1, "carrier", 12.0, 22.0),
    Cell(1, "noise", -32.0, -22.0),
    Cell(1, "bursts", -72.0, -62.0),
    Cell(1, "bursts", -12.0, -2.0, rate_hz=1.0),
    Cell(1, "mixed", -52.0, -42.0, rate_hz=1.0),
    Cell(1, "noise", -32.0, -22.0, rate_hz=1.0, logs=True),
    Cell(1, "mixed", -62.0, -52.0, rate_hz=1.0, logs=True),
    Cell(2, "carrier", -22.0, -12.0, rate_hz=1.0),
    Cell(2, "noise", -62.0, -52.0, rate_hz=1.0),
    Cell(2, "bursts", -32.0, -22.0, rate_hz=1.0),
    Cell(2, "mixed", -12.0, -2.0, rate_hz=1.0),
]


@pytest.mark.parametrize("cell", SHORT, ids=lambda c: f"{c.table}-{c.signal}{c.low_dbm:+g}")
def test_intervals_hold_the_truth_as_often_as_they_say(
    cell: Cell, capsys: pytest.CaptureFixture[str]
) -> None:
    row = counted(cell, run(cell, DRAWS, 7))
    wrong = row.failures(sigmas=3.0)
    with capsys.disabled():
        sys.stdout.write("\n" + text(row, wrong))
    assert wrong == []


def test_an_interval_too_narrow_or_too_wide_is_found() -> None:
    """Three quarters of U hold 86 % of a normal error, 1.3 U hold 99 %."""
    cell = Cell(1, "carrier", -32.0, -22.0, rate_hz=0.1)
    found = run(cell, DRAWS, 8)
    middle = np.sqrt(found.low * found.high)
    for factor in (0.75, 1.3):
        low, high = (
            middle * (found.low / middle) ** factor,
            middle * (found.high / middle) ** factor,
        )
        row = counted(cell, found._replace(low=low, high=high))
        assert any(said.startswith("two-sided") for said in row.failures(sigmas=3.0))


def test_a_bound_that_holds_too_seldom_is_found() -> None:
    cell, none = Cell(1, "carrier", -72.0, -62.0), Count(0, 0)
    row = Row(cell, none, Count(10_000, 9_400), none, 0, 1.0, 1.0, 1.0)
    assert any(said.startswith("below") for said in row.failures())
    assert row._replace(below=Count(10_000, 9_600)).failures() == []


def test_every_class_and_decade_is_a_cell_of_both_tables() -> None:
    for table in (1, 2):
        found = list(cells(table))
        assert len(set(found)) == len(found)
        assert {(c.signal, c.low_dbm) for c in found} >= {
            (signal, low) for signal in CLASSES for low in (-72.0, -62.0, -32.0, -2.0, 12.0)
        }


def test_blocks_made_at_once_are_those_of_the_pipeline() -> None:
    """Readings of one draw, each moved to the start of the time it holds, step by step."""
    rng = np.random.default_rng(9)
    here = station_of(chain_of("mixed", True, False), hold_s=1.0)
    counts = rng.integers(1000, 3200, (1, 360, 3), dtype=np.int32)
    at_once = stated(here, np.ones(1), [counts])
    times = np.arange(361, dtype=np.int64) * NS_PER_S
    rows = np.concatenate([counts[0], counts[0, -1:]])
    batch = Batch(times, rows, np.zeros(361, np.int32), int(times[-1]))
    _, out = pipeline.step(pipeline.start(here, 0), batch, here)
    fields = gather.stack(out.fields)
    assert fields is not None
    (at,) = np.flatnonzero((fields.end_ns == 360 * NS_PER_S) & (fields.averaging_s == 360))
    low, high, u_db, added = (
        column[at] for column in (fields.e2_low, fields.e2_high, fields.u_db, fields.added_e2)
    )
    factor = 10 ** (u_db / 10)
    assert at_once.low[0] == pytest.approx(low - np.hypot(low * (1 - 1 / factor), added))
    assert at_once.high[0] == pytest.approx(high + np.hypot(high * (factor - 1), added))


def test_errors_drawn_are_as_large_as_the_budget_says() -> None:
    chain = chain_of("noise", True, False)
    drawn = errors_db(chain.contributions, 200_000, np.random.default_rng(3)).mean(axis=1)
    written = tuple(
        tuple(line for line in lines if line.name not in SIMULATED_OTHERWISE)
        for lines in chain.contributions
    )
    wanted = standard_db(written, equal_shares(3)[None, :])[0]
    assert drawn.std() == pytest.approx(wanted, rel=0.01)
    assert abs(drawn.mean()) < 4 * wanted / np.sqrt(200_000)


@pytest.mark.parametrize("signal", [*CLASSES.values(), *LOADED.values()], ids=lambda s: s.__name__)
def test_the_true_mean_is_that_of_the_readings(signal: Signal) -> None:
    """Many readings over all draws: 4 deviations of the mean of their ratio."""
    at_s = instants(Cell(1, "", 0.0, 0.0, rate_hz=1.0))
    sent = signal(at_s, 3000, np.random.default_rng(4))
    off = sent.power.mean(axis=1, dtype=np.float64) - sent.mean
    assert abs(off.mean()) <= 4 * off.std() / np.sqrt(3000) + 1e-6


def test_the_detector_is_that_of_the_file() -> None:
    """At each point of the curve the count of its volts, here 2.5 V over 4096 steps."""
    detector = detector_text(FILE)
    points = np.array(detector["curve"])
    power_w = (1e-3 * 10 ** (points[:, 0] / 10)).astype(np.float32)
    counts = Response(detector).counts(power_w)
    assert np.abs(counts - points[:, 1] / 2.5 * 4096).max() <= 0.6
