"""Readings from a stream: their power and time, retuning, slices, loss, and samples left out."""

from __future__ import annotations

import time
from dataclasses import replace

import numpy as np
import pytest

from hardware.iq_client import Radio
from hardware.iq_plan import tunes
from hardware.iq_receiver import Receiver, Scheme
from tests.hardware.iq_servers import Server, streams, tone

RATE_HZ = 1_000_000
MHZ = 1e6


@pytest.fixture
def at():
    made = []

    def make(script, bands, *, seed=1, **own):
        server = Server(script)
        scheme = Scheme(len(bands), tunes(bands, 0.8 * RATE_HZ, 10e3), 256, 0.1, 0.1, 0.25)
        radio = Radio("127.0.0.1", server.port, RATE_HZ, 0.0, 0)
        receiver = Receiver(radio, replace(scheme, **own), time.monotonic_ns, seed)
        made.extend([receiver, server])
        return server, receiver

    yield make
    for one in made:
        one.close()


def readings(receiver, n, seconds=20.0):
    end = time.monotonic() + seconds
    found = []
    while len(found) < n:
        assert time.monotonic() < end, receiver.problem
        found += receiver.work(0.1)
    return found


def on_the_air(*carriers, floor=0):
    """Bytes of a receiver that hears carriers (Hz on the air, amplitude) within its rate."""

    def make(centre, rate, first, n):
        z = np.zeros(n, complex)
        for hz, amplitude in carriers:
            if abs(hz - centre) < rate / 2:
                z += amplitude * np.exp(2j * np.pi * (hz - centre) / rate * (first + np.arange(n)))
        both = np.column_stack([z.real, z.imag]).ravel()
        return np.rint(both * 127.5 + 127.5).astype("u1").tobytes()

    return make


def test_readings_follow_each_other_without_a_gap_and_have_the_tones_power(at):
    """Source: amplitude 0.5 is -6.02 dBFS, 0.1 is -20 dBFS, by hand."""
    bands = [(867.8 * MHZ, 868.0 * MHZ), (868.2 * MHZ, 868.4 * MHZ)]
    make = on_the_air((867.9 * MHZ, 0.5), (868.3 * MHZ, 0.1))
    server, receiver = at(streams(make=make), bands)
    assert "connected" in receiver.problem
    found = readings(receiver, 8)
    assert receiver.problem == ""
    for reading in found:
        assert abs(reading.counts[0] + 6021) < 50
        assert abs(reading.counts[1] + 20_000) < 100
        assert reading.clipped == 0
        # whole halves of a segment; the earliest arrival may still be on its way to be found
        assert reading.end_ns - reading.start_ns == pytest.approx(0.1e9, abs=20e6)
    assert all(a.end_ns == b.start_ns for a, b in zip(found, found[1:]))
    assert abs(found[-1].end_ns - time.monotonic_ns()) < 0.2e9
    assert receiver.upto_ns == found[-1].end_ns
    assert [code for code, _ in server.commands].count(1) == 1


def test_bands_far_apart_are_looked_at_in_turn_and_none_sees_the_place_before(at):
    """The server goes on with the old centre for 0.15 s: settling leaves that out. The second
    place hears nothing but rounding, 40 dB below the first."""
    bands = [(867.0 * MHZ, 867.6 * MHZ), (900.0 * MHZ, 900.6 * MHZ)]
    script = streams(make=on_the_air((867.3 * MHZ, 0.5)), lag_s=0.15, piece_s=0.02)
    server, receiver = at(script, bands)
    found = readings(receiver, 4)
    for reading in found:
        # what is left out round the centre, 4 %, is made good as if the band were flat: 0.17 dB
        assert 0 < reading.counts[0] + 6021 < 200
        assert reading.counts[1] < -40_000
    assert all(a.end_ns <= b.start_ns for a, b in zip(found, found[1:]))
    centres = [value for code, value in server.commands if code == 1]
    assert {round(centre / 1e8) for centre in centres} == {9}
    assert len(set(centres)) == 2


def test_without_settling_the_place_before_would_be_seen(at):
    """That the test above can fail."""
    bands = [(867.0 * MHZ, 867.6 * MHZ), (900.0 * MHZ, 900.6 * MHZ)]
    here = on_the_air((867.3 * MHZ, 0.5))
    script = streams(make=here, lag_s=0.4, piece_s=0.02)
    _, receiver = at(script, bands, settle_s=0.01)
    assert any(reading.counts[1] > -30_000 for reading in readings(receiver, 4))


def test_the_slices_of_a_wide_carrier_add_up(at):
    """Source: three tones of amplitude 0.3 in 1.8 MHz: 3 * 0.09 = -5.69 dB, by hand."""
    carriers = [(f * MHZ, 0.3) for f in (799.25, 800.02, 800.65)]
    script = streams(make=on_the_air(*carriers), piece_s=0.02)
    _, receiver = at(script, [(799.1 * MHZ, 800.9 * MHZ)])
    (reading,) = readings(receiver, 1)
    assert abs(reading.counts[0] - 1000 * 10 * np.log10(0.27)) < 250  # 4 % made good


def test_each_round_takes_another_order_and_dwells_begin_at_random(at):
    bands = [(f * MHZ, (f + 0.1) * MHZ) for f in (800, 810, 820, 830)]
    server, receiver = at(streams(piece_s=0.02), bands, dwell_s=0.05, settle_s=0.02)
    found = readings(receiver, 4)
    centres = [value for code, value in server.commands if code == 1][1:]
    rounds = [tuple(centres[i : i + 4]) for i in range(len(centres) % 4, len(centres) - 3, 4)]
    assert len(set(rounds)) > 1
    lengths = [b.start_ns - a.start_ns for a, b in zip(found, found[1:])]
    assert max(lengths) - min(lengths) > 5e6
    assert max(lengths) < 4 * (0.02 + 2 * 0.05 + 0.05) * 1e9


def test_clipping_is_counted(at):
    make = lambda centre, rate, first, n: tone(n, rate, 1e5, 1.0, first)  # noqa: E731
    _, receiver = at(streams(make=make), [(868.0 * MHZ, 868.6 * MHZ)])
    (reading,) = readings(receiver, 1)
    assert reading.clipped > 1000


def test_a_server_that_keeps_its_old_rate_gives_no_reading(at):
    server, receiver = at(streams(rate_hz=2_048_000), [(868.0 * MHZ, 868.6 * MHZ)])
    end = time.monotonic() + 5
    while receiver.client.counters["wrong"] == 0:
        assert receiver.work(0.1) == []
        assert time.monotonic() < end
    assert "2.0" in receiver.problem
    assert "1 were asked for" in receiver.problem
    readings_before = receiver.counters["readings"]
    assert readings_before == 0


def test_lost_samples_are_found_counted_and_left_as_a_gap(at):
    """A million samples, a second: in the second stretch, so that the stream goes on."""
    script = streams(skip=[(12.5, RATE_HZ)], piece_s=0.02)
    server, receiver = at(script, [(868.0 * MHZ, 868.6 * MHZ)])
    found = readings(receiver, 1)
    end = time.monotonic() + 26
    while receiver.counters["lost_samples"] == 0:
        found += receiver.work(0.1)
        assert time.monotonic() < end
    found += readings(receiver, 2)
    assert receiver.counters["lost_samples"] == pytest.approx(RATE_HZ, rel=0.1)
    steps = [b.start_ns - a.end_ns for a, b in zip(found, found[1:])]
    assert max(steps) == pytest.approx(1e9, rel=0.2)
    assert server.connections == 1
