"""What the simulated receiver's samples say, read by plain numpy, against what the air says.

Full scale (0 dBFS) is a complex tone of amplitude 127.5; a byte b stands for b - 127.5.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from simulators import iq_signals
from simulators.iq_receiver import GAINS_DB, Receiver, Settings
from simulators.iq_signals import Air, Front, Signal, Spur
from simulators.iq_transfers import QUEUE, TRANSFER, Transfers
from tests.simulators.radio import band_dbfs, complex_of

RATE = 2_400_000
CENTRE = 806_000_000
QUIET = Front(
    full_scale_dbm=0.0,
    noise_figure_db=-60.0,
    converter_noise_lsb=0.0,
    dc_lsb=(0.0, 0.0),
    imbalance_db=0.0,
    imbalance_deg=0.0,
    settle_ms=0.0,
)
SET = Settings(centre_hz=CENTRE, rate_hz=RATE, manual=True, gain=0)


def signal(kind: str, offset_hz: float, level_dbm: float, **more: float) -> Signal:
    """A signal beside the centre."""
    return Signal(kind, kind, CENTRE + offset_hz, ((0.0, level_dbm),), **more)


def air(*signals: Signal, front: Front = QUIET, spurs: tuple[Spur, ...] = ()) -> Air:
    """Signals, and one band that holds the whole span."""
    return Air("bench", signals, (("all", CENTRE - RATE / 2, CENTRE + RATE / 2),), spurs, front)


def take(
    on_air: Air, transfers: int = 4, settings: Settings = SET, seed: int = 1
) -> NDArray[np.complex128]:
    """So many transfers from device time 0 on."""
    stream = Transfers(Receiver(on_air, seed), on_air.front, settings, 0.0, lambda *_: None)
    return complex_of(b"".join(stream.take(10.0) for _ in range(transfers)))


def dbfs(samples: NDArray[np.complex128]) -> float:
    """Mean square, dBFS."""
    return float(10.0 * np.log10(np.mean(np.abs(samples) ** 2)))


def white(level_dbfs: float) -> Front:
    """A front whose converters' noise alone has that level."""
    sigma_lsb = 127.5 * 10.0 ** (level_dbfs / 20.0) / math.sqrt(2.0)
    return replace(QUIET, converter_noise_lsb=sigma_lsb)


# platform page on eight-bit samples, noise-like signals: level, error as read, the same after
# taking off 1/6 LSB squared, share of bytes at the rails
ROWS = [
    (-48, 3.06, 1.4, 0.0),
    (-45, 1.31, 0.12, 0.0),
    (-40, 0.43, 0.0, 0.0),
    (-30, 0.05, 0.0, 0.0),
    (-10, 0.0, 0.0, 1e-5),
    (-8, -0.01, None, 4e-4),
    (-6, -0.04, None, 5e-3),
    (-5, -0.10, None, 1.2e-2),
    (-3, -0.36, None, 4.7e-2),
    (0, -1.29, None, 0.16),
]


@pytest.mark.parametrize(("level_dbfs", "error_db", "corrected_db", "rails"), ROWS)
def test_eight_bits_err_and_clip_as_they_must(level_dbfs, error_db, corrected_db, rails) -> None:
    samples = take(air(front=white(level_dbfs)), 8)
    read = np.mean(np.abs(samples) ** 2)
    assert 10 * math.log10(read) - level_dbfs == pytest.approx(error_db, abs=0.02)
    if corrected_db is not None:
        less = read - 1.0 / 6.0 / 127.5**2
        assert 10 * math.log10(less) - level_dbfs == pytest.approx(corrected_db, abs=0.03)
    parts = np.abs(samples.view(np.float64))
    at_rails = np.mean(parts > 0.9999)
    assert at_rails == pytest.approx(rails, rel=0.15, abs=6e-6)


def test_a_tone_stands_where_it_is_sent_and_as_strong() -> None:
    samples = take(air(signal("carrier", 312_345.0, -6.0)))
    assert dbfs(samples) == pytest.approx(-6.0, abs=0.01)
    phase = np.unwrap(np.angle(samples))
    slope_hz = np.polyfit(np.arange(phase.size), phase, 1)[0] / (2 * np.pi) * RATE
    assert slope_hz == pytest.approx(312_345.0, abs=0.5)  # the divider's step is 0.2 Hz here


