"""From a calibration file to the Chain of a station's channels."""

from __future__ import annotations

import hashlib
from collections import Counter
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Protocol, TypeVar

import numpy as np

from monitor import calterms
from monitor.calelements import PICKUPS, Element
from monitor.calparts import CalibrationFile, elements_of, read
from monitor.config import Band, Channel
from monitor.core import calibration as cal
from monitor.core.averaging_law import (
    BURSTY,
    UNDECLARED,
    Averaging,
    Treatment,
    joined,
    power_time_s,
)
from monitor.core.budget import Contribution, independent
from monitor.core.distributions import Real
from monitor.core.errors import CalibrationError, ConfigError
from monitor.core.flags import Flag
from monitor.detectorfile import Detector, Fit
from monitor.tomlfile import TopTable


class _OfAxis(Protocol):
    @property
    def axis(self) -> str: ...


A = TypeVar("A", bound=_OfAxis)


def load_chain(
    path: Path,
    channels: Sequence[Channel],
    bands: Mapping[str, Band],
    front: Averaging = UNDECLARED,
) -> cal.Chain:
    """The chain of every channel, in the channels' order. front: what the front end averages.

    CalibrationError 'calibration.toml: element[2].table: what; remedy' for the first mistake;
    DeviceError where the file cannot be read.
    """
    return chain(read(path), channels, bands, front)


def chain(
    file: CalibrationFile,
    channels: Sequence[Channel],
    bands: Mapping[str, Band],
    front: Averaging = UNDECLARED,
) -> cal.Chain:
    """The chain of every channel, in the channels' order; CalibrationError as of load_chain."""
    try:
        return _chain(file, channels, bands, front)
    except CalibrationError:
        raise
    except ConfigError as error:
        raise CalibrationError(str(error)) from None


def _chain(
    file: CalibrationFile,
    channels: Sequence[Channel],
    bands: Mapping[str, Band],
    front: Averaging,
) -> cal.Chain:
    chosen = [detector_of(file, channel) for channel in channels]
    responses = [response(file, channel, bands[channel.band]) for channel in channels]
    axes = Counter(channel.band for channel in channels)
    terms = [_terms(file, c, bands[c.band], axes[c.band]) for c in channels]
    done = [_treated(d, bands[c.band], front) for d, c in zip(chosen, channels)]
    fits = [fit_of(file, c, bands[c.band]).treated(one) for c, one in zip(channels, done)]
    contributions = tuple(
        written + assumed + cal.spread(k, channel.band) + fit.contributions
        for channel, fit, (written, assumed), (_, k) in zip(channels, fits, terms, responses)
    )
    _agree(file, contributions)
    return cal.Chain(
        tables=tuple(fit.table for fit in fits),
        frequencies_hz=tuple(f for f, _ in responses),
        k=tuple(k for _, k in responses),
        k_mid=np.array([cal.middle(k) for _, k in responses]),
        contributions=contributions,
        flags=_flags(file, done, any(assumed for _, assumed in terms))
        | _missing_axes(file, channels, bands, axes),
        valid_temperature_c=file.certificate.valid_temperature_c,
        due_utc_ns=file.dues("".join(channel.axis for channel in channels))[0].utc_ns,
        resolution=_resolution(file, chosen),
        identity=hashlib.sha256(file.body).hexdigest(),
        document=file.body,
        bursty=np.array([bands[c.band].signal in BURSTY for c in channels]),
        noise_w=np.array([fit.noise.w for fit in fits]),
        noise_u_w=np.array([fit.noise.u_w for fit in fits]),
        least_w=np.array([fit.least_w for fit in fits]),
        integration_s=min(
            power_time_s(joined(d.averaging, front), one) for d, one in zip(chosen, done)
        ),
        temperature=tuple(detector.temperature for detector in chosen),
    )


def _resolution(file: CalibrationFile, chosen: Sequence[Detector]) -> float | None:
    """What a count of every channel stands for."""
    if len({detector.resolution for detector in chosen}) > 1:
        raise file.top.error("detector", "the detectors differ in what one count stands for")
    return chosen[0].resolution


def detector_of(file: CalibrationFile, channel: Channel) -> Detector:
    """The detector of the channel's axis; ConfigError unless there is one, and one only."""
    return _one(file.top, "detector", file.detectors, channel, "detector")


def fit_of(file: CalibrationFile, channel: Channel, band: Band) -> Fit:
    """The channel's detector in its band; ConfigError where it has no such gain or frequencies."""
    detector = detector_of(file, channel)
    return detector.fit(channel.gain, band.name, band.low_hz, band.high_hz)


