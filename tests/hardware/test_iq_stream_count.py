"""Samples counted against the boot clock: their times, loss, a rate that is off."""

from __future__ import annotations

import numpy as np
import pytest

from hardware.iq_count import BUFFER_SAMPLES, LATE_S, SampleClock, real_rate_hz

RATE_HZ = 2_048_000.0
BUFFER_NS = BUFFER_SAMPLES / RATE_HZ * 1e9
START_NS = 5_000_000_000


def fed(seconds, rate_hz=RATE_HZ, *, clock=None, delay=lambda k: 0.0, lost=()):
    """A clock fed with buffers as a receiver takes them. delay: of buffer k, s. lost: buffers."""
    clock = clock or SampleClock(RATE_HZ, START_NS)
    now_ns = START_NS
    for k in range(1, int(seconds * rate_hz / BUFFER_SAMPLES) + 1):
        if k not in lost and not clock.fault:
            at_ns = START_NS + k * BUFFER_SAMPLES / rate_hz * 1e9 + delay(k) * 1e9
            now_ns = max(now_ns, round(at_ns))  # one after the other
            clock.count(BUFFER_SAMPLES, now_ns)
    return clock


def test_the_real_rate_is_the_dividers():
    """Source: 28.8 MHz * 2^22 / ratio in steps of 0.14 Hz at 2.048 MS/s, 0.34 Hz at 3.2 MS/s."""
    for asked, step in ((2_048_000, 0.14), (3_200_000, 0.34)):
        rates = {real_rate_hz(asked + i) for i in range(-3, 4)}
        assert all(abs(real_rate_hz(asked + i) - asked - i) <= step for i in range(-3, 4))
        assert len(rates) > 3
    assert real_rate_hz(2_400_000) == pytest.approx(2_400_000, abs=0.2)


def test_samples_are_placed_by_their_number_whatever_the_delay():
    rng = np.random.default_rng(7)
    delays = rng.uniform(0.0, 0.2, 1000)
    delays[0] = 0.0
    clock = fed(30, delay=lambda k: delays[k - 1])
    assert clock.fault == ""
    assert clock.lost == 0
    assert clock.proved
    for second in (1, 10, 29):
        placed = clock.time_ns(int(second * RATE_HZ)) - START_NS - second * 1e9
        assert -1e6 < placed < 15e6  # 200 ppm of 30 s and half of it again
        assert clock.sample_at(clock.time_ns(1000)) in (1000, 1001)


def test_a_loss_larger_than_two_buffers_is_found_within_a_stretch():
    clock = fed(25, lost=(200, 201, 202))
    assert clock.fault == ""
    assert clock.lost / BUFFER_SAMPLES == pytest.approx(3, abs=0.05)
    late_ns = clock.time_ns(clock.samples) - START_NS
    assert late_ns == pytest.approx(25e9, abs=BUFFER_NS)


def test_a_loss_in_the_first_stretch_is_taken_for_a_wrong_rate():
    """Which of the two it is cannot be told: better to connect again."""
    assert "were asked for" in fed(13, lost=(100, 101, 102)).fault


def test_a_smaller_loss_is_found_once_it_adds_up():
    """One buffer each four seconds: within three stretches more than two are missing."""
    clock = fed(45, lost=range(64, 2000, 64))
    assert clock.lost > 2 * BUFFER_SAMPLES


@pytest.mark.parametrize(("rate_hz", "within_s"), [(1.0e6, 2.0), (2.6e6, 2.0), (1.5e6, 2.0)])
def test_a_grossly_wrong_rate_never_proves_good(rate_hz, within_s):
    clock = fed(within_s, rate_hz)
    assert not clock.proved
    assert "were asked for" in clock.fault


@pytest.mark.parametrize(("rate_hz", "within_s"), [(1.8e6, 12.5), (2.0e6, 12.5), (2.1e6, 12.5)])
def test_a_slightly_wrong_rate_is_found_in_the_first_stretch(rate_hz, within_s):
    """Two buffers in ten seconds are 1.3 % at 2.048 MS/s."""
    clock = fed(within_s, rate_hz)
    assert "were asked for" in clock.fault
    assert f"about {rate_hz / 1e6:.2g}" in clock.fault


@pytest.mark.parametrize("ppm", [-150, -40, 40, 150])
def test_a_crystal_that_is_off_is_followed_for_hours(ppm):
    clock = fed(3 * 3600, RATE_HZ * (1 + ppm * 1e-6))
    assert clock.fault == ""
    assert clock.lost == 0
    end_ns = clock.time_ns(clock.samples) - START_NS
    assert end_ns == pytest.approx(3 * 3600e9, abs=2 * BUFFER_NS)


def test_old_samples_from_a_queue_are_noticed():
    """A pause of 3 s, then all that was queued meanwhile, as from a slow network."""
    clock = fed(30, delay=lambda k: max(0.0, 13.0 - k * BUFFER_NS / 1e9) if k > 156 else 0.0)
    assert f"{LATE_S:.0f}" in clock.fault or "3.0 s late" in clock.fault


def test_thirty_two_seconds_of_old_samples_at_once_never_prove_good():
    clock = SampleClock(RATE_HZ, START_NS)
    for k in range(500):
        clock.count(BUFFER_SAMPLES, START_NS + k * 2_500_000)
    assert not clock.proved
    assert "were asked for" in clock.fault


def test_a_short_pause_costs_nothing():
    """One and a half seconds late, then all of it: nothing is lost, and each keeps its time."""
    clock = fed(30, delay=lambda k: max(0.0, 11.5 - k * BUFFER_NS / 1e9) if k > 156 else 0.0)
    assert clock.fault == ""
    assert clock.lost == 0
    assert clock.time_ns(int(11 * RATE_HZ)) - START_NS == pytest.approx(11e9, abs=10e6)
