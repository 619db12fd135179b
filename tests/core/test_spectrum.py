"""Band powers: against scipy, against laws of the transform, and cut anywhere."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import signal

from monitor.core.errors import ConfigError
from monitor.core.spectrum import (
    BandAccumulator,
    BandPowers,
    Samples,
    bytes_per_sample,
    clipped_components,
    samples_from_bytes,
)

RATE = 1e6
WHOLE = (-RATE / 2, RATE / 2)


def noise(n: int, seed: int = 1) -> Samples:
    draw = np.random.default_rng(seed)
    return (draw.normal(size=n) + 1j * draw.normal(size=n)).astype(np.complex64)


def powers(samples: Samples, *bands: tuple[float, float], **how: float) -> BandPowers:
    accumulator = BandAccumulator(RATE, bands or [WHOLE], **how)  # type: ignore[arg-type]
    accumulator.add(samples)
    return accumulator.result()


def welch(samples: Samples, low: float, high: float, fft: int, overlap: float) -> float:
    f, density = signal.welch(
        samples.astype(np.complex128), RATE, window="hann", nperseg=fft,
        noverlap=int(overlap * fft), detrend=False, return_onesided=False, scaling="density",
    )  # fmt: skip
    return float(density[(f >= low) & (f < high)].sum() * RATE / fft)


@pytest.mark.parametrize("fft", [64, 1000, 1024])
@pytest.mark.parametrize("overlap", [0.0, 0.5, 0.75])
@pytest.mark.parametrize("n", [1024, 5000, 200_001])
def test_equals_scipy_welch(fft: int, overlap: float, n: int) -> None:
    samples = noise(n)
    bands = [WHOLE, (-1e5, 1e5), (2e5, 3.3e5)]
    found = powers(samples, *bands, fft=fft, overlap=overlap)
    expected = [welch(samples, *band, fft, overlap) for band in bands]
    assert found.power == pytest.approx(expected, rel=1e-12)
    assert found.segments == (n - fft) // (fft - int(overlap * fft)) + 1


def test_total_is_the_mean_square_of_every_sample() -> None:
    samples = noise(12_345)
    expected = np.mean(np.abs(samples.astype(np.complex128)) ** 2)
    assert powers(samples).total_power == pytest.approx(expected, rel=1e-12)
    assert powers(samples).samples == 12_345


@pytest.mark.parametrize("bin_number", [0, 37, -200])
def test_a_tone_of_amplitude_one_is_0_dbfs(bin_number: int) -> None:
    """A sine's Hann line spreads over three bins; together they hold its power."""
    hz = bin_number * RATE / 1024
    tone = np.exp(2j * np.pi * hz / RATE * np.arange(50_000)).astype(np.complex64)
    found = powers(tone, (hz - 2000, hz + 2000), (hz + 20_000, hz + 40_000))
    assert 10 * math.log10(found.power[0]) == pytest.approx(0.0, abs=1e-5)
    assert found.power[1] < 1e-12
    assert found.peak[0] == pytest.approx(found.power[0], rel=1e-5)


@pytest.mark.parametrize("low_hz", [-1e5, 1e5])
def test_a_band_holds_its_low_edge_and_not_its_high_edge(low_hz: float) -> None:
    """Whole bins with low <= f < high: neighbouring bands add up, no bin counts twice."""
    samples = noise(8192)
    step = RATE / 1024
    edge = round(low_hz / step) * step
    low, high = edge - 5 * step, edge + 5 * step
    found = powers(samples, (low, edge), (edge, high), (low, high))
    assert found.power[0] + found.power[1] == pytest.approx(found.power[2], rel=1e-12)


@given(st.integers(0, 1000), st.floats(0.01, 100.0))
@settings(max_examples=20, deadline=None)
def test_all_bins_together_are_the_total_of_a_stationary_signal(seed: int, scale: float) -> None:
    """Parseval: each segment's bins hold its windowed energy; equal where the power is constant."""
    phases = np.random.default_rng(seed).uniform(0, 2 * np.pi, 20_000)
    samples = (scale * np.exp(1j * phases)).astype(np.complex64)
    found = powers(samples)
    assert found.power[0] == pytest.approx(found.total_power, rel=1e-6)


@given(st.lists(st.integers(0, 90_000), max_size=6), st.sampled_from([64, 1024]))
@settings(max_examples=25, deadline=None)
def test_where_the_stream_is_cut_does_not_matter_to_the_last_bit(cuts: list[int], fft: int) -> None:
    samples = noise(90_000)
    bands = [WHOLE, (1e5, 2e5)]
    whole = powers(samples, *bands, fft=fft)
    accumulator = BandAccumulator(RATE, bands, fft)
    for piece in np.split(samples, sorted(cuts)):
        accumulator.add(piece)
        accumulator.result()  # looking does not disturb
    found = accumulator.result()
    assert found.power.tobytes() == whole.power.tobytes()
    assert found.peak.tobytes() == whole.peak.tobytes()
    assert (found.total_power, found.samples) == (whole.total_power, whole.samples)


