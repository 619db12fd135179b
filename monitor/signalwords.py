"""What averaged logs mean for each band of a site, in plain words, ahead of the first reading."""

from __future__ import annotations

from collections.abc import Iterator

from monitor.calfile import detector_of
from monitor.calparts import CalibrationFile
from monitor.config import Band, Site
from monitor.core.averaging_law import (
    FULLY_AVERAGED,
    NOISE_CORRECTION_DB,
    Averaging,
    burst_bias_db,
    joined,
)
from monitor.core.flags import Flag
from monitor.detectorfile import Detector

NOTHING_AVERAGED = (
    'averages = "none" in the calibration holds for the board\'s firmware, too: where it averages'
    " readings, say so there with averages"
)
_USUAL_FLOOR_DB = -30.0
_BOUND = "lower bounds only: nothing will conform"


def bursts_text() -> str:
    """How low averaged logs of bursts read: on for 75 %, to noise-like ones of 25 % of the time."""
    least = -burst_bias_db(0.75, _USUAL_FLOOR_DB)
    most = NOISE_CORRECTION_DB - burst_bias_db(0.25, _USUAL_FLOOR_DB)
    return f"read {least:.0f} to {most:.0f} dB low"


def trusted(site: Site, file: CalibrationFile, front: Averaging) -> bool:
    """Whether NOTHING_AVERAGED is taken on trust for a channel: nobody declares more than none."""
    return any(
        joined(detector_of(file, channel).averaging, front).kind == "none"
        for channel in site.channels
    )


def told(site: Site, file: CalibrationFile, front: Averaging) -> Iterator[tuple[str, bool]]:
    """For each band whose logs are averaged: what follows, and whether figures can be judged.

    front: what the front end averages.
    """
    said: set[str] = set()
    for channel in site.channels:
        band = site.bands[channel.band]
        detector = detector_of(file, channel)
        holds = joined(detector.averaging, front)
        text = _told(band, detector, holds, front)
        if holds.kind == "log" and f"{band.name}: {text}" not in said:
            said.add(f"{band.name}: {text}")
            yield f"{band.name}: {text}", _BOUND not in text


def _told(band: Band, detector: Detector, holds: Averaging, front: Averaging) -> str:
    done = detector.treatment(band.signal, band.signal_bandwidth_hz, front)
    if done.flags & Flag.CORRECTED_LOG:
        return (
            f"averaged logs of noise-like signals: {done.correction_db:.2f} dB are added, which "
            "holds only while they never pause"
        )
    if not done.flags & Flag.LOG_AVERAGED:
        return "averaged logs of a carrier: right while its envelope is constant"
    if band.signal == "bursts":
        return f"averaged logs of bursts {bursts_text()}: {_BOUND}"
    if band.signal == "noise" and detector.kind == "rms":
        return f"averaged volts of a true-rms detector read low by what is not known: {_BOUND}"
    if band.signal == "noise" and detector.averages == "power":
        return f"averaged logs of averaged power read low by what is not known: {_BOUND}"
    if band.signal == "noise":
        return f"averaged logs of noise-like signals, {_lacks(band, holds)}: {_BOUND}"
    who = "mixed signals" if band.signal == "mixed" else "signals that are undeclared"
    remedy = "" if band.signal == "mixed" else "; say with signal what the band carries"
    return f"averaged logs of {who} read low by what is not known: {_BOUND}{remedy}"


def _lacks(band: Band, holds: Averaging) -> str:
    """Why a noise-like signal is not corrected."""
    if not band.signal_bandwidth_hz:
        return "but signal_bandwidth is not given"
    if not holds.seconds:
        return "but averaging_s is not given"
    values = band.signal_bandwidth_hz * holds.seconds
    return (
        f"but only {values:.3g} values to an average (signal_bandwidth times averaging_s, "
        f"{FULLY_AVERAGED:g} needed)"
    )
