"""What the engine takes off and makes good, each beside the figure without it."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import erfc

from tests.core.iq_signals import BIN, FFT, RATE, WHOLE, band_noise, db, figures, noise, tone

CODE = 1 / 127.5
N = 2_000_000


@pytest.mark.parametrize(
    ("dbfs", "raw_error_db", "error_db"),
    [
        (-48, 3.06, 1.4),
        (-45, 1.31, 0.12),
        (-40, 0.43, 0.0),
        (-30, 0.05, 0.0),
        (-10, 0.0, 0.0),
        (-8, -0.01, -0.01),
        (-6, -0.04, -0.04),
        (-5, -0.10, -0.10),
        (-3, -0.36, -0.36),
        (0, -1.29, -1.29),
    ],
)
def test_quantised_noise_reads_as_the_platform_page_says(
    dbfs: float, raw_error_db: float, error_db: float
) -> None:
    """Platform facts, 3.2: read error of noise-like levels before and after taking off 1/6 LSB^2.

    Their figures have two decimals, or one. Two million samples: 0.003 dB of statistical error.
    """
    found = figures(noise(N, 7, dbfs), datatype="cu8")
    assert db(found.raw_power[0]) - dbfs == pytest.approx(raw_error_db, abs=0.02)
    assert db(found.power[0]) - dbfs == pytest.approx(error_db, abs=0.05)
    assert found.raw_power[0] - found.power[0] == pytest.approx(CODE**2 / 6, rel=0.05)


@pytest.mark.parametrize(
    ("dbfs", "share"), [(-10, 1e-5), (-8, 4e-4), (-6, 5e-3), (-5, 1.2e-2), (-3, 4.7e-2), (0, 0.16)]
)
def test_rail_codes_are_counted(dbfs: float, share: float) -> None:
    """Platform facts, 3.2, and the normal law beyond 127 steps, which they agree with."""
    found = figures(noise(N, 8, dbfs), datatype="cu8")
    assert found.components == 2 * N
    expected = erfc(127 / 127.5 / 10 ** (dbfs / 20))
    assert expected == pytest.approx(share, rel=0.25)
    assert found.clipped == pytest.approx(expected * 2 * N, abs=5 * math.sqrt(expected * 2 * N))


def test_quantising_is_taken_off_in_proportion_to_the_bins() -> None:
    """A quiet stretch of a loud signal's span reads the white noise of quantising, then nearly 0.

    The loud part is noise of many codes, so that the quantising noise is white.
    """
    loud = band_noise(N, -400 * BIN, -100 * BIN) * 0.2
    quiet = (100 * BIN, 356 * BIN)
    found = figures(loud, quiet, datatype="cu8")
    assert found.raw_power[0] == pytest.approx(CODE**2 / 6 / 4, rel=0.01)
    assert 0.0 <= found.power[0] < 0.01 * found.raw_power[0]
    assert figures(loud, quiet).raw_power[0] < 1e-3 * found.raw_power[0]


@pytest.mark.parametrize(("dbfs", "error_db"), [(-30, 0.5), (-40, 3.5)])
def test_an_offset_of_one_code_is_removed(dbfs: float, error_db: float) -> None:
    """Platform facts, 3.2: one code of offset on I and Q adds 0.5 dB at -30 and 3.5 dB at -40."""
    samples = noise(N, 9, dbfs) + CODE * (1 + 1j)
    exact = figures(samples)
    assert db(exact.raw_power[0]) - dbfs == pytest.approx(error_db, abs=0.06)
    assert db(exact.power[0]) - dbfs == pytest.approx(0.0, abs=0.01)
    read = figures(samples, datatype="cu8")
    assert db(read.power[0]) - dbfs == pytest.approx(0.0, abs=0.02)
    assert read.mean == pytest.approx(CODE * (1 + 1j), abs=0.02 * CODE)


def test_removing_the_mean_equals_taking_it_off_the_samples() -> None:
    """The identity holds bin by bin: the same as scipy-style detrending by the interval's mean."""
    samples = noise(300_000, 3, -20.0) + 0.3 - 0.2j
    bands = [(-3 * BIN, 4 * BIN), (-200 * BIN, 1 * BIN), (6 * BIN, 20 * BIN), WHOLE]
    found = figures(samples, *bands)
    bare = figures(samples - samples.mean(), *bands)
    np.testing.assert_allclose(found.power, bare.raw_power, rtol=1e-4)
    np.testing.assert_allclose(found.mean, samples.mean(), rtol=1e-6)
    assert found.raw_power[0] > 100 * found.power[0]


