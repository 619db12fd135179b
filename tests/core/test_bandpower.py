"""The live engine against truths: tones, noise, neighbours, bursts, and scipy with the same window.

The tolerances are those the product promises (our choice); each test says what it takes as truth.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import signal

from monitor.core.bandpower import Engine
from monitor.core.errors import ConfigError
from monitor.core.segments import window
from tests.core.iq_signals import (
    BIN,
    FFT,
    RATE,
    WHOLE,
    band_noise,
    band_power,
    cf32,
    db,
    figures,
    noise,
    tone,
)


@pytest.mark.parametrize("fft", [32, 64, 1000, 1024, 4096])
def test_the_squared_windows_of_all_segments_add_up_to_one(fft: int) -> None:
    """Princen and Bradley's condition, at every sample; hence a sum of squares of fft / 2."""
    squared = window(fft) ** 2
    np.testing.assert_allclose(squared[: fft // 2] + squared[fft // 2 :], 1.0, atol=1e-14)


def test_the_window_is_the_one_scipy_has() -> None:
    """scipy.signal.windows.kaiser_bessel_derived, an independent implementation."""
    theirs = signal.windows.kaiser_bessel_derived(FFT, np.pi * 4.0)
    np.testing.assert_allclose(window(FFT), theirs, atol=1e-12)


@pytest.mark.parametrize("fft", [64, 1000, 1024])
@pytest.mark.parametrize("n", [1024, 5000, 200_001])
def test_raw_powers_equal_scipy_welch(fft: int, n: int) -> None:
    samples = noise(n).astype(np.complex64)
    bands = [WHOLE, (-1e5, 1e5), (2e5, 3.3e5), (-4e5, 3e5)]
    found = figures(samples, *bands, fft=fft)
    f, density = signal.welch(
        samples.astype(np.complex128), RATE, window=window(fft), nperseg=fft, noverlap=fft // 2,
        detrend=False, return_onesided=False,
    )  # fmt: skip
    expected = [density[(f >= a) & (f < b)].sum() * RATE / fft for a, b in bands]
    np.testing.assert_allclose(found.raw_power, expected, rtol=1e-12)
    assert found.segments == n // (fft // 2) - 1


@given(st.floats(-0.5, 0.5), st.floats(0, 2 * math.pi), st.integers(-300, 300))
@settings(max_examples=60, deadline=None)
def test_a_tone_reads_within_0_02_db_at_any_offset_from_a_bin(
    offset: float, phase: float, nearest: int
) -> None:
    """The band ends ten bins away on either side."""
    hz = (nearest + offset) * BIN
    low = nearest * BIN - 10 * BIN
    found = figures(tone(50_000, hz, phase=phase), (low, low + 20 * BIN))
    assert db(found.raw_power[0]) == pytest.approx(0.0, abs=0.02)
    if abs(nearest) > 10:  # at the centre itself a tone cannot be told from an offset
        assert db(found.power[0]) == pytest.approx(0.0, abs=0.02)


@pytest.mark.parametrize("offset", np.linspace(0.0, 1.0, 11))
@pytest.mark.parametrize("side", [-1, 1])
def test_three_bins_inside_a_band_are_guard_enough(offset: float, side: int) -> None:
    """The stated guard: three bins to the first bin outside, whatever the offset; 0.006 dB."""
    first_outside = 200
    hz = side * (first_outside - 3 - offset) * BIN
    band = (-first_outside * BIN + BIN / 2, first_outside * BIN - BIN / 2)
    assert db(figures(tone(50_000, hz), band).raw_power[0]) == pytest.approx(0.0, abs=0.006)


def test_fewer_than_two_bins_are_not_guard_enough() -> None:
    band = (-200 * BIN, 200 * BIN)
    assert db(figures(tone(50_000, 198.5 * BIN), band).raw_power[0]) < -0.02


@pytest.mark.parametrize("offset", np.linspace(0.0, 1.0, 9))
@pytest.mark.parametrize("wide", [1, 20, 200])
def test_a_neighbour_40_db_stronger_leaks_below_minus_60_db_of_itself(
    offset: float, wide: int
) -> None:
    """Eight bins or more outside the band; float input. Found: below -70 dB."""
    high = 100 * BIN
    strong = tone(100_000, high - BIN + (8 + offset) * BIN, dbfs=0.0)
    leaked = figures(strong, (high - wide * BIN, high)).power[0]
    assert db(leaked) < -70.0
    weak = band_noise(100_000, high - 150 * BIN, high - 20 * BIN) * 0.01
    both = figures(strong + weak, (high - 200 * BIN, high))
    alone = figures(weak, (high - 200 * BIN, high))
    assert db(alone.power[0]) == pytest.approx(-40.0, abs=0.02)
    assert both.power[0] - alone.power[0] == pytest.approx(0.0, abs=1e-6)  # -60 dB of the strong


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("bands_bins", [20, 200, 1024])
def test_noise_of_known_density_reads_within_its_statistical_error(
    seed: int, bands_bins: int
) -> None:
    """Standard error 1/sqrt(B T) of a mean over B T independent pairs; four of them allowed."""
    n, low = 400_000, -bands_bins // 2 * BIN
    found = figures(noise(n, seed, -30.0), (low, low + bands_bins * BIN))
    density = 1e-3 / RATE
    expected = density * bands_bins * BIN
    error = 1 / math.sqrt(bands_bins * BIN * n / RATE)
    assert found.raw_power[0] / expected == pytest.approx(1.0, abs=4 * error)


@given(st.integers(1, 30_000), st.integers(1024, 40_000), st.integers(0, 9))
@settings(max_examples=60, deadline=None)
def test_a_single_burst_of_any_length_and_place_counts_evenly(
    length: int, start: int, seed: int
) -> None:
    """Noise switched on and off at once, as long as one sample; truth: mean square of all.

    The engine has no sample of the first and last half segment to lose here.
    """
    n = 72 * FFT
    samples = np.zeros(n, np.complex128)
    samples[start : start + length] = noise(length, seed)
    found = figures(samples, WHOLE, (-RATE / 2, 0.0), (0.0, RATE / 2))
    # per segment, of which there are one fewer than half segments of samples
    expected = float(np.mean(np.abs(samples) ** 2)) * (n / (FFT // 2)) / found.segments
    assert found.raw_power[0] / expected == pytest.approx(1.0, abs=1e-6)
    assert found.raw_power[1:].sum() == pytest.approx(found.raw_power[0], rel=1e-12)
    assert db(found.raw_power[0] / float(np.mean(np.abs(samples) ** 2))) < 0.1


@given(st.integers(2000, 30_000), st.integers(1024, 30_000), st.integers(0, 9))
@settings(max_examples=40, deadline=None)
def test_a_burst_inside_a_band_reads_within_0_1_db(length: int, start: int, seed: int) -> None:
    """Against the transform of everything, whose lines know no segment; guard 20 bins."""
    n = 128 * FFT
    samples = np.zeros(n, np.complex128)
    shape = signal.windows.tukey(length, 0.2)
    samples[start : start + length] = band_noise(length, -80 * BIN, 80 * BIN, seed) * shape
    found = figures(samples, (-100 * BIN, 100 * BIN))
    assert db(found.raw_power[0] / band_power(samples, -100 * BIN, 100 * BIN)) == pytest.approx(
        0.0, abs=0.1
    )


@pytest.mark.parametrize("period", [777, 5000, 10_000, 33_333])
@pytest.mark.parametrize("ahead", [0, 123, 511])
def test_three_to_one_bursts_have_their_average(period: int, ahead: int) -> None:
    """On for three quarters of the time, off for one; a band a half as wide as the span."""
    n = 400_000
    on = (np.arange(n) + ahead) % period < 0.75 * period
    samples = band_noise(n, -200 * BIN, 200 * BIN) * on
    found = figures(samples, (-256 * BIN, 256 * BIN))
    truth = band_power(samples, -256 * BIN, 256 * BIN)
    assert db(found.raw_power[0] / truth) == pytest.approx(0.0, abs=0.1)
    assert db(truth) == pytest.approx(db(0.75), abs=0.2)  # the signal is what it says


def test_the_peak_is_the_strongest_segment_and_crest_is_of_the_samples() -> None:
    samples = np.zeros(100 * FFT, np.complex128)
    samples[20 * FFT : 22 * FFT] = tone(2 * FFT, 50 * BIN)
    found = figures(samples, (40 * BIN, 60 * BIN), (100 * BIN, 200 * BIN))
    assert db(found.peak[0]) == pytest.approx(0.0, abs=0.01)
    assert db(found.raw_power[0]) == pytest.approx(db(0.02), abs=0.1)
    assert found.crest_db == pytest.approx(db(50), abs=1e-3)


@pytest.mark.parametrize(
    ("how", "says"),
    [
        ({"fft": 1023}, "fft"),
        ({"fft": 16}, "fft"),
        ({"fft": 1 << 40}, "fft"),
        ({"rate_hz": 0.0}, "rate"),
        ({"rate_hz": math.nan}, "rate"),
        ({"excluded_hz": -1.0}, "excluded_hz"),
        ({"edge_share": 0.5}, "edge_share"),
        ({"edge_share": math.nan}, "edge_share"),
        ({"datatype": "cu12"}, "cu8, cs8, cs16, cf32"),
        ({"bands": [(0.0, 6e5)]}, "outside the sampled span"),
        ({"bands": [(-2e3, 2e3)], "excluded_hz": 5e3}, "every bin is left out"),
        ({"bands": [(4.5e5, 5e5)], "edge_share": 0.1}, "every bin is left out"),
    ],
)
def test_what_cannot_be_measured_is_refused(how: dict[str, object], says: str) -> None:
    given = {"rate_hz": RATE, "bands": [WHOLE], "datatype": "cu8"} | how
    with pytest.raises(ConfigError, match=says):
        Engine(**given)  # type: ignore[arg-type]


def test_nothing_seen_is_nan() -> None:
    engine = Engine(RATE, [WHOLE], datatype="cf32")
    found = engine.result()
    assert np.isnan([found.power[0], found.raw_power[0], found.peak[0], found.total_power]).all()
    assert (found.samples, found.segments) == (0, 0)
    engine.add(cf32(tone(FFT - 1, 0.0)))
    found = engine.result()
    assert math.isnan(found.power[0])
    assert found.total_power == pytest.approx(1.0, rel=1e-6)
    assert (found.samples, found.segments) == (FFT - 1, 0)
