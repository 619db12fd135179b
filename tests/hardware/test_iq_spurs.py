"""A line of the simulated receiver's own in a band, left out of it by the list."""

from __future__ import annotations

import json

import numpy as np
import pytest

from hardware import settings_for
from hardware.iq_count import real_rate_hz
from hardware.iq_levels import Levels
from hardware.iq_worker import settings_text, work_of
from monitor.core.errors import ConfigError
from simulators.iq_receiver import GAINS_DB, Receiver, Settings
from simulators.iq_signals import Air, Front, Signal, Spur
from simulators.iq_transfers import Transfers

RATE = 2_400_000
BAND = (868.0e6, 868.6e6)
OPTIONS = {"host": "127.0.0.1", "rate_hz": 2.4e6, "gain_db": 19.7, "bands": [list(BAND)]}
FRONT = Front(full_scale_dbm=-12.0, noise_figure_db=30.0)
MAST = Signal("mast", "noise", 868.3e6, ((0.0, -48.0),), width_hz=0.58e6)
TRUTH_DBFS = -48.0 + 12.0 + GAINS_DB[11]
OWN = Spur(868.35e6, TRUTH_DBFS, 0.0)
"""As strong as all that the band carries, so that the band reads 3 dB too high with it."""


def level_dbfs(settings):
    """What the only band reads of a second of the simulated receiver's samples."""
    (place,) = settings.scheme.tunes
    at = Settings(place.centre_hz, RATE, True, 11)
    air = Air("test", (MAST,), (), (OWN,), FRONT)
    stream = Transfers(Receiver(air, 1), FRONT, at, 0.0, lambda *_: None)
    levels = Levels(real_rate_hz(RATE), place.bands, settings.scheme.fft, place.spurs)
    for _ in range(18):
        levels.add(stream.take(1e9))
    return 10 * np.log10(levels.take()[0][0])


def test_a_listed_spur_does_not_count_and_the_rest_stands_for_it(tmp_path):
    """Bound: 18 kHz of 580 that are made good as of 600, 0.01 dB, and the noise: our choice."""
    settings = settings_for("iq_stream", OPTIONS, tmp_path)
    assert level_dbfs(settings) == pytest.approx(TRUTH_DBFS + 3.01, abs=0.1)
    listed = settings.without([(868.348e6, 868.352e6)])
    assert level_dbfs(listed) == pytest.approx(TRUTH_DBFS, abs=0.1)


def test_the_receivers_process_is_told_of_spurs(tmp_path):
    settings = settings_for("iq_stream", OPTIONS, tmp_path).without([(868.348e6, 868.352e6)])
    text = settings_text(settings.radio, settings.scheme)
    assert json.loads(text)["tunes"][0][2] == [list(settings.scheme.tunes[0].spurs[0])]
    receiver = work_of(text, lambda: 0).receiver
    receiver.close()


def test_a_band_of_which_nothing_is_left_is_refused(tmp_path):
    with pytest.raises(ConfigError, match="every bin is left out"):
        settings_for("iq_stream", OPTIONS, tmp_path).without([BAND])
