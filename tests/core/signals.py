"""Envelope power of every signal class, drawn with a seed; mean power of about one."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

Power = NDArray[np.float64]
SAMPLES = 1 << 20
FLOOR = 1e-3
"""Left in the pauses of bursts: 30 dB below."""


def power(name: str) -> Power:
    """Samples of |z| squared of that signal."""
    rng = np.random.default_rng(22)
    turn = (np.arange(SAMPLES) + 0.5) / SAMPLES
    if name == "constant":
        return np.ones(SAMPLES)
    if name == "noise":
        return rng.exponential(size=SAMPLES)
    if name == "ofdm":
        return _ofdm(rng, 1200, 2048)
    if name in ("qpsk", "qam64"):
        return _single_carrier(rng, 2 if name == "qpsk" else 8)
    if name == "two_tones":
        return np.asarray(2 * np.cos(math.tau * turn) ** 2)
    if name == "am":
        return np.square(1 + np.cos(math.tau * turn))
    duty = int(name[-2:]) / 100
    on = np.where(turn < duty, 1.0, FLOOR)
    return on * rng.exponential(size=SAMPLES) if name.startswith("noise_") else on


def band_noise(seed: int, samples: int, share: float) -> Power:
    """Power of noise that fills that share of the sampled span, flat, with sharp edges."""
    rng = np.random.default_rng(seed)
    spectrum = np.zeros(samples, np.complex128)
    n = round(samples * share)
    spectrum[:n] = rng.normal(size=n) + 1j * rng.normal(size=n)
    return np.abs(np.fft.ifft(spectrum)) ** 2


def _ofdm(rng: np.random.Generator, carriers: int, size: int) -> Power:
    """Symbols of QPSK carriers, each symbol one inverse transform."""
    symbols = SAMPLES // size
    spectrum = np.zeros((symbols, size), np.complex128)
    quadrants = rng.integers(0, 4, size=(symbols, carriers))
    spectrum[:, 1 : carriers + 1] = np.exp(0.25j * math.pi * (2 * quadrants + 1))
    return (np.abs(np.fft.ifft(spectrum, axis=1)) ** 2).ravel()


def _single_carrier(rng: np.random.Generator, levels: int) -> Power:
    """Square constellation through a root raised cosine of 0.22, shaped in its spectrum."""
    a_symbol = 8
    n = SAMPLES // a_symbol
    grid = 2.0 * np.arange(levels) - (levels - 1)
    train = np.zeros(SAMPLES, np.complex128)
    train[::a_symbol] = rng.choice(grid, n) + 1j * rng.choice(grid, n)
    f = np.abs(np.fft.fftfreq(SAMPLES)) * a_symbol  # in symbol rates
    edge = np.clip((f - 0.39) / 0.22, 0.0, 1.0)
    shape = np.cos(0.5 * math.pi * edge)  # root of the raised cosine
    return np.abs(np.fft.ifft(np.fft.fft(train) * shape)) ** 2