def test_a_rare_burst_is_in_the_mean_and_in_the_peak() -> None:
    """A 5 % burst 30 dB up; averaging amplitudes or dB would miss most of it."""
    samples = noise(204_800) * np.float32(0.01)
    samples[20_480:30_720] *= np.float32(1000**0.5)
    found = powers(samples)
    expected = np.mean(np.abs(samples.astype(np.complex128)) ** 2)
    assert found.power[0] == pytest.approx(expected, rel=0.02)
    assert 10 * math.log10(found.peak[0] / found.power[0]) == pytest.approx(12.9, abs=0.6)
    mean_amplitude = np.mean(np.abs(samples)) ** 2
    assert 10 * math.log10(mean_amplitude / expected) < -8


def test_fewer_samples_than_a_segment_have_a_total_but_no_bands() -> None:
    found = powers(noise(100))
    assert math.isnan(found.power[0])
    assert found.segments == 0
    assert found.total_power > 0
    assert math.isnan(powers(noise(0)).total_power)


@pytest.mark.parametrize(
    ("bands", "how", "says"),
    [
        ([(0.0, 0.0)], {}, "low end"),
        ([(2.0, 1.0)], {}, "low end"),
        ([(math.nan, 1.0)], {}, "low end"),
        ([(-6e5, 0.0)], {}, "outside the sampled span"),
        ([(0.0, 6e5)], {}, "outside the sampled span"),
        ([(10.0, 20.0)], {}, "no bin"),
        ([WHOLE], {"fft": 1}, "fft"),
        ([WHOLE], {"fft": 1 << 40}, "fft"),
        ([WHOLE], {"overlap": 1.0}, "overlap"),
        ([WHOLE], {"overlap": -0.1}, "overlap"),
        ([WHOLE], {"rate_hz": 0.0}, "rate"),
        ([WHOLE], {"rate_hz": math.nan}, "rate"),
    ],
)
def test_what_cannot_be_measured_is_refused(
    bands: list[tuple[float, float]], how: dict[str, float], says: str
) -> None:
    with pytest.raises(ConfigError, match=says):
        BandAccumulator(**({"rate_hz": RATE, "bands": bands} | how))  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("datatype", "codes", "dtype", "first"),
    [
        ("cu8", [0, 255], "u1", complex(-1, 1)),
        ("cs8", [-128, 64], "i1", complex(-1, 0.5)),
        ("ci8", [-128, 64], "i1", complex(-1, 0.5)),
        ("cs16", [-32768, 16384], "<i2", complex(-1, 0.5)),
        ("ci16_le", [-32768, 16384], "<i2", complex(-1, 0.5)),
        ("ci16_be", [-32768, 16384], ">i2", complex(-1, 0.5)),
        ("cf32", [3.0, -0.25], "<f4", complex(3, -0.25)),
        ("cf32_le", [3.0, -0.25], "<f4", complex(3, -0.25)),
        ("cf32_be", [3.0, -0.25], ">f4", complex(3, -0.25)),
    ],
)
def test_scale_of_each_datatype(
    datatype: str, codes: list[float], dtype: str, first: complex
) -> None:
    raw = np.array(codes, dtype).tobytes()
    assert samples_from_bytes(raw, datatype).tolist() == [first]
    assert bytes_per_sample(datatype) == len(raw)


@given(st.binary(max_size=64), st.sampled_from(["cu8", "cs8", "cs16", "ci16_be", "cf32"]))
def test_part_of_a_sample_at_the_end_is_left_out(raw: bytes, datatype: str) -> None:
    whole = len(raw) // bytes_per_sample(datatype)
    assert samples_from_bytes(raw, datatype).shape == (whole,)
    assert clipped_components(raw, datatype)[1] == 2 * whole


def test_codes_at_a_rail_are_counted() -> None:
    assert clipped_components(bytes([0, 1, 254, 255]), "cu8") == (2, 4)
    assert clipped_components(np.array([-128, -127, 126, 127], "i1").tobytes(), "cs8") == (2, 4)
    rails = np.array([-32768, -32767, 32766, 32767], "<i2").tobytes()
    assert clipped_components(rails, "cs16") == (2, 4)
    assert clipped_components(np.array([9e9, 1, -1, 0], "<f4").tobytes(), "cf32") == (0, 4)


def test_an_unknown_datatype_names_the_known_ones() -> None:
    with pytest.raises(ConfigError, match="cu8, cs8, cs16, cf32"):
        samples_from_bytes(b"", "cu12")
