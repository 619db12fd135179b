"""Lines that a receiver makes itself, as its calibration lists them: [[detector.spur]]."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TypeVar

from monitor.calfile import detector_of
from monitor.calparts import CalibrationFile, parse
from monitor.config import Site
from monitor.core.calibration import Chain
from monitor.core.errors import CalibrationError
from monitor.core.limits import frequency_text
from monitor.detectorkinds import ScaleSource, Spur

S = TypeVar("S")
MOST_SHARE = 0.5
"""Where spurs cover more of a band than this, the rest of it does not stand for the whole (our
choice)."""


def spurs_of(file: CalibrationFile, site: Site) -> tuple[tuple[float, float], ...]:
    """(low, high) in Hz on the air of the spurs at the site's gain steps, rising.

    CalibrationError where they cover more than half of a band.
    """
    found: set[tuple[float, float]] = set()
    for channel in site.channels:
        source = detector_of(file, channel).source
        if not isinstance(source, ScaleSource):
            continue
        gain = channel.gain or source.steps[0].gain
        mine = [spur for spur in source.spurs if spur.gain in ("", gain)]
        band = site.bands[channel.band]
        share = covered_hz(mine, band.low_hz, band.high_hz) / (band.high_hz - band.low_hz)
        if share > MOST_SHARE:
            raise CalibrationError(
                f"{site.calibration.name}: detector.spur: spurs cover {share:.0%} of band "
                f"{band.name!r}, half is the most; correct their width, or widen or move the band"
            )
        found |= {spur.ends_hz for spur in mine}
    return tuple(sorted(found))


def cleared(settings: S, site: Site, chain: Chain) -> S:
    """A receiver's settings with the lines left out that its calibration in force says it makes.

    Those of another front end as they are.
    """
    without = getattr(settings, "without", None)
    if without is None:
        return settings
    found: S = without(spurs_of(parse(chain.document), site))
    return found


def covered_hz(spurs: Sequence[Spur], low_hz: float, high_hz: float) -> float:
    """How much of a band lies under one spur or several."""
    total, upto = 0.0, low_hz
    for low, high in sorted(spur.ends_hz for spur in spurs):
        first, last = max(low, upto), min(high, high_hz)
        total += max(last - first, 0.0)
        upto = max(upto, last)
    return total


def text_of(spur: Spur) -> str:
    """A spur in words."""
    at = f" at gain {spur.gain}" if spur.gain else ""
    return (
        f"spur {frequency_text(spur.frequency_hz)}, {spur.width_hz / 1e3:g} kHz wide,"
        f" {spur.level_dbm:g} dBm{at}"
    )
