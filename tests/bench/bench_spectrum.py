"""Band powers of a second of I/Q at 2.4 MS/s, beside scipy's averaged spectra and bare transforms.

The signal: 8-bit noise-like bursts, three parts on, one off, over a floor, as a receiver's stream.
All ways have the same FFT length, window and overlap, take turns on one core and begin with the
same bytes; that ours and scipy agree is checked before anything is timed. Times are the
processor's: none of these ways starts a thread. Ours is figures of ten intervals with all
corrections, clipped samples, peak and crest besides.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from dataclasses import replace
from statistics import median

import numpy as np
import scipy
from scipy import signal

from monitor.core.bandpower import Engine
from monitor.core.segments import BATCH_SAMPLES, window
from tests.bench.measure import Figure, compare, seconds

RATE_HZ = 2_400_000
FFT = 1024
HOP = FFT // 2
BANDS = [(-900e3, -400e3), (-300e3, 300e3), (500e3, 900e3)]
READ_BYTES = 65_536
INTERVAL = RATE_HZ // 10
ALLOWED_DB = 1e-6
ROUNDS = 11


def recording() -> bytes:
    """One second, cu8."""
    draw = np.random.default_rng(40)
    parts = draw.normal(0.0, 0.15, 2 * RATE_HZ)
    on = (np.arange(RATE_HZ) % 24_000) < 18_000
    parts *= np.repeat(np.where(on, 1.0, 0.03), 2)
    return np.clip(np.round(parts * 127.5 + 127.5), 0, 255).astype(np.uint8).tobytes()


def fresh() -> Engine:
    """The engine as a receiver's process sets it up."""
    return Engine(RATE_HZ, BANDS, datatype="cu8", fft=FFT, excluded_hz=5e3, edge_share=0.05)


def ours(engine: Engine, raw: bytes) -> None:
    """Ten intervals of a stream that arrives in pieces, each with its figures."""
    engine.reset(continues=False)
    taken = 0
    for start in range(0, len(raw), READ_BYTES):
        engine.add(raw[start : start + READ_BYTES])
        taken += READ_BYTES // 2
        if taken >= INTERVAL:
            engine.result()
            engine.reset()
            taken -= INTERVAL


def samples_of(raw: bytes) -> np.ndarray:
    """complex64, as briefly as numpy does it."""
    values = np.frombuffer(raw, np.uint8).astype(np.float32)
    values -= np.float32(127.5)
    values *= np.float32(1 / 127.5)
    return values.view(np.complex64)


def welch(samples: np.ndarray) -> np.ndarray:
    """Power in each band by scipy: float64 (b,)."""
    f, density = signal.welch(
        samples, RATE_HZ, window=window(FFT), nperseg=FFT, noverlap=HOP, detrend=False,
        return_onesided=False,
    )  # fmt: skip
    bands = [density[(f >= a) & (f < b)].sum(dtype=np.float64) for a, b in BANDS]
    return np.array(bands) * RATE_HZ / FFT


def transforms(dtype: type) -> Callable[[], None]:
    """As many transforms as a second needs, in batches like ours, of data that stay in cache."""
    count = BATCH_SAMPLES // HOP
    draw = np.random.default_rng(41)
    lines = draw.normal(size=(count, FFT)) + 1j * draw.normal(size=(count, FFT))
    lines = lines.astype(dtype)
    out = np.empty_like(lines)

    def run() -> None:
        for _ in range(RATE_HZ // (count * HOP)):
            np.fft.fft(lines, axis=1, out=out)

    return run


def check(raw: bytes) -> float:
    """Largest difference from scipy in double precision, dB; ValueError where it is too large."""
    engine = fresh()
    engine.add(raw)
    expected = welch(samples_of(raw).astype(np.complex128))
    difference = float(np.abs(10 * np.log10(engine.result().raw_power / expected)).max())
    if not difference <= ALLOWED_DB:
        raise ValueError(f"differs from scipy by {difference:.3g} dB, allowed is {ALLOWED_DB:g}")
    return difference


def rate(taken: Figure) -> Figure:
    """Samples a second of both, for a second's worth of samples."""
    assert taken.reference is not None
    return replace(
        taken,
        value=RATE_HZ / taken.value / 1e6,
        unit="MS/s",
        better="higher",
        reference=RATE_HZ / taken.reference / 1e6,
    )


def bench_spectrum() -> Iterator[Figure]:
    """Samples a second, one core."""
    raw, engine = recording(), fresh()
    yield Figure("largest difference from scipy, dB", check(raw), "")
    samples = samples_of(raw)
    version = f"scipy {scipy.__version__}"
    run = lambda: ours(engine, raw)  # noqa: E731 - the one thing measured, by several yardsticks
    others: dict[str, Callable[[], object]] = {
        f"{version} welch, bytes to bands": lambda: welch(samples_of(raw)),
        f"{version} welch, conversion not counted": lambda: welch(samples),
        f"numpy {np.__version__} fft alone, double, as ours": transforms(np.complex128),
        f"numpy {np.__version__} fft alone, single": transforms(np.complex64),
    }
    for name, other in others.items():
        taken = compare(
            "bytes to corrected band powers", run, other, name, ROUNDS, time.process_time
        )
        yield rate(taken)
    taken_s = median(seconds(run, time.process_time) for _ in range(ROUNDS))
    yield Figure(
        "share of one core at 2.4 MS/s",
        100 * taken_s,
        "%",
        reference=6.0,
        reference_name="aim",
    )
