"""A receiver with eight-bit converters, nominal and invented: its settings and its samples.

Samples are made block by block, never twice the same: the noise is drawn anew for each block, the
noise-like signals run in loops of LOOP samples (55 ms at 2.4 MS/s) whose lines all have the same
power, so that their mean over a whole loop is exact and no average over many loops is off by luck.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from simulators.iq_signals import Air

GAINS_DB = (
    0.0, 0.9, 1.4, 2.7, 3.7, 7.7, 8.7, 12.5, 14.4, 15.7, 16.6, 19.7, 20.7, 22.9, 25.4, 28.0,
    29.7, 32.8, 33.8, 36.4, 37.2, 38.6, 40.2, 42.1, 43.4, 43.9, 44.5, 48.0, 49.6,
)  # fmt: skip
"""The common tuner's 29 nominal steps."""
TUNER = 5
TUNED_HZ = (24_000_000, 1_766_000_000)
RATES_HZ = ((225_001, 300_000), (900_001, 3_200_000))
CLOCK_HZ = 28_800_000
REFERENCE_GAIN_DB = 20.0
"""Where a spur's level is stated; our choice."""
AUTO_STEP = 20
"""The step round which automatic gain wanders; our choice."""
BLOCK = 16_384
LOOP = 8 * BLOCK
FULL_SCALE = 127.5
FLAT, GONE, GONE_DB = 0.40, 0.60, -60.0
"""Flat to this share of the rate on either side, then falling evenly in dB; our choice. What lies
beyond half the rate folds over, as it does behind a real filter."""

Samples = NDArray[np.complex64]


@dataclass(frozen=True)
class Settings:
    """What commands have set. gain: index of the step; ppm: the correction asked for."""

    centre_hz: int = 100_000_000
    rate_hz: int = 2_048_000
    manual: bool = False
    gain: int = 0
    ppm: int = 0
    digital_gain: bool = False
    counting: bool = False

    def told(self, code: int, value: int) -> Settings:
        """The settings after a command. What is refused leaves them as they were, silently.

        A gain between two steps means the nearest one (our choice).
        """
        if code == 0x01 and TUNED_HZ[0] <= value <= TUNED_HZ[1]:
            return replace(self, centre_hz=value)
        if code == 0x02 and any(low <= value <= high for low, high in RATES_HZ):
            return replace(self, rate_hz=value)
        if code == 0x03:
            return replace(self, manual=value == 1)
        if code == 0x04:
            wanted_db = _signed(value) / 10.0
            steps = range(len(GAINS_DB))
            return replace(self, gain=min(steps, key=lambda i: abs(GAINS_DB[i] - wanted_db)))
        if code == 0x05:
            return replace(self, ppm=_signed(value))
        if code == 0x07:
            return replace(self, counting=value != 0)
        if code == 0x08:
            return replace(self, digital_gain=value != 0)
        if code == 0x0D and value < len(GAINS_DB):
            return replace(self, gain=value)
        return self


def _signed(value: int) -> int:
    return value - 2**32 if value >= 2**31 else value


def real_rate_hz(settings: Settings, crystal_ppm: float) -> float:
    """The rate really given: the divider's ratio comes in steps of four, the crystal is off."""
    ratio = int(CLOCK_HZ * 2**22 / settings.rate_hz) & ~3
    return CLOCK_HZ * 2**22 / ratio * (1.0 + (crystal_ppm - settings.ppm) * 1e-6)


def response(offset_hz: NDArray[np.float64], rate_hz: float) -> NDArray[np.float64]:
    """Amplitude of the filter before the converters at offsets from the centre, 0..1."""
    share = np.abs(offset_hz) / rate_hz
    down_db = GONE_DB * np.clip((share - FLAT) / (GONE - FLAT), 0.0, None)
    return np.where(share < GONE, 10.0 ** (down_db / 20.0), 0.0)


@lru_cache(maxsize=48)
def _noise_loop(seed: int, low_hz: float, high_hz: float, rate_hz: float) -> Samples | None:
    """A loop whose mean power over its full width is 1, or the part of it that is heard, if any."""
    line_hz = rate_hz / LOOP
    low, high = max(low_hz, -GONE * rate_hz), min(high_hz, GONE * rate_hz)
    lines = np.arange(np.ceil(low / line_hz), np.ceil(high / line_hz), dtype=np.int64)
    if not lines.size:
        return None
    total = max(round((high_hz - low_hz) / line_hz), 1)
    phases = np.random.default_rng([seed, LOOP]).random(lines.size)
    spectrum = np.zeros(LOOP, np.complex128)
    offsets_hz = np.asarray(lines * line_hz, np.float64)
    heard = response(offsets_hz, rate_hz) * np.exp(2j * np.pi * phases) * LOOP
    np.add.at(spectrum, lines % LOOP, heard / np.sqrt(total))
    loop: Samples = np.fft.ifft(spectrum).astype(np.complex64)
    return loop


@lru_cache(maxsize=48)
def _turn(step: float) -> Samples:
    """exp(j 2 pi step k) for one block."""
    turn: Samples = np.exp(2j * np.pi * step * np.arange(BLOCK)).astype(np.complex64)
    return turn


