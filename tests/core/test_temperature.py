"""Powers corrected for temperature: every reading by its own, the same bits wherever it stands."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.core.pipeline import convert
from monitor.core.readings import MISSING, Batch
from monitor.core.temperature import correction_of
from tests.core.stations import made

TABLE = np.array([-5.0, 20.0, 45.05]), np.array([-0.9, 0.0, 1.3])
"""Made up: 0.036 dB a degree below 20 degrees, about 0.052 above."""


def batch(temperature_dc: np.ndarray, channels: int = 2) -> Batch:
    n = temperature_dc.size
    counts = np.random.default_rng(1).integers(-70_000, 5_000, (n, channels)).astype(np.int32)
    times = np.arange(n, dtype=np.int64)
    return Batch(times, counts, np.zeros(n, np.int32), n, temperature_dc.astype(np.int32))


def test_the_power_is_what_the_table_leaves_of_it() -> None:
    """By hand: straight between the rows, ends held; dB of power taken off."""
    came = batch(np.array([-50, 75, 200, 300, 450, 451, 990, -400, 201]))
    too_high_db = [-0.9, -0.45, 0.0, 1.3 * 10 / 25.05, 1.3 * 25 / 25.05, 1.3, 1.3, -0.9]
    too_high_db.append(1.3 * 0.1 / 25.05)
    plain, _ = convert(came, made(2))
    found, _ = convert(came, made(2, temperature=(TABLE, None)))
    assert 10 * np.log10(plain[:, 0] / found[:, 0]) == pytest.approx(too_high_db, abs=1e-10)
    assert found[:, 1].tobytes() == plain[:, 1].tobytes()


def test_nothing_happens_without_a_table_or_a_temperature() -> None:
    known, unknown = batch(np.full(50, 371)), batch(np.full(50, MISSING))
    plain = convert(known, made(2))
    tables: tuple[tuple[Batch, tuple], ...]
    tables = (known, ()), (known, (None, None)), (unknown, (TABLE, TABLE))
    for came, temperature in tables:
        here = made(2, temperature=temperature)
        for left, right in zip(convert(came, here), plain):
            assert left.tobytes() == right.tobytes()


def test_a_missing_count_stays_missing() -> None:
    came = batch(np.full(3, 400))
    came.counts[1] = MISSING
    power_w, _ = convert(came, made(2, temperature=(TABLE, TABLE)))
    assert np.isnan(power_w).all(axis=1).tolist() == [False, True, False]


@given(st.integers(0, 2**32), st.lists(st.integers(1, 17), min_size=1, max_size=6))
@settings(max_examples=30, deadline=None)
def test_any_division_gives_the_same_bits(seed: int, pieces: list[int]) -> None:
    rng = np.random.default_rng(seed)
    dc = rng.integers(-100, 500, 120)
    dc[rng.random(120) < 0.1] = MISSING
    whole, here = batch(dc), made(2, temperature=(TABLE, TABLE))
    power_w, _ = convert(whole, here)
    at, turn = 0, 0
    while at < whole.n:
        to = at + pieces[turn % len(pieces)]
        part, _ = convert(whole.part(slice(at, to), 0), here)
        assert part.tobytes() == power_w[at:to].tobytes()
        at, turn = to, turn + 1


@pytest.mark.parametrize(
    ("celsius", "first_dc", "n"),
    [([0.0, 1.0], 0, 11), ([-0.01, 0.01], -1, 3), ([-1e9, 1e9], -9_999, 19_999)],
)
def test_factors_reach_from_end_to_end(celsius: list[float], first_dc: int, n: int) -> None:
    correction = correction_of((np.array(celsius), np.array([0.0, 3.0])))
    assert correction is not None
    assert (correction.first_dc, correction.factor.size) == (first_dc, n)
    assert correction_of(None) is None


def test_a_reading_below_the_range_may_stand_for_more_where_it_reads_too_low() -> None:
    """At -5 degrees 0.9 dB more than the table says; never less than at an unknown temperature."""
    plain, cold = made(2), made(2, temperature=(TABLE, None))
    assert cold.floor_w == pytest.approx(plain.floor_w * [10**0.09, 1.0])
    high = np.array([0.0, 40.0]), np.array([0.5, 1.0])
    assert made(1, temperature=(high,)).floor_w.tolist() == plain.floor_w[:1].tolist()
