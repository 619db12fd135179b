"""The last seconds of samples: what is round a moment, and where the stream was broken."""

from __future__ import annotations

import itertools

from hypothesis import given
from hypothesis import strategies as st

from hardware.iq_ring import Ring

RATE_HZ = 1000.0
MS = 1_000_000
"""A sample lasts a millisecond, so that times can be read off."""


def numbers(first, n):
    """Samples that hold their own number, so that order and place can be seen."""
    return b"".join(i.to_bytes(2, "little") for i in range(first, first + n))


def filled(*sizes, seconds=3.0):
    ring, at = Ring(RATE_HZ, seconds), 0
    for n in sizes:
        ring.add(numbers(at, n), at * MS, 0, at)
        at += n
    return ring


def of(cutting):
    raw = b"".join(run.raw for run in cutting.runs)
    return [int.from_bytes(raw[i : i + 2], "little") for i in range(0, len(raw), 2)]


def test_the_samples_round_a_moment_are_found_whatever_the_pieces():
    cutting = filled(700, 1, 299, 1000).around(1200 * MS, 1000)
    assert of(cutting) == list(range(700, 1700))
    assert cutting.mark == 500
    (run,) = cutting.runs
    assert run.start_ns == 700 * MS


def test_near_an_end_the_nearest_samples_are_given_and_the_mark_moves():
    ring = filled(500, 500, 500)
    assert of(ring.around(100 * MS, 1000)) == list(range(1000))
    assert ring.around(100 * MS, 1000).mark == 100
    assert of(ring.around(1400 * MS, 1000)) == list(range(500, 1500))
    assert ring.around(1400 * MS, 1000).mark == 900


def test_a_moment_that_is_not_in_the_ring_has_no_mark():
    ring = filled(*[500] * 10, seconds=2.0)
    assert of(ring.around(0, 1000)) == list(range(3000, 4000))
    assert ring.around(0, 1000).mark is None
    assert ring.around(5001 * MS, 1000).mark is None
    assert ring.around(4500 * MS, 1000).mark == 500
    empty = Ring(RATE_HZ, 1.0).around(0, 1000)
    assert (empty.runs, empty.mark) == ((), None)


def test_it_holds_the_seconds_asked_for_and_not_a_piece_more():
    ring = filled(*[100] * 100, seconds=3.0)
    assert ring.samples == 3000
    assert ring.after(9000 * MS) == 1000
    assert ring.after(20_000 * MS) == 0


def test_lost_samples_and_other_places_break_a_run():
    ring = Ring(RATE_HZ, 10.0)
    ring.add(numbers(0, 100), 0, 0, 0)
    ring.cut()
    ring.add(numbers(100, 100), 350 * MS, 0, 100)  # 250 were lost
    ring.add(numbers(200, 100), 450 * MS, 1, 200)  # another place
    ring.add(numbers(500, 100), 750 * MS, 1, 500)  # 200 left out while it settled
    runs = ring.around(400 * MS, 1000).runs
    assert [(run.start_ns // MS, run.place, run.samples) for run in runs] == [
        (0, 0, 100), (350, 0, 100), (450, 1, 100), (750, 1, 100),
    ]  # fmt: skip
    assert ring.around(200 * MS, 100).mark == 50  # in the gap: the first sample after it
    assert of(ring.around(200 * MS, 100)) == list(range(50, 150))


@given(st.lists(st.integers(1, 400), min_size=1, max_size=20), st.integers(0, 4000))
def test_how_the_stream_came_makes_no_difference(sizes, at_ms):
    total = sum(sizes)
    cut, whole = filled(*sizes, seconds=99.0), filled(total, seconds=99.0)
    for n in (1, 100, 1000):
        one, other = cut.around(at_ms * MS, n), whole.around(at_ms * MS, n)
        assert of(one) == of(other)
        assert one.mark == other.mark
        assert len(of(one)) == min(n, total)
        assert all(a + 1 == b for a, b in itertools.pairwise(of(one)))
