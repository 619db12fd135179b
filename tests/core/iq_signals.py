"""Samples whose band power is known, and the engine's figures of them."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from monitor.core.bandpower import BandFigures, Engine

Complex = NDArray[np.complex128]
RATE = 1e6
FFT = 1024
BIN = RATE / FFT
WHOLE = (-RATE / 2, RATE / 2)


def noise(n: int, seed: int = 1, dbfs: float = 0.0) -> Complex:
    """White complex noise of that mean square."""
    draw = np.random.default_rng(seed)
    both = draw.normal(size=n) + 1j * draw.normal(size=n)
    return both * math.sqrt(10 ** (dbfs / 10) / 2)


def tone(n: int, hz: float, dbfs: float = 0.0, phase: float = 0.0) -> Complex:
    """A steady tone of that power."""
    turns = 2 * np.pi * hz / RATE * np.arange(n) + phase
    return 10 ** (dbfs / 20) * np.exp(1j * turns)


def band_noise(n: int, low: float, high: float, seed: int = 1) -> Complex:
    """Noise of mean square 1 that has nothing outside the band: drawn line by line."""
    lines = noise(n, seed)
    f = np.fft.fftfreq(n, 1 / RATE)
    lines[(f < low) | (f >= high)] = 0
    made = np.fft.ifft(lines)
    return made / math.sqrt(float(np.mean(np.abs(made) ** 2)))


def band_power(samples: Complex, low: float, high: float) -> float:
    """Mean square in a band by one transform of everything: no window, no segment, no edge."""
    lines = np.abs(np.fft.fft(samples) / samples.size) ** 2
    f = np.fft.fftfreq(samples.size, 1 / RATE)
    return float(lines[(f >= low) & (f < high)].sum())


def cf32(samples: Complex) -> bytes:
    """As single precision, interleaved."""
    return samples.astype(np.complex64).tobytes()


def cu8(samples: Complex) -> bytes:
    """As an ideal 8-bit converter gives them: code = floor of the value in steps, rails at 0, 255.

    Full scale +-127.5 steps about 127.5.
    """
    parts = samples.astype(np.complex128).view(np.float64)
    return np.clip(np.floor(parts * 127.5 + 128), 0, 255).astype(np.uint8).tobytes()


def figures(
    samples: Complex, *bands: tuple[float, float], datatype: str = "cf32", **how: float
) -> BandFigures:
    """What the engine says of samples (all of the span where no band is given)."""
    engine = Engine(RATE, bands or [WHOLE], datatype=datatype, **how)  # type: ignore[arg-type]
    engine.add({"cf32": cf32, "cu8": cu8}[datatype](samples))
    return engine.result()


def db(ratio: float) -> float:
    """Ten times the logarithm."""
    return 10 * math.log10(ratio)
