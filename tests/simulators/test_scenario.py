"""The scenario's field against worked examples and against what its file says."""

from __future__ import annotations

import math

import numpy as np
import pytest

from simulators import scenario

HEAD = '[scene]\nname = "test"\nplace = "nowhere (invented)"\nsimulated = true\n'
SOURCE = """
[[transmitter]]
name = "one"
frequency_hz = 1e9
eirp_w = 1000
distance_m = 1000
polarisation = [1, 2, 2]
"""


def _scene(tmp_path, text: str) -> scenario.Scene:
    path = tmp_path / "scene.toml"
    path.write_text(HEAD + text)
    return scenario.load(path)


def test_far_field_of_a_kilowatt_at_a_kilometre() -> None:
    """Rec. ITU-R P.525: e (mV/m) = 173 sqrt(p / kW) / (d / km); 104.77 dB(uV/m)."""
    e_v_per_m = scenario.far_field_e_v_per_m(1000.0, 1000.0)
    assert e_v_per_m == pytest.approx(0.1732, abs=5e-5)
    assert 20 * math.log10(e_v_per_m * 1e6) == pytest.approx(104.77, abs=0.005)


def test_power_density_of_a_radio_module() -> None:
    """An FCC equipment-authorisation exhibit: 20.37 dBm and 2 dBi at 20 cm, 0.034334 mW/cm2."""
    e_v_per_m = scenario.far_field_e_v_per_m(10 ** (2.237 - 3), 0.2)
    s_w_per_m2 = e_v_per_m**2 / (120 * math.pi)  # the free-space form that goes with sqrt(30 P G)
    assert s_w_per_m2 / 10 == pytest.approx(0.034334, abs=5e-7)


def test_axes_share_the_field_by_the_squares_of_the_direction(tmp_path) -> None:
    truth = scenario.truth(_scene(tmp_path, SOURCE), 1, 0.0, 10, 1.0)
    assert truth.e2_axes == pytest.approx(np.tile([0.03 / 9, 0.12 / 9, 0.12 / 9], (10, 1)))
    assert truth.e2 == pytest.approx(np.full(10, 0.03))


@pytest.mark.parametrize("name", scenario.available())
@pytest.mark.parametrize("chunk", [37, 900, 3600, 3601])
def test_any_cut_gives_the_same_field(name: str, chunk: int) -> None:
    n, rate_hz, t0_s, midnight_s = 9000, 2.0, 1234.5, 60_000.0
    whole = scenario.truth(name, 5, t0_s, n, rate_hz, midnight_s)
    for first in range(0, n, chunk):
        part = scenario.truth(
            name, 5, t0_s + first / rate_hz, min(chunk, n - first), rate_hz, midnight_s
        )
        cut = slice(first, first + chunk)
        assert np.array_equal(part.e2_by_source, whole.e2_by_source[cut])
        assert np.array_equal(part.times_s, whole.times_s[cut])


def test_another_seed_is_another_day() -> None:
    one, two = (scenario.truth("busy-day", seed, 0.0, 600, 1.0).e2 for seed in (1, 2))
    assert np.mean(one == two) < 0.5


def test_traffic_and_duty_are_those_of_the_file(tmp_path) -> None:
    """Share of instants on and carrying traffic, within five binomial deviations."""
    daily = ", ".join(["0.2"] * 12 + ["0.7"] * 12)
    text = f"{SOURCE}daily = [{daily}]\nidle_share = 0.1\ntdd_duty = 0.75\ntdd_off_db = -40\n"
    scene = _scene(tmp_path, text)
    for hour, load in ((3, 0.2), (15, 0.7)):
        level = scenario.truth(scene, 9, hour * 3600.0, 7200, 1.0).e2 / 0.03
        tolerance = 5 * 0.5 / math.sqrt(7200)
        assert np.mean(level > 0.05) == pytest.approx(0.75, abs=tolerance)
        assert np.mean(level > 0.5) == pytest.approx(0.75 * load, abs=tolerance)
        assert sorted(set(level.round(6))) == [0.0001, 0.1, 1.0]


def test_the_daily_profile_follows_utc(tmp_path) -> None:
    daily = ", ".join(["0"] * 6 + ["1"] * 18)
    scene = _scene(tmp_path, f"{SOURCE}daily = [{daily}]\nidle_share = 0\n")
    night = scenario.truth(scene, 1, 0.0, 5 * 3600, 1.0)
    assert night.e2.max() == 0.0
    noon = scenario.truth(scene, 1, 0.0, 3600, 1.0, midnight_s=12 * 3600.0)
    assert noon.e2.min() == pytest.approx(0.03)


def test_bursts_come_as_often_and_last_as_long_as_the_file_says(tmp_path) -> None:
    text = SOURCE.replace("transmitter", "burst") + "per_day = 24\nlasting_s = [20, 40]\n"
    on = scenario.truth(_scene(tmp_path, text), 2, 0.0, 20 * 86_400, 1.0).e2 > 0
    edges = np.flatnonzero(np.diff(on.astype(int)))
    starts = np.count_nonzero(np.diff(on.astype(int)) == 1)
    assert starts == pytest.approx(480, abs=5 * math.sqrt(480))  # Poisson, five deviations
    lengths = np.diff(edges)[0 if not on[0] else 1 :: 2]
    assert np.median(lengths) == pytest.approx(30, abs=3)
    assert lengths.min() >= 19  # shorter than 20 s only by where the readings fall


def test_scenes_lie_where_their_words_say() -> None:
    """Mean of E2 over 30 min against ICNIRP 2020 Table 5, general public, each at its frequency:
    E = 1.375 sqrt(f/MHz) V/m up to 2 GHz, S = 10 W/m2 above."""
    highest = {}
    for name in ("quiet", "busy-day", "over-limit"):
        truth = scenario.truth(name, 1, 0.0, 86_400, 1.0)
        f_mhz = truth.frequencies_hz / 1e6
        limit2 = np.where(f_mhz < 2000, 1.375**2 * f_mhz, 10 * 376.73)
        ratio = (truth.e2_by_source / limit2).sum(1)
        highest[name] = np.convolve(ratio, np.full(1800, 1 / 1800), "valid").max()
    assert highest["quiet"] < 0.01
    assert 0.2 < highest["busy-day"] < 0.5
    assert highest["over-limit"] > 1.0


@pytest.mark.parametrize(
    ("text", "word"),
    [
        (SOURCE.replace("eirp_w", "power_w"), "eirp_w"),
        (SOURCE.replace("[1, 2, 2]", "[1, 2]"), "3 numbers"),
        (SOURCE + "daily = [1]", "24 numbers"),
        (SOURCE.replace("transmitter", "burst") + "per_day = 1\nlasting_s = [5, 9e9]", "lasting_s"),
        ("this is no table", "scene.toml"),
    ],
)
def test_a_wrong_scene_is_one_line(tmp_path, text: str, word: str) -> None:
    with pytest.raises(ValueError, match=word) as caught:
        _scene(tmp_path, text)
    assert "\n" not in str(caught.value)


def test_a_scene_must_say_that_it_is_simulated(tmp_path) -> None:
    path = tmp_path / "scene.toml"
    path.write_text(HEAD.replace("true", "false") + SOURCE)
    with pytest.raises(ValueError, match="simulated = true"):
        scenario.load(path)


def test_an_unknown_scene_and_an_instant_off_the_grid_are_refused() -> None:
    with pytest.raises(ValueError, match="busy-day"):
        scenario.load("stormy")
    with pytest.raises(ValueError, match="grid"):
        scenario.truth("quiet", 1, 0.3, 10, 1.0)
