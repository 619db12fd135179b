"""Images of the simulated receiver, whose branches differ by a stated amount."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from hardware.iq_count import real_rate_hz
from monitor.core.image import Image
from simulators.iq_receiver import Receiver, Settings
from simulators.iq_signals import Air, Front, Signal
from simulators.iq_transfers import Transfers

RATE, FFT, CENTRE = 2_400_000, 1024, 868_000_000
UNEVEN = Front(
    full_scale_dbm=-12.0, noise_figure_db=30.0, imbalance_db=1.0, imbalance_deg=4.0,
    converter_noise_lsb=0.0,
)  # fmt: skip
EVEN = replace(UNEVEN, imbalance_db=0.0, imbalance_deg=0.0)
LOUD = Signal("loud", "noise", CENTRE + 500e3, ((0.0, -40.0),), width_hz=0.3e6)
WEAK = Signal("weak", "noise", CENTRE - 500e3, ((0.0, -64.0),), width_hz=0.3e6)
BANDS = [(-650e3, -350e3), (350e3, 650e3), (-900e3, -700e3), (-100e3, 100e3)]


def shares(signals, front):
    """Image over all of each band."""
    rate_hz = real_rate_hz(RATE)
    image = Image(rate_hz, BANDS, FFT, 3 * rate_hz / FFT)
    air = Air("test", signals, (), (), front)
    settings = Settings(CENTRE, RATE, True, 11)
    stream = Transfers(Receiver(air, 1), front, settings, 0.0, lambda *_: None)
    for _ in range(6):
        image.add(memoryview(stream.take(1e9)), "cu8")
    mirrored, power = image.powers()
    return mirrored / power


def test_an_image_is_told_with_its_share():
    """Image to signal: |g e^-jp - 1| / |g e^jp + 1| (common practice, no source): -23.7 dB."""
    turn = 10 ** (1.0 / 20) * np.exp(1j * np.deg2rad(4.0))
    image_dbm = -40.0 + 20 * np.log10(abs((turn - 1) / (turn + 1)))
    noise_dbm = -173.98 + 30 + 10 * np.log10(300e3)
    parts = 10 ** (np.array([image_dbm, -64.0, noise_dbm]) / 10)
    found = shares((LOUD, WEAK), UNEVEN)
    assert found[0] == pytest.approx(parts[0] / parts.sum(), rel=0.1)
    assert found[0] > 0.2
    assert found[1] < 0.01


def test_even_branches_make_none_and_chance_makes_little():
    found = shares((LOUD, WEAK), EVEN)
    assert found[:3] == pytest.approx([0.0, 0.0, 0.0], abs=0.005)


def test_a_band_across_the_centre_is_not_judged():
    assert np.isnan(shares((LOUD,), UNEVEN)[3])
