"""Time: arrival stamps against a simulated line with known truth; ticks as a clock."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hardware.timing import (
    DRIFT,
    LATENESS_NS,
    NS_PER_MS,
    ArrivalClock,
    TickClock,
    increasing_after,
)
from monitor.core.readings import NS_PER_S


def ticks(*milliseconds: float) -> np.ndarray:
    return np.array([ms * NS_PER_MS for ms in milliseconds], np.int64)


@given(st.lists(st.integers(-50, 50), min_size=1, max_size=30), st.integers(-60, 60))
def test_raised_as_little_as_makes_them_increase(values, last):
    times = increasing_after(np.array(values, np.int64), last)
    least, expected = last, []
    for value in values:
        least = max(value, least + 1)
        expected.append(least)
    assert times.tolist() == expected


@pytest.mark.parametrize("error", [-DRIFT * 0.99, -2e-4, 0.0, 2e-4, DRIFT * 0.99])
def test_stamps_follow_a_wrong_oscillator_and_never_run_ahead(error):
    """A reading every 100 ms for 20 min; delays of 1 ms, at times up to 40 ms; truth is known."""
    random = np.random.default_rng(7)
    clock, worst_ns, last_ns = ArrivalClock(), 0, -1
    delays = 1e6 + 39e6 * random.random(12_000) * (random.random(12_000) < 0.3)
    for i, delay_ns in enumerate(delays, 1):
        truth_ns = 5 * NS_PER_S + i * 100 * NS_PER_MS
        tick_ms = round(i * 100 * (1 + error))
        now_ns = truth_ns + int(delay_ns)
        stamp_ns = int(clock.place(ticks(tick_ms), now_ns, 0, False)[0])
        assert last_ns < stamp_ns <= now_ns
        last_ns = stamp_ns
        worst_ns = max(worst_ns, abs(stamp_ns - truth_ns))
    # delay 1 ms, tick's rounding 1 ms, creep of 0.5 % over a few late frames
    assert worst_ns < 10 * NS_PER_MS if error else worst_ns < 8 * NS_PER_MS


def test_a_backlog_keeps_its_times():
    clock = ArrivalClock()
    for i in range(1, 50):
        clock.place(ticks(100 * i), i * 100 * NS_PER_MS + NS_PER_MS, 0, False)
    now_ns = 4_900 * NS_PER_MS + 3 * NS_PER_S
    late = clock.place(ticks(*range(5_000, 7_901, 100)), now_ns, 0, False)
    expected = np.arange(5_000, 7_901, 100) * NS_PER_MS + NS_PER_MS
    assert np.abs(late - expected).max() <= 0.005 * 3.1 * NS_PER_S
    assert late[-1] <= now_ns


def test_a_start_of_the_board_is_stamped_by_its_own_arrival():
    clock = ArrivalClock()
    before = clock.place(ticks(900_000), 1000 * NS_PER_S, 0, False)
    after = clock.place(ticks(100), 1010 * NS_PER_S, 0, True)
    assert before[0] == 1000 * NS_PER_S
    assert after[0] == 1010 * NS_PER_S


def test_a_clock_that_stood_still_is_caught_up():
    clock = ArrivalClock()
    for i in range(200):
        clock.place(ticks(100 * i), i * 100 * NS_PER_MS, 0, False)
    # the board sleeps for 30 s and its ticks with it
    lag_ns = []
    for i in range(200, 600):
        now_ns = i * 100 * NS_PER_MS + 30 * NS_PER_S
        lag_ns.append(now_ns - int(clock.place(ticks(100 * i), now_ns, 0, False)[0]))
    assert lag_ns[0] > 29 * NS_PER_S
    assert max(lag_ns[250:]) < NS_PER_S


def test_what_was_vouched_for_stays_true():
    clock = ArrivalClock()
    clock.place(ticks(1000), 10 * NS_PER_S, 0, False)
    vouched = clock.vouch(12 * NS_PER_S, 0)
    assert vouched == 12 * NS_PER_S - LATENESS_NS
    late = clock.place(ticks(2000), 12 * NS_PER_S + 1, 0, False)
    assert vouched < late[0] <= 12 * NS_PER_S + 1
    assert clock.vouch(12 * NS_PER_S + 1, 0) == late[0]
    assert clock.vouch(20 * NS_PER_S, NS_PER_S) == 19 * NS_PER_S - LATENESS_NS


def test_ticks_are_the_clock():
    clock = TickClock(now_ns=77)
    assert clock.vouch(77 + NS_PER_S, 0) == 0
    assert clock.place(ticks(0, 1000, 2000), 78, 0, False).tolist() == [0, 10**9, 2 * 10**9]
    assert clock.place(ticks(3_600_000), 79, 0, False).tolist() == [3600 * NS_PER_S]


def test_idle_time_goes_on_only_after_five_seconds():
    clock = TickClock(0)
    clock.place(ticks(1000), 100, 0, False)
    assert clock.vouch(100 + 5 * NS_PER_S, 0) == NS_PER_S
    assert clock.vouch(100 + 7 * NS_PER_S, 0) == 3 * NS_PER_S
    later = clock.place(ticks(2000, 3000), 8 * NS_PER_S, 0, False)
    assert later.tolist() == [3 * NS_PER_S + 1, 4 * NS_PER_S + 1]


def test_a_restart_assumes_the_shortest_outage():
    clock = TickClock(0)
    clock.place(ticks(5000), 1, 0, False)
    again = clock.place(ticks(100, 200), 2, 100 * NS_PER_MS, True)
    assert again.tolist() == [5_100 * NS_PER_MS, 5_200 * NS_PER_MS]