@pytest.mark.parametrize("excluded_hz", [4 * BIN, 5 * BIN, 20.5 * BIN])
def test_a_spike_at_the_centre_is_left_out_and_the_lost_share_made_good(
    excluded_hz: float,
) -> None:
    """Noise of known density under slow, strong noise round the centre, as a tuner's 1/f."""
    slow = band_noise(N, -0.5 * BIN, 0.5 * BIN, 4) * 0.1
    samples = noise(N, 5, -30.0) + slow
    band = (-100 * BIN, 100 * BIN)
    found = figures(samples, band, excluded_hz=excluded_hz)
    plain = figures(samples, band)
    expected = 1e-3 * 200 / FFT
    assert plain.power[0] > 10 * expected
    assert db(found.power[0] / expected) == pytest.approx(0.0, abs=0.03)
    lost = 2 * math.floor(excluded_hz / BIN) + 1
    assert found.usable_share[0] == pytest.approx(1 - lost / 200, rel=1e-12)
    np.testing.assert_allclose(found.raw_power, plain.raw_power, rtol=1e-12)


def test_span_edges_are_left_out_and_made_good() -> None:
    """The receiver's filter falls at the ends of the span: a flat band there reads as if whole."""
    f = np.fft.fftfreq(N, 1 / RATE)
    lines = np.fft.fft(noise(N, 6, -20.0))
    lines[np.abs(f) >= 0.45 * RATE] = 0
    samples = np.fft.ifft(lines)
    band = (0.4 * RATE, 0.5 * RATE)
    found = figures(samples, band, WHOLE, edge_share=0.06)
    np.testing.assert_allclose(found.usable_share, [0.4, 0.88], atol=2 / 100)
    np.testing.assert_allclose(10 * np.log10(found.power / [1e-3, 1e-2]), 0.0, atol=0.03)
    assert db(found.raw_power[0] / 1e-3) == pytest.approx(-3.0, abs=0.1)
    assert found.peak[0] > found.power[0]


def test_a_floating_point_file_has_no_quantising_and_no_rail() -> None:
    samples = tone(100_000, 30 * BIN, -90.0) + 2.0 * tone(100_000, 300 * BIN)
    found = figures(samples, (20 * BIN, 40 * BIN), WHOLE)
    assert db(found.power[0]) == pytest.approx(-90.0, abs=0.1)
    assert found.clipped == 0
    np.testing.assert_allclose(found.power, found.raw_power, rtol=1e-3)


def test_power_is_never_negative() -> None:
    """Codes that never change hold no quantising noise; taking it off must not go below nothing."""
    found = figures(np.full(20_000, 0.1 + 0.1j), (-100 * BIN, 100 * BIN), datatype="cu8")
    assert found.power[0] == 0.0
    assert db(found.raw_power[0]) == pytest.approx(db(0.02), abs=0.5)


def test_powers_of_bands_that_share_bins_are_each_whole() -> None:
    samples = noise(200_000, 2)
    bands = [(-100 * BIN, 100 * BIN), (-100 * BIN, 0.0), (0.0, 100 * BIN), (50 * BIN, 150 * BIN)]
    together = figures(samples, *bands, excluded_hz=2 * BIN)
    for index, band in enumerate(bands):
        alone = figures(samples, band, excluded_hz=2 * BIN)
        assert together.raw_power[index] == pytest.approx(alone.raw_power[0], rel=1e-12)
        assert together.power[index] == pytest.approx(alone.power[0], rel=1e-12)
        assert together.peak[index] == pytest.approx(alone.peak[0], rel=1e-12)
