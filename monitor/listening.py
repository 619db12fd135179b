"""What a live line gives within a few seconds: for a check, nothing of it is kept."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np

from monitor.checks import Finding
from monitor.config import Site
from monitor.control import ask
from monitor.core.errors import DeviceError
from monitor.core.readings import MISSING, NS_PER_S, FrontEnd
from monitor.marking import device_flag

SLICE_S = 0.5
WHERE = "sensor"
LISTEN_S = 3.0


def long_enough(settings: object) -> float:
    """Whole seconds in which a sensor with these settings gives a reading, LISTEN_S at least."""
    return max(LISTEN_S, math.ceil(getattr(settings, "first_s", 0.0)))


def left_alone(site: Site) -> Finding | None:
    """Why a line is not to be listened to: what is heard by a check is lost to the daemon."""
    if site.sensor_options.get("clock") == "board":
        return Finding(WHERE, "not listened to: the board's own clock runs with what it sends")
    try:
        ask(site.control_path, {"do": "now"})
    except DeviceError:
        return None
    return Finding(WHERE, "not listened to: it is being measured; see fieldsill status")


def heard(front: FrontEnd, site: Site, seconds: float, boot_ns: Callable[[], int]) -> Finding:
    """Listen for that long. ok False where no reading came, or a channel gave nothing.

    boot_ns: a clock that never jumps, ns.
    """
    until_ns = boot_ns() + round(seconds * NS_PER_S)
    times, counts = [], []
    while (left_ns := until_ns - boot_ns()) > 0:
        came = front.read(min(SLICE_S, left_ns / NS_PER_S))
        times.append(came.times_ns)
        counts.append(came.counts)
    status = front.status()
    times_ns = np.concatenate(times) if times else np.empty(0, np.int64)
    if not times_ns.size:
        lines = status.counters.get("lines", 0)
        what = f"{lines} lines came, none with a figure to read" if lines else "no reading came"
        return Finding(WHERE, f"{what} in {seconds:g} s: {status.text}", ok=False)
    missing = np.all(np.concatenate(counts) == MISSING, axis=0)
    dead = [channel.name for channel, gone in zip(site.channels, missing) if gone]
    kind = "simulated" if site.simulated else "real"
    text = f"{status.text}; {kind}, {_rate(times_ns.tolist(), seconds)}"
    return Finding(WHERE, text + "".join(f"; {name}: nothing" for name in dead), not dead)


def named(name: str, calibrated: frozenset[str]) -> list[Finding]:
    """Nothing where the device calls itself as the calibration file says, or either is silent."""
    if not device_flag(name, calibrated):
        return []
    serials = " or ".join(sorted(calibrated))
    text = f"the device calls itself {name}, calibrated was {serials}: nothing will conform"
    return [Finding(WHERE, text, ok=False)]


def _rate(times_ns: Sequence[int], seconds: float) -> str:
    span_ns = times_ns[-1] - times_ns[0]
    if span_ns <= 0:
        return f"1 reading in {seconds:g} s"
    return f"{(len(times_ns) - 1) * NS_PER_S / span_ns:.3g} readings a second"
