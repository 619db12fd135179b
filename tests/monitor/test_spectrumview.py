"""What the daemon tells of a spectrum: levels as they came, bands by the calibration."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from monitor.core.flags import Flag
from monitor.spectrumview import document
from tests.core.stations import made
from tests.monitor.fakes import Desk, Front, site

S = 1_000_000_000


def place(**changes):
    mean = [-700] * 256
    mean[10] = -500
    mean[127] = mean[128] = None
    return {
        "place": 0, "centre_hz": 900e6, "rate_hz": 2.56e6, "start_ns": 1 * S, "end_ns": 4 * S,
        "looked_s": 0.4, "piece_s": 0.0004, "mean": mean, "max": [-600] * 256,
    } | changes  # fmt: skip


def readings(mean, most, flags=0):
    return {
        "n": 30, "start_ns": S, "end_ns": 4 * S, "mean": [mean], "max": [most], "flags": flags,
    }  # fmt: skip


def told(shown, *, here=None, low_hz=8e8, high_hz=1e9):
    desk = Desk(here or made(1, ratio_per_e2=1.0))
    desk.feed(np.arange(1, 6.0), [-40_000] * 5)
    own = site()
    band = dataclasses.replace(own.bands["all"], low_hz=low_hz, high_hz=high_hz)
    own = dataclasses.replace(own, bands={"all": band})
    return document(shown, desk.daemon.view(), desk.here, own)


def test_a_front_end_without_a_spectrum_is_told_as_none(monkeypatch) -> None:
    desk = Desk(made(1))
    assert desk.daemon.answer({"do": "spectrum"}) == {"spectrum": None}
    shown = {"places": [], "readings": None}
    monkeypatch.setattr(Front, "shown", lambda _: shown, raising=False)
    found = desk.daemon.answer({"do": "spectrum"})["spectrum"]
    assert (found["places"], found["seconds"]) == ([], None)
    assert found["bands"] == [{"name": "all", "low_hz": 8e8, "high_hz": 1e9}]


def test_a_place_has_its_edges_its_age_and_its_levels_in_db() -> None:
    found = told({"places": [place()], "readings": None})
    (one,) = found["places"]
    assert (one["low_hz"], one["high_hz"]) == (898.72e6, 901.28e6)
    assert one["mean_dbfs"][9:12] == [-70.0, -50.0, -70.0]
    assert one["mean_dbfs"][127] is None
    assert one["seconds"] == 3.0
    assert one["age_s"] >= 0.0
    assert one["outside"] is None  # the band of 800 to 1000 MHz holds it all


def test_what_no_band_touches_is_summed_apart() -> None:
    """Source: by hand; a step has 10 kHz, the band reaches from step 100 into step 199."""
    found = told({"places": [place()], "readings": None}, low_hz=899.72e6, high_hz=900.715e6)
    outside = found["places"][0]["outside"]
    power = 99 * 1e-7 + 1e-5 + 56 * 1e-7
    assert outside["dbfs"] == pytest.approx(10 * np.log10(power), abs=1e-6)
    assert outside["strongest_dbfs"] == -50.0
    assert outside["strongest_hz"] == pytest.approx(898.72e6 + 105e3)


def test_bands_are_weighed_as_the_record_weighs_them() -> None:
    """Source: of the made station, 1e5 V2/m2 per W, a ratio of 1 per V2/m2, counts in 0.001 dBm."""
    (band,) = told({"places": [], "readings": readings(-50_000, -20_000)})["bands"]
    assert band["e_mean"] == pytest.approx(np.sqrt(1e5 * 1e-8), rel=1e-3)
    assert band["e_max"] == pytest.approx(np.sqrt(1e5 * 1e-5), rel=1e-3)
    assert band["shares"] == pytest.approx([1e-3] * len(band["shares"]), rel=1e-3)


def test_clipped_readings_and_levels_off_the_table_carry_their_reason() -> None:
    (band,) = told({"places": [], "readings": readings(-50_000, -20_000, int(Flag.CLIPPED))})[
        "bands"
    ]
    assert "converter clipped" in band["flags"]
    (band,) = told({"places": [], "readings": readings(-(10**7), -(10**7))})["bands"]
    assert np.isnan(band["e_mean"])
    assert band["flags"]
