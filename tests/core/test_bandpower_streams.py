"""The live engine fed as a wire feeds it: cut anywhere, interval after interval, every datatype."""

from __future__ import annotations

from dataclasses import astuple

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.core import bandpower, segments
from monitor.core.bandpower import BandFigures, Engine
from monitor.core.spectrum import DATATYPES, clipped_components, samples_from_bytes
from tests.core.iq_signals import BIN, FFT, RATE, WHOLE, cf32, cu8, db, noise, tone

BANDS = [WHOLE, (1e5, 2e5)]
HOP = FFT // 2


def engine(datatype: str = "cu8", fft: int = FFT) -> Engine:
    return Engine(RATE, BANDS, datatype=datatype, fft=fft, excluded_hz=3 * BIN, edge_share=0.05)


def bits(found: BandFigures) -> list[object]:
    return [v.tobytes() if isinstance(v, np.ndarray) else repr(v) for v in astuple(found)]


@given(st.lists(st.integers(0, 180_000), max_size=6), st.sampled_from([64, 1024]))
@settings(max_examples=25, deadline=None)
def test_where_the_stream_is_cut_does_not_matter_to_the_last_bit(cuts: list[int], fft: int) -> None:
    """In the middle of a sample too."""
    raw = cu8(noise(90_000, 1, -12.0))
    whole, pieces = engine(fft=fft), engine(fft=fft)
    whole.add(raw)
    edges = [0, *sorted(cuts), len(raw)]
    for start, end in zip(edges, edges[1:]):
        pieces.add(raw[start:end])
        pieces.result()  # looking does not disturb
    assert bits(pieces.result()) == bits(whole.result())


@given(st.lists(st.integers(1, 60_000), min_size=1, max_size=5))
@settings(max_examples=25, deadline=None)
def test_intervals_of_a_stream_lose_no_segment_and_no_sample(lengths: list[int]) -> None:
    """Energies of the intervals add up to those of the stream in one."""
    n = sum(lengths)
    raw = cu8(noise(n, 2, -12.0))
    running, whole = engine(), engine()
    whole.add(raw)
    once = whole.result()
    found, start = [], 0
    for length in lengths:
        running.add(raw[2 * start : 2 * (start + length)])
        found.append(running.result())
        running.reset()
        start += length
    assert [one.samples for one in found] == lengths
    assert sum(one.segments for one in found) == once.segments
    assert sum(one.clipped for one in found) == once.clipped
    energy = sum(one.total_power * one.samples for one in found)
    assert energy == pytest.approx(once.total_power * n, rel=1e-12)
    assert sum(one.mean * one.samples for one in found) == pytest.approx(once.mean * n, rel=1e-9)
    if once.segments:
        seen = [one for one in found if one.segments]
        raws = sum(one.raw_power * one.segments for one in seen)
        np.testing.assert_allclose(raws, once.raw_power * once.segments, rtol=1e-12)
        np.testing.assert_array_equal(np.max([one.peak for one in seen], axis=0), once.peak)


@pytest.mark.parametrize("after", [-10_000, -HOP - 30, -HOP, -40, 0, 100])
@pytest.mark.parametrize("length", [1, 80, 500, 3000])
@pytest.mark.parametrize(("interval", "allowed_db"), [(24_064, 1e-4), (24_000, 0.1)])
def test_a_burst_over_the_edge_of_two_intervals_counts_evenly(
    after: int, length: int, interval: int, allowed_db: float
) -> None:
    """Energy of a burst near the end of a stream's second interval, whichever intervals get it.

    Exact for intervals of whole half segments (24_064 is 47 of them); else an interval has one
    segment more or fewer than its share, 1/46 here, which is 0.09 dB.
    """
    samples = np.zeros(4 * interval, np.complex128)
    place = 2 * interval + after
    samples[place : place + length] = noise(length, 3)
    one = Engine(RATE, [WHOLE], datatype="cf32")
    energy = 0.0
    for part in np.split(samples, 4):
        one.add(cf32(part))
        found = one.result()
        energy += found.raw_power[0] * found.samples
        one.reset()
    assert abs(db(energy / float(np.sum(np.abs(samples) ** 2)))) < allowed_db


def test_after_a_gap_nothing_reaches_over() -> None:
    """A strong tone before a retune leaves no trace behind it, half a sample of it included."""
    quiet = cf32(noise(50_000, 4, -60.0))
    fresh, used = engine("cf32"), engine("cf32")
    used.add(cf32(tone(30_000, 50 * BIN)) + b"\x01\x02\x03")
    used.reset(continues=False)
    for one in (fresh, used):
        one.add(quiet)
    assert bits(used.result()) == bits(fresh.result())


@pytest.mark.parametrize("datatype", sorted(DATATYPES))
def test_every_datatype_has_its_scale(datatype: str) -> None:
    """Against the conversion of the file reader, with the total of its samples in float64."""
    layout = DATATYPES[datatype]
    rail_db = -3.0 if layout.rails else 30.0
    parts = noise(50_000, 5, rail_db).view(np.float64) * layout.full_scale - layout.offset
    if layout.rails:
        parts = np.clip(np.round(parts), *layout.rails)
    raw = parts.astype(layout.dtype).tobytes()
    one = engine(datatype)
    one.add(raw)
    found = one.result()
    samples = samples_from_bytes(raw, datatype).astype(np.complex128)
    total = float(np.mean(np.abs(samples) ** 2))
    assert db(found.total_power / total) == pytest.approx(0.0, abs=1e-6)
    assert found.mean == pytest.approx(samples.mean(), rel=1e-4)
    assert (found.clipped, found.components) == clipped_components(raw, datatype)
    crest = float(np.max(np.abs(samples) ** 2)) / total
    assert found.crest_db == pytest.approx(db(crest), abs=1e-5)
    assert db(found.raw_power[0] / total) == pytest.approx(0.0, abs=0.05)


@pytest.mark.parametrize("fft", [32, 1000, 65_536, 131_072])
def test_the_size_of_blocks_changes_no_figure(fft: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Segments longer than a block, and blocks of one batch: the sums are the same."""
    raw = cu8(noise(400_000, 6, -12.0))
    found = []
    for block, batch in ((65_536, 16_384), (8192, 8192), (200_000, 1000)):
        monkeypatch.setattr(bandpower, "BLOCK_SAMPLES", block)
        monkeypatch.setattr(segments, "BATCH_SAMPLES", batch)
        one = engine(fft=fft)
        one.add(raw)
        found.append(one.result())
    assert found[0].segments == 400_000 // (fft // 2) - 1
    for other in found[1:]:
        np.testing.assert_allclose(other.power, found[0].power, rtol=1e-12)
        np.testing.assert_allclose(other.raw_power, found[0].raw_power, rtol=1e-12)
        np.testing.assert_allclose(other.peak, found[0].peak, rtol=1e-12)
        assert other.total_power == pytest.approx(found[0].total_power, rel=1e-12)