class Receiver:
    """Air, tuner and converters. block() gives what the next BLOCK samples are."""

    def __init__(self, air: Air, seed: int) -> None:
        self._air = air
        self._seed = seed
        self._rng = np.random.default_rng([seed, 1])
        self._number = 0
        self._wander_db = 0.0
        self._mw = np.zeros(len(air.signals))
        self._spare = np.empty(BLOCK, np.complex64)

    def rate_hz(self, settings: Settings) -> float:
        """Samples a second of true time."""
        return real_rate_hz(settings, self._air.front.crystal_ppm)

    def gain_db(self, settings: Settings) -> float:
        """Gain in force: the nominal step and its error, and what automatic gain makes of it."""
        step = settings.gain if settings.manual else AUTO_STEP
        errors_db = self._air.front.gain_error_db
        gain_db = GAINS_DB[step] + (errors_db[step] if errors_db else 0.0)
        if settings.manual and not settings.digital_gain:
            return gain_db
        return gain_db + self._wander_db

    def block(
        self, settings: Settings, device_s: float, position: int, settled: bool
    ) -> tuple[bytes, NDArray[np.float64]]:
        """(2 * BLOCK bytes, mean power of each signal in mW at the port), from device_s on.

        position: samples since the connection began, for the phases. An unsettled tuner hears
        nothing but noise.
        """
        rate_hz = self.rate_hz(settings)
        self._wander(rate_hz)
        self._number += 1
        heard = self._heard(device_s, rate_hz)
        if settings.counting:
            first = 2 * position % 256
            count = np.arange(first, first + 2 * BLOCK) % 256
            return count.astype(np.uint8).tobytes(), self._mw
        front, gain_db = self._air.front, self.gain_db(settings)
        lsb = FULL_SCALE * 10.0 ** ((gain_db - front.full_scale_dbm) / 20.0)
        out = self._noise(lsb, rate_hz)
        tuned_hz = settings.centre_hz * (1.0 + (front.crystal_ppm - settings.ppm) * 1e-6)
        for i, amplitude, spans in heard if settled else []:
            line = (self._air.signals[i].frequency_hz - tuned_hz, rate_hz, position)
            self._add(out, i, line, lsb * amplitude, spans)
        for spur in self._air.spurs:
            level_dbfs = spur.level_dbfs + spur.slope * (gain_db - REFERENCE_GAIN_DB)
            line = (spur.frequency_hz - tuned_hz, rate_hz, position)
            self._add(out, None, line, FULL_SCALE * 10.0 ** (level_dbfs / 20.0), [(0, BLOCK)])
        return self._convert(out), self._mw

    def _heard(
        self, device_s: float, rate_hz: float
    ) -> list[tuple[int, float, list[tuple[int, int]]]]:
        """(signal, amplitude in root mW, where it is on) for all that is on; notes their power."""
        found = []
        for i, signal in enumerate(self._air.signals):
            level_mw = signal.level_mw(device_s)
            spans = signal.spans(device_s, BLOCK, rate_hz) if level_mw else []
            self._mw[i] = level_mw * sum(end - first for first, end in spans) / BLOCK
            if spans:
                found.append((i, float(np.sqrt(level_mw)), spans))
        return found

    def _wander(self, rate_hz: float) -> None:
        """A pull towards zero and a push by luck: a deviation of auto_wander_db, seconds long."""
        keep = np.exp(-BLOCK / rate_hz / 1.0)
        push_db = self._air.front.auto_wander_db * np.sqrt(1.0 - keep**2)
        self._wander_db = keep * self._wander_db + push_db * self._rng.standard_normal()

    def _noise(self, lsb: float, rate_hz: float) -> Samples:
        """Of the port and of the converters, flat over the whole span."""
        front = self._air.front
        variance = lsb**2 * front.noise_mw_per_hz * rate_hz / 2.0 + front.converter_noise_lsb**2
        drawn = self._rng.standard_normal(2 * BLOCK, np.float32)
        drawn *= np.float32(np.sqrt(variance))
        return drawn.view(np.complex64)

    def _add(
        self,
        out: Samples,
        index: int | None,
        line: tuple[float, float, int],
        lsb: float,
        spans: list[tuple[int, int]],
    ) -> None:
        """Add a signal (None: a plain line), whose amplitude of 1 is lsb, where it is on.

        line: offset from the centre (Hz), rate (Hz), position of the block's first sample.
        """
        offset_hz, rate_hz, position = line
        half_hz = self._air.signals[index].width_hz / 2.0 if index is not None else 0.0
        if half_hz:
            seed = self._seed * 1000 + (index or 0)
            loop = _noise_loop(seed, offset_hz - half_hz, offset_hz + half_hz, rate_hz)
            if loop is None:
                return
            at = self._number * BLOCK % LOOP
            wave, factor = loop[at : at + BLOCK], complex(lsb)
        else:
            passed = float(response(np.array([offset_hz]), rate_hz)[0])
            if not passed:
                return
            step = offset_hz / rate_hz
            phase = (step * position) % 1.0
            wave, factor = _turn(step), complex(lsb * passed * np.exp(2j * np.pi * phase))
        for first, end in spans:
            spare = self._spare[: end - first]
            np.multiply(wave[first:end], np.complex64(factor), out=spare)
            out[first:end] += spare

    def _convert(self, out: Samples) -> bytes:
        """Imbalance, offset, clipping and eight bits: byte b stands for (b - 127.5) / 127.5."""
        front = self._air.front
        parts = out.view(np.float32)
        if front.imbalance_db or front.imbalance_deg:
            off, half = np.deg2rad(front.imbalance_deg), 10.0 ** (front.imbalance_db / 40.0)
            parts[1::2] *= np.float32(half * np.cos(off))
            parts[1::2] += np.float32(half * np.sin(off)) * parts[0::2]
            parts[0::2] *= np.float32(1.0 / half)  # shared out, so that the power stays
        out += np.complex64(complex(128.0 + front.dc_lsb[0], 128.0 + front.dc_lsb[1]))
        np.clip(parts, 0.0, 255.0, out=parts)
        return parts.astype(np.uint8).tobytes()