def antenna_of(file: CalibrationFile, channel: Channel) -> Element:
    """The antenna of the channel's axis, or the correction of a probe calibrated as a whole.

    ConfigError unless there is one, and one only, and it goes with the detector.
    """
    word = "probe" if detector_of(file, channel).kind == "probe" else "antenna"
    pickups = [element for element in file.elements if element.kind in PICKUPS]
    found = _one(file.top, "element", pickups, channel, word)
    if found.kind != word:
        raise file.top.error(
            "element",
            f"channel {channel.name!r} needs one {word}, not an element of type {found.kind}",
        )
    for other in elements_of(file, channel.axis):
        if word == "probe" and other is not found:
            raise other.where.error(
                "type", f"a probe is calibrated as a whole; take {other.name} out"
            )
    return found


def response(file: CalibrationFile, channel: Channel, band: Band) -> tuple[Real, Real]:
    """Frequencies (m,) over the band and E squared per watt (m,) of one channel."""
    antenna, mine = antenna_of(file, channel), elements_of(file, channel.axis)
    offset = fit_of(file, channel, band).offset
    tables = [*(e.curve for e in mine), *([] if offset is None else [offset])]
    frequencies_hz = cal.band_grid(band.low_hz, band.high_hz, tables)
    for element in mine:
        try:
            element.curve.at(frequencies_hz)
        except CalibrationError as error:
            raise element.where.error("table", f"{element.name} {error}") from None
    losses = [element.curve for element in mine if element.kind not in PICKUPS]
    losses += [] if offset is None else [offset]
    return frequencies_hz, cal.e2_per_w(frequencies_hz, antenna.curve, losses)


def _one(top: TopTable, key: str, items: Sequence[A], channel: Channel, word: str) -> A:
    """The only item for the channel's axis."""
    mine = [item for item in items if item.axis in ("", channel.axis)]
    if len(mine) != 1:
        count = f"{len(mine)} of them" if mine else "none"
        raise top.error(key, f"channel {channel.name!r} needs one {word}; there is {count}")
    return mine[0]


def budget_of(
    file: CalibrationFile, channel: Channel, low_hz: float, high_hz: float
) -> tuple[Contribution, ...]:
    """The file's budget lines for the channel's axis, over a band or at one frequency.

    ConfigError where one stands twice, or where a table does not reach as far.
    """
    mine = [line for line in file.lines if line.axis in ("", channel.axis)]
    twice = [name for name, n in Counter(line.name for line in mine).items() if n > 1]
    if not twice:
        return tuple(line.over(low_hz, high_hz) for line in mine)
    name = twice[0]
    text = f"{name!r} twice for channel {channel.name!r}"
    if any(element.line and element.line.name == name for element in file.elements):
        text += "; an element's u_db is a line of that name already; remove one or correct serials"
    raise file.top.error("contribution", text)


Lines = tuple[Contribution, ...]


def _agree(file: CalibrationFile, budget: Sequence[Lines]) -> None:
    """ConfigError where lines that are one error by name say different things of it."""
    try:
        independent(budget)
    except CalibrationError as error:
        raise file.top.error("contribution", str(error)) from None


def _terms(file: CalibrationFile, channel: Channel, band: Band, axes: int) -> tuple[Lines, Lines]:
    """The lines that the file writes for a channel, and those assumed where it writes none."""
    written = budget_of(file, channel, band.low_hz, band.high_hz)
    return written, calterms.assumed(
        written, calterms.needed(axes, band.polarisation, isotropic=isotropic(file, channel))
    )


def _treated(detector: Detector, band: Band, front: Averaging) -> Treatment:
    return detector.treatment(band.signal, band.signal_bandwidth_hz, front)


def isotropic(file: CalibrationFile, channel: Channel) -> bool:
    """Whether the channel sees the whole field by itself; ConfigError as of antenna_of."""
    return antenna_of(file, channel).isotropic


def _missing_axes(
    file: CalibrationFile, channels: Sequence[Channel], bands: Mapping[str, Band],
    axes: Mapping[str, int],
) -> int:  # fmt: skip
    """COMPONENT_ONLY where a band has fewer than three axes and no survey for the others.

    ConfigError where a probe of the whole field would be counted several times in a band.
    """
    whole = {channel.band for channel in channels if isotropic(file, channel)}
    for name in whole:
        if axes[name] > 1:
            raise file.top.error(
                "element",
                f"an isotropic probe sees the whole field, but band {name!r} has {axes[name]}"
                " channels, which are summed; leave one",
            )
    parts = (
        calterms.is_component(n, bands[name].polarisation, isotropic=name in whole)
        for name, n in axes.items()
    )
    return int(Flag.COMPONENT_ONLY) if any(parts) else 0


def _flags(file: CalibrationFile, done: Sequence[Treatment], assumed: bool) -> int:
    """What holds for every figure: averaged logs and what was done, invented, terms assumed."""
    bits = int(Flag.ASSUMED_TERMS) if assumed else 0
    for one in done:
        bits |= one.flags
    return bits | int(Flag.INVENTED_CALIBRATION) if file.invented else bits
