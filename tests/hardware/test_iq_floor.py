"""The floor tracked from samples of the simulated receiver, as fast as they can be made."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from hardware.iq_count import real_rate_hz
from hardware.iq_floor import Floors
from hardware.iq_levels import spike_hz
from hardware.iq_plan import tunes
from monitor.core.readings import MISSING
from simulators.iq_receiver import GAINS_DB, Receiver, Settings
from simulators.iq_signals import Air, Front, Signal
from simulators.iq_transfers import Transfers

RATE = 2_400_000
BANDS = ((868.0e6, 868.6e6), (869.0e6, 869.7e6))
FFT = 1024
GAIN = 11
FULL_SCALE_DBM = -12.0
LOUD = Front(full_scale_dbm=FULL_SCALE_DBM, noise_figure_db=40.0, converter_noise_lsb=0.0)
"""The noise is 1.5 codes: below one, rounding is no noise any more (IQ.md)."""
SIGNALS = (
    Signal("mast", "noise", 868.3e6, ((0.0, -48.0),), width_hz=0.4e6),
    Signal("shared", "tdd", 869.35e6, ((0.0, -50.0),), width_hz=0.4e6, on_s=3.75e-3, period_s=5e-3),
)


def tracked(signals, front, looks=36):
    """Floors (c,) in dBFS after so many looks; the truth is the noise's density times the width."""
    rate_hz = real_rate_hz(RATE)
    places = tunes(BANDS, 0.8 * RATE, spike_hz(rate_hz, FFT))
    (place,) = places
    settings = Settings(place.centre_hz, RATE, True, GAIN)
    air = Air("test", signals, (), (), front)
    stream = Transfers(Receiver(air, 1), front, settings, 0.0, lambda *_: None)
    floors = Floors(rate_hz, places, FFT, 240_000)
    for second in range(looks):
        at_ns = second * 1_000_000_000
        floors.offer(0, memoryview(stream.take(1e9)), at_ns)
    found = floors.counts(2, looks * 1_000_000_000)
    return [np.nan if count == MISSING else count / 1000 for count in found]


def truth_dbfs(front):
    density_dbm = -173.98 + front.noise_figure_db
    widths = np.array([high - low for low, high in BANDS])
    return density_dbm + 10 * np.log10(widths) - FULL_SCALE_DBM + GAINS_DB[GAIN]


def test_the_floor_is_the_noise_whatever_is_in_the_bands():
    """Source: kT and the noise figure, times the band's width. Bound: our choice."""
    assert tracked(SIGNALS, LOUD) == pytest.approx(truth_dbfs(LOUD), abs=0.15)


def test_noise_raised_by_3_db_raises_the_floor_by_as_much():
    raised = replace(LOUD, noise_figure_db=43.0)
    assert tracked(SIGNALS, raised) == pytest.approx(truth_dbfs(LOUD) + 3.0, abs=0.15)


def test_signals_over_all_of_the_span_are_an_upper_bound():
    wide = Signal("wide", "noise", 868.85e6, ((0.0, -50.0),), width_hz=2.4e6)
    found = np.array(tracked((wide,), LOUD))
    assert (found > truth_dbfs(LOUD) + 3.0).all()


def test_nothing_is_said_before_thirty_looks():
    assert np.isnan(tracked((), LOUD, looks=29)).all()
