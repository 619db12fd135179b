"""The airs that the simulated receiver hears, and the truth that is told of them."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from simulators import control, iq_signals
from tests.simulators.radio import Radio, band_dbfs, complex_of, radio

CENTRE = 806_000_000


def _rows(served: Radio) -> list[dict[str, float]]:
    served.state()
    lines = [line for line in served.truth.read_text().splitlines() if not line.startswith("#")]
    return [{k: float(v) for k, v in row.items()} for row in csv.DictReader(lines)]


def test_the_truth_file_holds_what_was_on_the_air(tmp_path: Path) -> None:
    scene = tmp_path / "steps.toml"
    scene.write_text(
        '[scene]\nname = "steps"\nsimulated = true\n'
        '[[band]]\nname = "low"\nlow_hz = 805.9e6\nhigh_hz = 806.0e6\n'
        '[[band]]\nname = "high"\nlow_hz = 806.0e6\nhigh_hz = 806.1e6\n'
        '[[signal]]\nname = "n"\nkind = "noise"\nfrequency_hz = 806.0e6\nwidth_hz = 0.2e6\n'
        "steps = [[0, -60.0], [2.5, -50.0]]\n"
        '[[signal]]\nname = "p"\nkind = "tdd"\nfrequency_hz = 806.05e6\nwidth_hz = 1000\n'
        "on_us = 3750\nperiod_us = 5000\nlevel_dbm = -60.0\n"
    )
    with radio(tmp_path, "--air", str(scene)) as served, served.client() as client:
        client.tell(1, CENTRE)
        client.read(16_000_000)
        rows = _rows(served)
    early = [row for row in rows if row["device_s"] < 2.3]
    late = [row for row in rows if row["device_s"] > 2.6]
    assert np.mean([row["low_w"] for row in early]) == pytest.approx(0.5e-9, rel=1e-4)
    assert np.mean([row["low_w"] for row in late]) == pytest.approx(5e-9, rel=1e-4)
    assert np.mean([row["high_w"] for row in late]) == pytest.approx(5.75e-9, rel=0.01)
    assert rows[-1]["centre_hz"] == CENTRE
    steps = [b["first_sample"] - a["first_sample"] - a["samples"] for a, b in zip(rows, rows[1:])]
    assert set(steps) == {0.0}


@pytest.mark.parametrize(
    ("change", "word"),
    [
        (('kind = "carrier"', 'kind = "music"'), "music"),
        (("simulated = true", "simulated = false"), "simulated"),
        (("width_hz = 0.9e6", "width_hz = 0"), "width_hz"),
        (("noise_figure_db", "noise_figur_db"), "noise_figur_db"),
        (("period_us = 1000", "period_us = 10"), "period_us"),
    ],
)
def test_an_air_that_means_nothing_is_refused_by_name(tmp_path: Path, change, word) -> None:
    text = (iq_signals.AIR / "town.toml").read_text()
    assert change[0] in text
    path = tmp_path / "wrong.toml"
    path.write_text(text.replace(*change))
    with pytest.raises(ValueError, match=word) as failed:
        iq_signals.load(path)
    assert str(path) in str(failed.value)


@pytest.mark.parametrize("number", range(4), ids=["carrier", "noise", "tdd", "pulses"])
def test_the_stream_read_by_plain_numpy_holds_what_the_truth_file_says(tmp_path, number) -> None:
    name, low_hz, high_hz = iq_signals.load("town").bands[number]
    centre_hz, rate_hz = int(low_hz + high_hz) // 2 + 100_000, 2_400_000
    with radio(tmp_path) as served, served.client() as client:
        for code, value in ((2, rate_hz), (1, centre_hz), (3, 1), (4, 197)):
            client.tell(code, value)
        client.read(12_000_000)
        rows = _rows(served)
        sent = served.sent.read_bytes()
    part = [row for row in rows if (row["centre_hz"], row["gain_db"]) == (centre_hz, 19.7)][2:-2]
    first = int(part[0]["first_sample"])
    n = int(sum(row["samples"] for row in part))
    assert n > rate_hz
    samples = complex_of(sent[2 * first : 2 * (first + n)])
    samples = samples[: rate_hz // 5 * 5]  # whole periods of all that is switched
    real_hz = rate_hz * (1 + 2e-6)
    shift_hz = -centre_hz * (1 + 2e-6)
    read_dbm = band_dbfs(samples, real_hz, low_hz + shift_hz, high_hz + shift_hz) - 19.7 - 12.0
    told_w = np.mean([row[f"{name}_w"] for row in part])
    assert read_dbm == pytest.approx(10.0 * np.log10(told_w * 1e3), abs=0.05)


def test_a_question_about_any_band_is_answered(tmp_path: Path) -> None:
    with radio(tmp_path) as served:
        shared = control.ask(served.control, {"band_hz": [1420.5e6, 1421.0e6]})
        nothing = control.ask(served.control, {"band_hz": [900e6, 901e6]})
        nonsense = control.ask(served.control, {"band_hz": "all"})
    # -48 dBm three quarters of the time, half of its width
    assert shared["power_w"] == pytest.approx(10**-7.8 * 0.75 * 0.5, rel=1e-6)
    assert 0.0 < nothing["power_w"] < 1e-15  # of the pulses' far skirts
    assert nonsense["ok"] is False


def test_every_air_that_is_shipped_can_be_read_and_says_what_it_is() -> None:
    assert iq_signals.available() == ["town"]
    town = iq_signals.load("town")
    assert {signal.kind for signal in town.signals} == set(iq_signals.KINDS)
    assert all(row.max() > 0.9 for row in town.shares())
