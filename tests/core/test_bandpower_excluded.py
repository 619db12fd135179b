"""Ranges that are left out of a band, and the share that is made good for them."""

from __future__ import annotations

import numpy as np
import pytest

from monitor.core.bandpower import Engine
from monitor.core.errors import ConfigError

RATE, FFT = 1_024_000.0, 1024
BAND = (100_000.0, 300_000.0)
"""200 bins of 1 kHz."""


def z(noise_dbfs, tone_dbfs=None, at_hz=200_300.0, n=500_000):
    rng = np.random.default_rng(3)
    drawn = rng.standard_normal(2 * n).view(complex) / np.sqrt(2)
    found = 10 ** (noise_dbfs / 20) * drawn
    if tone_dbfs is not None:
        found += 10 ** (tone_dbfs / 20) * np.exp(2j * np.pi * at_hz / RATE * np.arange(n))
    return found.astype(np.complex64).tobytes()


def figures(raw, excluded=()):
    engine = Engine(RATE, [BAND], datatype="cf32_le", fft=FFT, excluded=excluded)
    engine.add(raw)
    return engine.result()


def db(power):
    return 10 * np.log10(power)


def test_a_line_of_the_receivers_own_is_left_out_and_the_band_made_good():
    """Noise of -40 dBFS over 1024 bins is -47.09 in 200 bins, whatever stands under the spur."""
    raw = z(-40.0, -30.0)
    truth_db = -40.0 + db(200 / 1024)
    assert db(figures(raw).power[0]) == pytest.approx(-29.9, abs=0.05)
    found = figures(raw, [(195_000.0, 205_000.0)])
    assert db(found.power[0]) == pytest.approx(truth_db, abs=0.1)
    assert found.usable_share[0] == pytest.approx(189 / 200)
    assert db(found.raw_power[0]) == pytest.approx(-29.9, abs=0.05)


def test_ends_are_left_out_too_and_ranges_may_overlap_or_lie_outside():
    raw = z(-40.0)
    two = [(199_000.0, 201_000.0), (200_000.0, 202_000.0), (400_000.0, 410_000.0)]
    assert figures(raw, two).usable_share[0] == pytest.approx(196 / 200)


def test_a_band_of_which_nothing_is_left_is_refused():
    with pytest.raises(ConfigError, match="every bin is left out"):
        figures(z(-40.0), [BAND])
