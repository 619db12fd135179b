"""What a receiver hears now, as one JSON-ready document for the page of the spectrum.

Nothing in it is averaged over the time that a limit asks for, so nothing in it is a verdict.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numpy as np

from monitor.config import Site
from monitor.core.flags import words
from monitor.core.pipeline import convert
from monitor.core.readings import MISSING, NS_PER_S, Batch
from monitor.core.station import Station
from monitor.snapshot import View, rfc3339

TENTHS = 10.0


def document(shown: Mapping[str, Any] | None, view: View, here: Station, site: Site) -> object:
    """None for a front end without a spectrum (shown None); else places, bands, scopes.

    places: of each place of the tuner its edges (Hz) and levels of equal parts of the span, dB of
    full scale, None where there is none. looked_s: for how long its samples were looked at, of
    seconds; piece_s: how long a piece is that was looked at as one; outside: what lies outside the
    named bands there. bands: of each channel its edges, levels, field strength (V/m), and for each
    scope the share of the limit, all of the latest seconds.
    """
    if shown is None:
        return None
    now_ns, offset_ns = view.state.front_ns, view.utc_offset_ns
    return {
        "utc": rfc3339(None if offset_ns is None else now_ns + offset_ns),
        "simulated": site.simulated,
        "site": {"name": site.name, "place": site.place, "occupancy": site.occupancy},
        "connected": view.device.connected,
        "places": [_place(place, now_ns, site) for place in shown["places"]],
        "seconds": _seconds(shown["readings"]),
        "bands": _bands(shown["readings"], view, here, site),
        "scopes": [
            {
                "set": scope.set_id, "population": scope.population, "scope": scope.scope,
                "averaging_s": scope.averaging_s, "verified": scope.verified,
            }
            for scope in here.scopes
        ],
    }  # fmt: skip


def _seconds(readings: Mapping[str, Any] | None) -> float | None:
    """From the begin of the first reading to the end of the last."""
    return None if readings is None else (readings["end_ns"] - readings["start_ns"]) / NS_PER_S


def _place(place: Mapping[str, Any], now_ns: int, site: Site) -> dict[str, object]:
    low_hz = place["centre_hz"] - place["rate_hz"] / 2
    mean = _levels(place["mean"])
    return {
        "low_hz": low_hz,
        "high_hz": low_hz + place["rate_hz"],
        "age_s": max(0.0, (now_ns - place["end_ns"]) / NS_PER_S),
        "seconds": (place["end_ns"] - place["start_ns"]) / NS_PER_S,
        "looked_s": place["looked_s"],
        "piece_s": place["piece_s"],
        "mean_dbfs": mean,
        "max_dbfs": _levels(place["max"]),
        "outside": _outside(mean, low_hz, place["rate_hz"] / len(mean), site),
    }


def _levels(tenths: list[int | None]) -> list[float | None]:
    return [None if level is None else level / TENTHS for level in tenths]


def _outside(
    mean: list[float | None], low_hz: float, step_hz: float, site: Site
) -> dict[str, object] | None:
    """Power and strongest part of what no named band touches; None where there is no such part."""
    edges = [(site.bands[channel.band].low_hz, site.bands[channel.band].high_hz)
             for channel in site.channels]  # fmt: skip
    found = {}
    for index, level in enumerate(mean):
        low, high = low_hz + index * step_hz, low_hz + (index + 1) * step_hz
        if level is not None and not any(low < b and high > a for a, b in edges):
            found[index] = level
    if not found:
        return None
    strongest = max(found, key=lambda index: found[index])
    return {
        "dbfs": 10.0 * math.log10(sum(10.0 ** (level / 10.0) for level in found.values())),
        "strongest_dbfs": found[strongest],
        "strongest_hz": low_hz + (strongest + 0.5) * step_hz,
    }


def _bands(
    readings: Mapping[str, Any] | None, view: View, here: Station, site: Site
) -> list[dict[str, object]]:
    """By the calibration; the share of a limit as if all were where it weighs most in the band."""
    bands = [site.bands[channel.band] for channel in site.channels]
    found: list[dict[str, object]] = [
        {"name": band.name, "low_hz": band.low_hz, "high_hz": band.high_hz} for band in bands
    ]
    if readings is None:
        return found
    counts = np.array([readings["mean"], readings["max"]], np.int32)
    celsius = view.device.temperature_c
    tenths = np.full(2, MISSING if celsius is None else round(celsius * 10), np.int32)
    batch = Batch(np.arange(2), counts, np.full(2, readings["flags"], np.int32), 2, tenths)
    power_w, bits = convert(batch, here)
    power_w = np.maximum(power_w - here.chain.noise_w, 0.0)
    e_v_per_m = np.sqrt(power_w * here.chain.k_mid)
    shares = power_w[:, :, np.newaxis] * here.coefficients
    step = here.chain.resolution or 1.0
    for channel, band in enumerate(found):
        band |= {
            "mean_dbfs": float(counts[0, channel]) * step,
            "max_dbfs": float(counts[1, channel]) * step,
            "e_mean": float(e_v_per_m[0, channel]),
            "e_max": float(e_v_per_m[1, channel]),
            "shares": shares[0, channel].tolist(),
            "flags": words(int(bits[0, channel])),
        }
    return found
