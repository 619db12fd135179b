"""What a reference check should be looked at for before it is trusted, by the calibration."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from monitor import calfile, calparts
from monitor.calelements import PICKUPS
from monitor.config import Site, site_of
from monitor.core.calibration import Chain
from monitor.core.errors import ConfigError, FieldsillError
from monitor.core.quantities import dbm_from_w
from monitor.core.uncertainty import expanded_db
from monitor.record.reader import Record
from monitor.refchecks import Mean

UNSTEADY_DB = 1.0
ABOVE_NOISE_DB = 20.0
"""Nearer to the noise it counts: 0.04 dB and more of what is read (10 log10(1 + 1/100))."""


@dataclass(frozen=True, slots=True)
class Expected:
    """What the calibration says of a channel: range and noise at the port, dBm (noise None where
    not told), loss from the chain's input to the port, expanded uncertainty, both dB."""

    range_dbm: tuple[float, float]
    noise_dbm: float | None
    loss_db: float
    expanded_db: float


def notes(record: Record, mean: Mean, channel: str, at: str, applied_dbm: float) -> list[str]:
    """Why a check may be a slip; none where nothing tells of one. at: of monitor.refchecks."""
    said = []
    if mean.highest_dbm - mean.lowest_dbm > UNSTEADY_DB:
        said.append("the readings were not steady; was it applied all the time?")
    try:
        found = expected(record, mean, channel)
    except FieldsillError as error:
        return [*said, f"not compared with the calibration: {error}"]
    return said + compared(found, mean.mean_dbm, at, applied_dbm)


def compared(found: Expected, mean_dbm: float, at: str, applied_dbm: float) -> list[str]:
    """Level and difference against range, noise and uncertainty."""
    port_dbm = applied_dbm - (found.loss_db if at == "input" else 0.0)
    (low, high), off_db = found.range_dbm, mean_dbm - port_dbm
    said = []
    if not low <= port_dbm <= high:
        said.append(
            f"{port_dbm:.2f} dBm at the detector's port is outside its range, {low:.1f} to"
            f" {high:.1f} dBm"
        )
    if found.noise_dbm is not None and port_dbm - found.noise_dbm < ABOVE_NOISE_DB:
        said.append(
            f"{port_dbm:.2f} dBm is less than {ABOVE_NOISE_DB:g} dB above the noise of"
            f" {found.noise_dbm:.1f} dBm: noise counts in what was read"
        )
    if abs(off_db) > found.expanded_db:
        less = f", the loss of {found.loss_db:.2f} dB counted," if at == "input" else ""
        said.append(
            f"{off_db:+.2f} dB{less} is beyond the expanded uncertainty of the chain,"
            f" {found.expanded_db:.2f} dB; look for a wrong level, channel or cable before you"
            " trust it"
        )
    return said


def expected(record: Record, mean: Mean, channel: str) -> Expected:
    """By the calibration that the check's figures rest on; ConfigError or CalibrationError where
    the record holds none that this version understands."""
    site, chain = _held(record, mean, channel)
    (channel_here,) = (one for one in site.channels if one.name == channel)
    band = site.bands[channel_here.band]
    file = calparts.parse(chain.document)
    middle_hz = np.array([math.sqrt(band.low_hz * band.high_hz)])
    losses = [
        float(element.curve.at(middle_hz)[0])
        for element in calparts.elements_of(file, channel_here.axis)
        if element.kind not in PICKUPS
    ]
    low_w, high_w = chain.tables[0].range_w()
    noise_w = float(chain.noise_w[0])
    return Expected(
        (dbm_from_w(low_w), dbm_from_w(high_w)),
        dbm_from_w(noise_w) if noise_w > 0.0 else None,
        math.fsum(losses),
        float(expanded_db(chain.contributions, np.ones((1, 1)))[0][0]),
    )


def _held(record: Record, mean: Mean, channel: str) -> tuple[Site, Chain]:
    """Site and chain of the channel, as the run began that the check's figures are of."""
    from monitor.wiring import averaging_of  # late: the front ends are not needed but here

    uses = record.calibrations().uses
    mine = [use for use in uses if use.boot == mean.boot.boot and use.boot_ns <= mean.end_ns]
    documents = {}
    for name in ("calibration", "site"):
        held = record.document(mine[-1].hashes.get(name, "")) if mine else None
        if held is None:
            raise ConfigError(f"the record holds no {name} file of that time")
        documents[name] = held[1]
    site = site_of(documents["site"], record.path.with_name("site.toml"))
    channels = [one for one in site.channels if one.name == channel]
    if not channels:
        raise ConfigError(f"the site file of that time has no channel {channel!r}")
    file = calparts.parse(documents["calibration"])
    return site, calfile.chain(file, channels, site.bands, averaging_of(site))
