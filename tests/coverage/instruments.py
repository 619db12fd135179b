"""Instruments that read those signals: errors of their own, a detector's response, a converter.

Written from the calibration file alone; of the product only the budget's lines are read here.
"""

from __future__ import annotations

import math
import tomllib
from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from monitor.core.budget import Contribution

AXES = 3
SIMULATED_OTHERWISE = ("converter resolution",)
"""Budget lines whose error comes about by itself: counts here are whole numbers."""
Real = NDArray[np.float64]
_SHIFT = 11
"""Bits of a power that are not looked at: it is then known to 0.001 dB."""
_LEAST_W, _MOST_W = np.float32(1e-13), np.float32(10.0)


class Response:
    """Power at the port, W, to counts, by the file's curve, straight between its points.

    Beyond its strong end the last slope goes on for 4 dB and the detector is then saturated; its
    weak end is the least it shows.
    """

    def __init__(self, detector: dict[str, object]) -> None:
        """detector: that table of a calibration file, a log one with bits and reference_v."""
        curve = np.array(sorted(detector["curve"]), np.float64)
        slope = (curve[-1, 1] - curve[-2, 1]) / (curve[-1, 0] - curve[-2, 0])
        end = [curve[-1, 0] + 4.0, curve[-1, 1] + 4.0 * slope]
        self.knots = np.vstack([curve, end])
        step_v = float(detector["reference_v"]) / 2 ** int(detector["bits"])
        self._base = int(_LEAST_W.view(np.int32)) >> _SHIFT
        bits = (np.arange(self._base, int(_MOST_W.view(np.int32)) >> _SHIFT) << _SHIFT) + (
            1 << (_SHIFT - 1)
        )
        self._dbm = 10.0 * np.log10(bits.astype(np.int32).view(np.float32).astype(np.float64)) + 30
        volts = np.interp(self._dbm, self.knots[:, 0], self.knots[:, 1])
        self._counts = np.rint(volts / step_v).astype(np.int32)
        self._bend = self._bends().astype(np.float32)

    def counts(self, power_w: NDArray[np.float32]) -> NDArray[np.int32]:
        """Counts, of the shape of power_w."""
        return self._counts[self._index(power_w)]

    def bend(self, power_w: NDArray[np.float32]) -> NDArray[np.float32]:
        """Curvature between the curve's points: 0 at each, 1 and -1 by turns half way between."""
        return self._bend[self._index(power_w)]

    def _index(self, power_w: NDArray[np.float32]) -> NDArray[np.int32]:
        index = np.clip(power_w, _LEAST_W, _MOST_W * np.float32(0.9)).view(np.int32) >> _SHIFT
        index -= self._base
        return index

    def _bends(self) -> Real:
        at = np.interp(self._dbm, self.knots[:, 0], np.arange(len(self.knots)))
        return np.asarray(np.sin(np.pi * at))


def detector_text(path: Path) -> dict[str, object]:
    """The [detector] table of a calibration file."""
    found: dict[str, object] = tomllib.loads(path.read_text(encoding="utf-8"))["detector"]
    return found


def errors_db(budget: Sequence[Sequence[Contribution]], n: int, rng: np.random.Generator) -> Real:
    """Errors (n, c), dB, each line drawn from its own distribution, a shared one once for all."""
    out, shared = np.zeros((n, len(budget))), {}
    for channel, lines in enumerate(budget):
        for line in lines:
            if line.name in SIMULATED_OTHERWISE:
                continue
            if not line.shared:
                out[:, channel] += _drawn(line, n, rng) * line.sensitivity
                continue
            if line.name not in shared:
                shared[line.name] = _drawn(line, n, rng)
            out[:, channel] += shared[line.name] * line.sensitivity
    return out


def _drawn(line: Contribution, n: int, rng: np.random.Generator) -> Real:
    """JCGM 101:2008, 6.4, by other ways than the product's where there is one."""
    value = line.value
    assert math.isinf(line.degrees_of_freedom), line.name
    if line.distribution in ("normal", "expanded"):
        return rng.normal(0.0, value / (line.k if line.distribution == "expanded" else 1.0), n)
    if line.distribution == "rectangular":
        return rng.uniform(-value, value, n)
    if line.distribution == "triangular":  # the sum of two equal rectangular ones
        return rng.uniform(-value / 2, value / 2, n) + rng.uniform(-value / 2, value / 2, n)
    assert line.distribution == "u_shaped", line.distribution
    return np.asarray(value * np.cos(rng.uniform(0.0, np.pi, n)))
