"""The composition root: a site file becomes a station, a front end, a record and a daemon."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from hardware.registry import Settings, open_front_end, settings_for
from monitor import limitsets
from monitor.alarm_desk import AlarmDesk
from monitor.calfile import load_chain
from monitor.checks import Finding
from monitor.clock import SystemClock
from monitor.config import Site
from monitor.core import pipeline
from monitor.core.alarms import watches
from monitor.core.calibration import Chain
from monitor.core.errors import ConfigError
from monitor.core.exposure import scope_coefficients
from monitor.core.limits import Scope, ratio_per_e2, scopes
from monitor.core.readings import FrontEnd
from monitor.core.resume import resume, since_ns
from monitor.core.rows import Event
from monitor.core.station import Station, station
from monitor.daemon import Daemon
from monitor.record import connect
from monitor.record.background import WriterThread
from monitor.record.reader import Record
from monitor.record.writer import Writer
from monitor.snapshot import rfc3339

QUEUE_DEPTH = 8


def sensor_settings(site: Site) -> Settings:
    """The front end's settings; its counts must be those of the calibration file."""
    return settings_for(site.sensor_kind, site.sensor_options, site.path.parent)


def chain_for(site: Site, settings: Settings) -> Chain:
    """The site's chain. ConfigError where the sensor's step is not the calibration's."""
    chain = load_chain(site.calibration, site.channels, site.bands)
    if (settings.resolution or 1.0) != (chain.resolution or 1.0):  # counts of a converter: 1
        raise ConfigError(
            f"{site.path.name}: sensor.resolution: {settings.resolution} differs from "
            f"{chain.resolution} in {site.calibration.name}: detector.resolution; make them equal"
        )
    return chain


def station_for(site: Site, chain: Chain) -> Station:
    """Chain, every scope of the site's limit sets, and the alert levels on them."""
    low = min(float(grid.min()) for grid in chain.frequencies_hz)
    high = max(float(grid.max()) for grid in chain.frequencies_hz)
    found: list[Scope] = []
    columns: list[list[float]] = []
    for set_id in site.limit_sets:
        limit_set = limitsets.load(set_id)
        for scope in scopes(limit_set, low, high):
            found.append(scope)
            columns.append(
                [
                    scope_coefficients(k, ratio_per_e2(limit_set, scope, grid))
                    for k, grid in zip(chain.k, chain.frequencies_hz)
                ]
            )
    watched = watches(site.alerts, found)
    for rule in site.alerts:
        if not any(watch.rule == rule for watch in watched):
            raise ConfigError(
                f"{site.path.name}: alert {rule.name!r}: no scope of {rule.set_id} is "
                f"{rule.population} {rule.scope}".rstrip()
                + "; see fieldsill limits"
            )
    return station(
        chain,
        tuple(found),
        np.array(columns).T,
        watched,
        hold_s=site.hold_s,
        silence_s=site.silence_after_s,
        field_region=site.field_region,
    )


def check(site: Site) -> list[Finding]:
    """Whether sensor, calibration and record fit together; errors are raised, nothing written."""
    settings = sensor_settings(site)
    station_for(site, chain_for(site, settings))
    settings.check_device()
    found = [Finding("sensor", f"{site.sensor_kind}: can be reached")]
    if site.record_path.exists():
        mark = connect.identify(site.record_path).simulated
        connect.refuse_other_mark(site.record_path, mark, site.simulated)
        found.append(Finding("record", f"{site.record_path}: will be continued"))
    return found


def daemon_for(site: Site, *, history_s: float | None = None) -> Daemon:
    """Everything opened and put together; the record is made where it is missing."""
    clock = SystemClock()
    settings = sensor_settings(site)
    chain = chain_for(site, settings)
    here = station_for(site, chain)
    # A box in service waits for a device that is away, and says so; a first start needs it.
    if site.sensor_kind in ("level_series", "iq_file") or not site.record_path.exists():
        settings.check_device()
    connect.ensure(site.record_path, site.simulated)
    writer = Writer(site.record_path, simulated=site.simulated)
    front = open_front_end(
        settings, len(site.channels), clock.boot_ns, clock.utc_ns, site.simulated
    )
    boot = writer.begin_boot(*_boot(site, front, clock))
    writer.put_channels([(i, c.name, c.axis, c.band) for i, c in enumerate(site.channels)])
    writer.put_scopes(here.scopes)
    documents = _documents(site, chain, writer)
    boot_ns = 0 if front.owns_clock else clock.boot_ns()
    state, desk = _resumed(site.record_path, boot, here, boot_ns)
    daemon = Daemon(
        site, here, front, WriterThread(writer, QUEUE_DEPTH), clock, boot, state, desk,
        history_s=history_s,
    )  # fmt: skip
    daemon.note(Event(state.front_ns, "start", "daemon", documents))
    return daemon


def _boot(site: Site, front: FrontEnd, clock: SystemClock) -> tuple[str, str]:
    """Identity and kind of the boot: the machine's, or one of its own for a recorded series."""
    if not front.owns_clock:
        return clock.boot_id(), "machine"
    kind = "rehearsal" if site.sensor_kind == "detector_board" else "series"
    source = site.sensor_options.get("file", site.sensor_options.get("device", ""))
    fix = front.clock_fix
    return f"{Path(str(source)).name} from {rfc3339(fix[1] if fix else None)}", kind


def _documents(site: Site, chain: Chain, writer: Writer) -> dict[str, object]:
    """Put the files that the figures rest on in the record; their hashes."""
    hashes: dict[str, object] = {
        "calibration": writer.put_document("calibration", chain.document),
        "site": writer.put_document("site", site.path.read_bytes()),
    }
    for set_id in site.limit_sets:
        hashes[set_id] = writer.put_document("limit set", limitsets.document(set_id))
    for channel, table in zip(site.channels, chain.tables):
        hashes[f"counts {channel.name}"] = writer.put_document("count table", table.to_bytes())
    return hashes


def _resumed(
    path: Path, boot: int, here: Station, boot_ns: int
) -> tuple[pipeline.State, AlarmDesk]:
    """State and alarms as the record has them; a new boot begins with empty windows."""
    with Record.open(path) as record:
        desk = AlarmDesk.from_events(record.events(limit=10_000), boot)
        last_ns = record.last_reading_ns(boot)
        if last_ns is None:
            return pipeline.start(here, boot_ns), desk
        rows, raw = record.resume(boot, since_ns(last_ns, here))
    return resume(here, rows, raw, boot_ns, desk.raised()), desk