@pytest.mark.parametrize("step", range(0, 29, 4))
def test_levels_follow_the_gain_and_its_error(step: int) -> None:
    errors_db = tuple(0.05 * i for i in range(29))
    front = replace(white(-42.0), gain_error_db=errors_db)  # noise enough to smooth the steps
    on_air = air(signal("carrier", 200_000.0, -60.0), front=front)
    samples = take(on_air, 8, replace(SET, gain=step))
    turn = np.exp(-2j * np.pi * 200_000.0 / RATE * np.arange(samples.size))
    # the noise left in the line scatters the weakest one by 0.05 dB
    line_db = 20.0 * math.log10(abs(np.mean(samples * turn)))
    assert line_db == pytest.approx(-60.0 + GAINS_DB[step] + errors_db[step], abs=0.15)


def test_noise_fills_its_width_evenly_and_looks_like_noise() -> None:
    samples = take(air(signal("noise", 100_000.0, -12.0, width_hz=600_000.0)), 8)
    assert dbfs(samples) == pytest.approx(-12.0, abs=0.02)
    inside = band_dbfs(samples, RATE, -200_000.0, 400_000.0)
    half = band_dbfs(samples, RATE, 100_000.0, 400_000.0)
    assert inside == pytest.approx(-12.0, abs=0.02)
    assert half == pytest.approx(-12.0 - 3.01, abs=0.05)
    assert band_dbfs(samples, RATE, 420_000.0, 900_000.0) < -45.0  # quantising noise only
    power = np.abs(samples) ** 2
    # complex Gaussian: mean of dB 2.51 below the dB of the mean (platform page on statistics)
    assert np.mean(10 * np.log10(power + 1e-9)) - dbfs(samples) == pytest.approx(-2.5, abs=0.15)


