"""A receiver that looks at one band after the other: time covered and time observed, kept apart."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from monitor.core import gather, pipeline
from monitor.core.averaging_law import Averaging
from monitor.core.readings import MISSING, Batch, empty_batch
from monitor.core.replay import window_again
from monitor.core.resume import resume
from monitor.core.station import Station
from tests.core.stations import made

S = 1_000_000_000
LOOK_NS = S // 4


def sparse(hold_s: float = 3.0) -> Station:
    return replace(made(hold_s=hold_s), look_ns=LOOK_NS)


def rounds(seconds: float, seed: int = 3, every_s: float = 2.0) -> Batch:
    """One reading a round, which begins at random within half a second."""
    rng = np.random.default_rng(seed)
    n = int(seconds / every_s)
    times = np.rint((np.arange(n) * every_s + rng.uniform(0, 0.5, n)) * S).astype(np.int64)
    counts = rng.integers(-50_000, -20_000, (n, 3)).astype(np.int32)
    return Batch(times, counts, np.zeros(n, np.int32), int(seconds * S))


def judged(here: Station, whole: Batch, size: int) -> gather.Gathered:
    state, out = pipeline.start(here, 0), gather.nothing()
    for first in range(0, whole.n, size):
        last = min(first + size, whole.n)
        now_ns = whole.now_ns if last == whole.n else int(whole.times_ns[last - 1])
        state, found = pipeline.step(state, whole.part(slice(first, last), now_ns), here)
        out.extend(found)
    return out


def test_blocks_hold_all_of_the_time_and_what_was_looked_at() -> None:
    """Brute force: a quarter of a second from each reading's beginning, cut at the block's ends."""
    whole = rounds(600)
    rows = gather.stack(judged(sparse(), whole, 17).blocks)
    assert rows is not None
    starts = whole.times_ns
    for at_ns, channel, covered, observed in zip(
        rows.start_ns, rows.channel, rows.covered_ns, rows.observed_ns
    ):
        seen = np.minimum(starts + LOOK_NS, at_ns + 10 * S) - np.maximum(starts, at_ns)
        assert observed == np.maximum(seen, 0).sum(), (at_ns, channel)
        assert covered == min(10 * S, at_ns + 10 * S - int(starts[0]))
    assert rows.observed_ns.max() <= 6 * LOOK_NS


def test_windows_tell_the_share_that_was_observed() -> None:
    out = judged(sparse(), rounds(1800), 40)
    fields = gather.stack(out.fields)
    assert fields is not None
    full = fields.end_ns >= 420 * S
    assert full.sum() > 20
    short = full & (fields.averaging_s == 360)
    np.testing.assert_allclose(fields.valid_share[short], 1.0, rtol=1e-9)
    np.testing.assert_allclose(fields.observed_share[short], 0.125, rtol=0.01)


def test_a_reading_that_misses_a_band_is_not_observed_either() -> None:
    whole = rounds(300)
    whole.counts[::2, 1] = MISSING
    rows = gather.stack(judged(sparse(), whole, 11).blocks)
    assert rows is not None
    one, two = (rows.observed_ns[rows.channel == channel].sum() for channel in (0, 1))
    assert two == pytest.approx(one / 2, rel=0.02)


@pytest.mark.parametrize("size", [1, 7, 300])
def test_any_division_gives_the_same(size: int) -> None:
    here, whole = sparse(), rounds(900, 5)
    for name in ("blocks", "windows", "fields"):
        one = gather.stack(getattr(judged(here, whole, 1000), name))
        two = gather.stack(getattr(judged(here, whole, size), name))
        assert one is not None
        assert two is not None
        for column in type(one).__slots__:
            assert getattr(one, column).tobytes() == getattr(two, column).tobytes(), column


def test_a_restart_and_a_replay_keep_the_observed_time() -> None:
    here, whole = sparse(), rounds(1200, 8)
    state, out = pipeline.start(here, 0), gather.nothing()
    until = int(whole.times_ns[-1])
    state, found = pipeline.step(state, whole.part(slice(None), until), here)
    out.extend(found)
    rows = gather.stack(out.blocks)
    assert rows is not None
    again, _ = resume(here, rows, [whole], 0, frozenset())
    assert again.opened.observed_ns.tolist() == state.opened.observed_ns.tolist()
    assert again.history.observed_ns.tolist() == state.history.observed_ns.tolist()
    window = gather.stack(out.windows)
    assert window is not None
    replayed = window_again(here, [whole, empty_batch(3, whole.now_ns)], 960 * S, 360)
    assert replayed is not None
    kept = (window.end_ns == 960 * S) & (window.averaging_s == 360)
    assert replayed[0].observed_ns.tolist() == window.observed_ns[kept].tolist()
    assert 0 < replayed[0].observed_ns[0] < replayed[0].covered_ns[0] / 7


def test_less_observation_means_more_doubt() -> None:
    """The readings' scatter counts by what the dwells miss: all of it but the share observed."""
    whole = rounds(900)
    dense, thin = (
        gather.stack(
            judged(
                replace(sparse(), chain=replace(made().chain, integration_s=s)), whole, 50
            ).fields
        )
        for s in (2.0, 0.25)
    )
    assert dense is not None
    assert thin is not None
    late = dense.end_ns == 840 * S
    assert (thin.added_e2[late] > dense.added_e2[late]).all()


def test_a_station_takes_the_time_from_what_its_front_end_declares() -> None:
    from monitor.core.station import station

    here = made()
    for averaging, look_ns in (
        (Averaging("power", 0.25, sparse=True), LOOK_NS),
        (Averaging("power", 0.25), None),
    ):
        again = station(
            here.chain, here.scopes, here.coefficients, here.least, (), hold_s=3.0, silence_s=9.0,
            field_region="far", outside_excluded=True, averaging=averaging,
        )  # fmt: skip
        assert again.look_ns == look_ns
