# ruff: noqa: N802, N803, N999
"""Stands in for the binding of that name: its calls, and a receiver that hears one tone.

The words of Device's arguments set it up: format, full_scale, amplitude; at which sample (ends_at)
which code (ends_with) comes; what it refuses or does otherwise. log names a file for the calls.
"""

from __future__ import annotations

import time
from types import SimpleNamespace

import numpy as np

SOAPY_SDR_RX = 1
TYPES = {"CU8": "u1", "CS8": "i1", "CS16": "i2", "CF32": "f4"}
MTU = 10_000
TONE_HZ = 97_531.0
"""No simple part of the rate: rounding errors do not repeat."""


class Device:
    def __init__(self, words):
        told = dict(word.split("=", 1) for word in words.split(",") if word)
        if told.pop("driver") != "stand-in":
            raise RuntimeError("no match")
        self.told = told
        self.values = {"gain_mode": True}
        self.sent = 0
        self.began = 0.0

    def _log(self, *words):
        with open(self.told["log"], "a", encoding="utf-8") as file:
            file.write(" ".join(str(word) for word in words) + "\n")

    def _set(self, name, value):
        self._log(name, value)
        if self.told.get("refuses") == name:
            raise RuntimeError(f"{name} out of range")
        self.values[name] = value + float(self.told.get(f"{name}_off", 0.0))

    def getNumChannels(self, direction):
        return 1 if direction == SOAPY_SDR_RX else 0

    def getNativeStreamFormat(self, direction, channel, *fullScale):
        if "untold" in self.told:
            raise TypeError("missing 1 required positional argument: 'fullScale'")
        return [self.told["format"], float(self.told["full_scale"])]

    def getStreamFormats(self, direction, channel):
        return tuple(TYPES)

    def setAntenna(self, direction, channel, name):
        self._log("antenna", name)

    def hasGainMode(self, direction, channel):
        return True

    def setGainMode(self, direction, channel, automatic):
        self._log("gain_mode", automatic)
        self.values["gain_mode"] = automatic or "automatic" in self.told

    def getGainMode(self, direction, channel):
        return self.values["gain_mode"]

    def setGain(self, direction, channel, value):
        self._set("gain", value)

    def getGain(self, direction, channel):
        return self.values["gain"]

    def setSampleRate(self, direction, channel, rate):
        self._set("rate", rate)

    def getSampleRate(self, direction, channel):
        return self.values["rate"]

    def setFrequency(self, direction, channel, frequency):
        self._set("centre", frequency)

    def getFrequency(self, direction, channel):
        return self.values["centre"]

    def hasFrequencyCorrection(self, direction, channel):
        return "no_ppm" not in self.told

    def setFrequencyCorrection(self, direction, channel, value):
        self._set("ppm", value)

    def setupStream(self, direction, form, channels):
        self._log("setup", form, channels)
        return form

    def activateStream(self, stream):
        self._log("activate")
        self.sent, self.began = 0, time.monotonic()
        return int(self.told.get("activates_with", 0))

    def deactivateStream(self, stream):
        self._log("deactivate")

    def closeStream(self, stream):
        self._log("close")

    def readStream(self, stream, buffs, numElems, flags=0, timeoutUs=100000):
        if self.sent >= float(self.told.get("ends_at", "inf")):
            code = int(self.told["ends_with"])
            time.sleep(0.01 if code == -1 else 0.0)
            return SimpleNamespace(ret=code, flags=0, timeNs=0)
        rate = self.values["rate"]
        n = min(MTU, numElems)
        time.sleep(max(0.0, self.began + (self.sent + n) / rate - time.monotonic()))
        phase = 2j * np.pi * TONE_HZ / rate * (self.sent + np.arange(n))
        z = np.exp(phase) * float(self.told.get("amplitude", 0.5)) * float(self.told["full_scale"])
        both = np.column_stack([z.real, z.imag]).ravel()
        if stream != "CF32":
            both = np.rint(both - (0.5 if stream == "CU8" else 0.0) + (stream == "CU8") * 128)
            limits = np.iinfo(TYPES[stream])
            both = np.clip(both, limits.min, limits.max)
        buffs[0][: 2 * n] = both
        self.sent += n
        return SimpleNamespace(ret=n, flags=0, timeNs=0)