def test_time_shared_bursts_are_on_three_quarters_of_the_time() -> None:
    bursts = signal("tdd", 0.0, -12.0, width_hz=900_000.0, on_s=3.75e-3, period_s=5e-3)
    samples = take(air(bursts), 10)
    whole = int(0.005 * RATE) * (samples.size // int(0.005 * RATE))
    assert dbfs(samples[:whole]) == pytest.approx(-12.0 + 10 * math.log10(0.75), abs=0.05)
    cells = np.mean(np.abs(samples[:whole].reshape(-1, 3000)) ** 2, axis=1)  # 1.25 ms each
    assert np.all(cells.reshape(-1, 4)[:, 3] < 4e-5)  # half a step of the converter on either axis
    assert np.all(cells.reshape(-1, 4)[:, :3] > 0.04)


def test_pulses_have_their_length_period_and_peak() -> None:
    pulses = signal("pulses", 50_000.0, -6.0, on_s=20e-6, period_s=1e-3)
    samples = take(air(pulses), 2)
    on = np.abs(samples) > 0.25
    starts = np.flatnonzero(on[1:] & ~on[:-1]) + 1
    assert set(np.diff(starts)) == {2400}
    assert np.sum(on[: 2400 * 100]) == 48 * 100
    assert dbfs(samples[on]) == pytest.approx(-6.0, abs=0.05)


def test_the_share_of_a_pulse_in_a_band_is_that_of_its_spectrum() -> None:
    pulses = signal("pulses", 0.0, -3.0, on_s=20e-6, period_s=1e-3)
    samples = take(air(pulses), 8)
    quiet = replace(pulses, steps=((0.0, -200.0),))
    floor = 10 ** (band_dbfs(take(air(quiet), 8), RATE, -60_000.0, 60_000.0) / 10.0)
    read = 10 ** (band_dbfs(samples, RATE, -60_000.0, 60_000.0) / 10.0)
    told = pulses.share(CENTRE - 60_000.0, CENTRE + 60_000.0) * 10**-0.3 * 0.02
    assert 0.9 < pulses.share(CENTRE - 60_000.0, CENTRE + 60_000.0) < 0.96
    assert floor >= 0.0
    assert 10 * math.log10(read / told) == pytest.approx(0.0, abs=0.15)


def test_offset_image_and_crystal() -> None:
    front = replace(
        QUIET, dc_lsb=(2.0, -1.0), imbalance_db=0.5, imbalance_deg=2.0, crystal_ppm=10.0
    )
    samples = take(air(signal("carrier", 300_000.0, -6.0), front=front))
    mean = samples.mean() * 127.5
    assert mean.real == pytest.approx(2.0, abs=0.05)
    assert mean.imag == pytest.approx(-1.0, abs=0.05)
    at_hz = 300_000.0 - CENTRE * 10e-6
    real_rate = RATE * (1 + 10e-6)
    line = band_dbfs(samples, real_rate, at_hz - 200, at_hz + 200)
    image = band_dbfs(samples, real_rate, -at_hz - 200, -at_hz + 200)
    # image to line: |g e^-jp - 1| / |g e^jp + 1| (common practice, no source)
    turn = 10 ** (0.5 / 20) * np.exp(1j * np.deg2rad(2.0))
    assert image - line == pytest.approx(20 * math.log10(abs((turn - 1) / (turn + 1))), abs=0.1)


def test_a_correction_takes_the_crystal_off() -> None:
    front = replace(QUIET, crystal_ppm=10.0)
    on_air = air(signal("carrier", 300_000.0, -6.0), front=front)
    samples = take(on_air, settings=replace(SET, ppm=10))
    assert band_dbfs(samples, RATE, 299_800.0, 300_200.0) == pytest.approx(-6.0, abs=0.02)


def test_a_spur_follows_the_gain_by_its_slope() -> None:
    spurs = (Spur(CENTRE + 3e5, -30.0, 0.0), Spur(CENTRE - 3e5, -30.0, 3.0))
    found = []
    for step in (11, 12):  # 19.7 and 20.7 dB
        samples = take(air(front=white(-45.0), spurs=spurs), settings=replace(SET, gain=step))
        found.append([band_dbfs(samples, RATE, at - 1e3, at + 1e3) for at in (3e5, -3e5)])
    (still, third), (still_up, third_up) = found
    assert still == pytest.approx(-30.0, abs=0.05)
    assert still_up - still == pytest.approx(0.0, abs=0.05)
    assert third_up - third == pytest.approx(3.0, abs=0.05)


def test_the_span_is_flat_to_four_fifths_and_folds_beyond() -> None:
    for offset_hz, down_db, at_hz in ((0.39 * RATE, 0.0, 0.39), (0.52 * RATE, 36.0, -0.48)):
        samples = take(air(signal("carrier", offset_hz, -1.0), front=white(-45.0)))
        read = band_dbfs(samples, RATE, at_hz * RATE - 500, at_hz * RATE + 500)
        assert read == pytest.approx(-1.0 - down_db, abs=0.1)


def test_automatic_gain_wanders_and_fixed_gain_does_not() -> None:
    def spread_db(settings: Settings) -> float:
        samples = take(air(signal("carrier", 1e5, -45.0)), 40, settings)
        return float(np.ptp([dbfs(part) for part in samples.reshape(40, -1)]))

    assert spread_db(replace(SET, gain=20)) < 0.01
    assert spread_db(replace(SET, manual=False)) > 0.5
    assert spread_db(replace(SET, gain=20, digital_gain=True)) > 0.5


def test_an_unsettled_tuner_hears_noise_alone_after_a_move() -> None:
    front = replace(white(-45.0), settle_ms=20.0)
    on_air = air(signal("carrier", 1e5, -10.0), front=front)
    stream = Transfers(Receiver(on_air, 1), front, SET, 0.0, lambda *_: None)
    stream.take(1.0)
    stream.command(TRANSFER / RATE, 1, CENTRE + 50_000)
    samples = complex_of(stream.take(1.0))
    assert dbfs(samples[:40_000]) == pytest.approx(-43.7, abs=0.1)  # -45 and what eight bits add
    assert dbfs(samples[70_000:]) == pytest.approx(-10.0, abs=0.05)


def test_a_seed_gives_the_same_samples_and_another_seed_others() -> None:
    town = iq_signals.load("town")
    settings = replace(SET, gain=11)
    one = take(town, 2, settings, seed=5)
    assert np.array_equal(one, take(town, 2, settings, seed=5))
    assert not np.array_equal(one, take(town, 2, settings, seed=6))


def test_no_stretch_of_the_noise_comes_twice() -> None:
    samples = take(air(front=white(-20.0)), 8)
    spectra = np.fft.fft(samples.reshape(8, -1))
    for i in range(8):
        for j in range(i):
            match = np.abs(np.fft.ifft(spectra[i] * np.conj(spectra[j]))) / TRANSFER
            assert match.max() < 0.02 * 0.01 * 1.5  # of a mean square of 0.01; a copy gives all


def test_more_than_the_queue_holds_drops_the_oldest() -> None:
    on_air = air()
    stream = Transfers(Receiver(on_air, 1), on_air.front, SET, 0.0, lambda *_: None)
    now_s = (QUEUE + 30.5) * TRANSFER / RATE
    stream.take(now_s)
    assert stream.dropped == 30 * TRANSFER
    assert stream.position == 31 * TRANSFER
    assert stream.wait_s(now_s) == 0.0
    # platform page: 32 s at 2.048 MS/s
    assert QUEUE * TRANSFER / 2_048_000 == 32.0
