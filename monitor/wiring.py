"""The composition root: a site file becomes a station, a front end, a record and a daemon."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np

from hardware.registry import Settings, declared, open_front_end, settings_for
from monitor import limitsets
from monitor.calfile import chain as chain_of_file
from monitor.calparts import CalibrationFile, read
from monitor.changed import names_of, swapped
from monitor.checks import Finding, compare_bands
from monitor.clock import SystemClock
from monitor.config import Site
from monitor.core.alarms import AlertRule, watches
from monitor.core.averaging_law import Averaging
from monitor.core.calibration import Chain
from monitor.core.errors import ConfigError
from monitor.core.exposure import least_coefficient, scope_coefficients
from monitor.core.gain_check import KEY as SUSPECTED
from monitor.core.judgement import INSTRUMENT_KEYS
from monitor.core.limits import LimitSet, Scope, ratio_per_e2, scopes
from monitor.core.noise_floor import KEYS
from monitor.core.readings import FrontEnd
from monitor.core.rows import Event
from monitor.core.silence import KEY as SILENCE
from monitor.core.station import Station, station
from monitor.daemon import RECORD, Daemon
from monitor.inforce import Say, before_of, in_force, unsaid
from monitor.listening import heard, left_alone, long_enough, named
from monitor.receiver import refuse_other_gain
from monitor.record import connect
from monitor.record.background import WriterThread
from monitor.record.writer import Writer
from monitor.recovery import Recovered, Run, recovered
from monitor.snapshot import rfc3339
from monitor.spurs import cleared

QUEUE_DEPTH = 8
RECORDED = ("level_series", "iq_file")


def sensor_settings(site: Site) -> Settings:
    """The front end's settings; the bands that it receives must be those of the site file."""
    settings = settings_for(site.sensor_kind, options_of(site), site.path.parent)
    compare_bands(site, getattr(settings, "bands_hz", None), getattr(settings, "bin_hz", 0.0))
    round_s = getattr(settings, "round_s", 0.0)
    if round_s > site.hold_s:
        raise ConfigError(
            f"{site.path.name}: sensor.hold_s: {site.hold_s:g} is shorter than {round_s:.4g} s, "
            "the longest from one reading of a band to the next; make it longer"
        )
    return settings


def options_of(site: Site) -> dict[str, object]:
    """The front end's own options; a receiver that can be tuned is told the site's bands."""
    options = dict(site.sensor_options)
    if site.sensor_kind != "iq_stream":
        return options
    if "bands" in options:
        raise ConfigError(
            f"{site.path.name}: sensor.bands: the bands are those of [[band]] here; take it out"
        )
    bands = [site.bands[channel.band] for channel in site.channels]
    return options | {"bands": [(band.low_hz, band.high_hz) for band in bands]}


def averaging_of(site: Site) -> Averaging:
    """What the site's front end averages; needs neither its device nor its file."""
    return declared(site.sensor_kind, options_of(site))


def chain_for(site: Site, settings: Settings) -> Chain:
    """The site's chain. ConfigError where the sensor's step is not the calibration's."""
    return _made(read(site.calibration), site, settings)


def _made(file: CalibrationFile, site: Site, settings: Settings) -> Chain:
    chain = chain_of_file(file, site.channels, site.bands, settings.averaging)
    if (settings.resolution or 1.0) != (chain.resolution or 1.0):  # counts of a converter: 1
        raise ConfigError(
            f"{site.path.name}: sensor.resolution: {settings.resolution} differs from "
            f"{chain.resolution} in {site.calibration.name}: detector.resolution; make them equal"
        )
    gain_db = getattr(settings, "gain_db", None)
    if gain_db is not None:
        refuse_other_gain(site, file, gain_db)
    return chain


def station_for(
    site: Site, chain: Chain, load: Callable[[str], LimitSet] = limitsets.load
) -> Station:
    """Chain, every scope of the site's limit sets (from load), and the alert levels on them."""
    low = min(float(grid.min()) for grid in chain.frequencies_hz)
    high = max(float(grid.max()) for grid in chain.frequencies_hz)
    found: list[Scope] = []
    most: list[list[float]] = []
    least: list[list[float]] = []
    for set_id in site.limit_sets:
        limit_set = load(set_id)
        for scope in scopes(limit_set, low, high):
            found.append(scope)
            rates = [ratio_per_e2(limit_set, scope, grid) for grid in chain.frequencies_hz]
            most.append([scope_coefficients(k, rate) for k, rate in zip(chain.k, rates)])
            least.append([least_coefficient(k, rate) for k, rate in zip(chain.k, rates)])
    watched = watches((*site.alerts, *limit_rules(site, found)), found)
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
        np.array(most).T,
        np.array(least).T,
        watched,
        hold_s=site.hold_s,
        silence_s=site.silence_after_s,
        field_region=site.field_region,
        outside_excluded=all(band.outside != "undeclared" for band in site.bands.values()),
        averaging=averaging_of(site),
    )


def limit_rules(site: Site, found: Sequence[Scope]) -> list[AlertRule]:
    """The limits of the place's own population are alert levels, said or not."""
    own = "occupational" if site.occupancy == "controlled" else "general_public"
    rules = []
    for scope in found:
        said = any(
            rule.ratio == 1.0
            and rule.set_id in ("", scope.set_id)
            and rule.population in ("", scope.population)
            and rule.scope in ("", scope.scope)
            for rule in site.alerts
        )
        if scope.population == own and not said:
            rules.append(
                AlertRule("the limit", scope.set_id, own, scope.scope, 1.0, 0.9, 0.0, 60.0)
            )
    return list(dict.fromkeys(rules))


def check(site: Site) -> list[Finding]:
    """Whether sensor, calibration and record fit together; errors are raised, nothing written."""
    settings = sensor_settings(site)
    chain = chain_for(site, settings)
    station_for(site, chain)
    cleared(settings, site, chain).check_device()
    found = [Finding("sensor", f"{site.sensor_kind}: can be reached")]
    if site.record_path.exists():
        mark = connect.identify(site.record_path).simulated
        connect.refuse_other_mark(site.record_path, mark, site.simulated)
        found.append(Finding("record", f"{site.record_path}: will be continued"))
        found += [
            Finding("calibration", f"{line}: nothing will conform", ok=False)
            for line in swapped(read(site.calibration), before_of(site.record_path).files)
        ]
    return found


def listen(site: Site, seconds: float | None) -> list[Finding]:
    """What the sensor's line gives within that time, and whether it is the calibrated device.

    seconds: None for as long as a first reading may take. The
    line is let go afterwards.
    """
    alone = left_alone(site)
    if alone is not None:
        return [alone]
    clock, settings = SystemClock(), sensor_settings(site)
    if seconds is None:
        seconds = long_enough(settings)
    front = open_front_end(
        settings, len(site.channels), clock.boot_ns, clock.utc_ns, site.simulated
    )
    try:
        found = heard(front, site, seconds, clock.boot_ns)
        return [found, *named(front.status().name, names_of(read(site.calibration)))]
    finally:
        front.close()


def daemon_for(site: Site, *, history_s: float | None = None, say: Say = unsaid) -> Daemon:
    """Everything opened and put together; the record is made where it is missing."""
    clock = SystemClock()
    settings = sensor_settings(site)
    utc_ns = None if clock.uncertainty_ns() is None else clock.utc_ns()
    force = in_force(site, lambda file: _made(file, site, settings), utc_ns, say)
    chain = force.chain
    here = station_for(site, chain)
    # A box in service waits for a device that is away, and says so; a first start needs it.
    if site.sensor_kind in RECORDED or not site.record_path.exists():
        settings.check_device()
    front = open_front_end(
        cleared(settings, site, chain),
        len(site.channels), clock.boot_ns, clock.utc_ns, site.simulated,
    )  # fmt: skip
    boot_id, kind = _boot(site, front, clock)
    documents = _documents(site, chain)

    def prepare(writer: Writer) -> int:
        boot = writer.begin_boot(boot_id, kind)
        writer.put_channels([(i, c.name, c.axis, c.band) for i, c in enumerate(site.channels)])
        writer.put_scopes(here.scopes)
        for _, document_kind, body in documents:
            writer.put_document(document_kind, body)
        return boot

    thread = WriterThread.opening(site.record_path, site.simulated, prepare, QUEUE_DEPTH)
    boot_ns = 0 if front.owns_clock else clock.boot_ns()
    run = Run(boot_id, kind, boot_ns, chain_identity(chain))
    found = recovered(site.record_path, run, here)
    if found.ended is not None:
        thread.put(*found.ended, block=False)
    daemon = Daemon(
        site, here, front, thread, clock, found.state, found.desk,
        history_s=history_s, fixes=found.fixes, rows=found.rows, standing=force.standing,
    )  # fmt: skip
    begun = [replace(event, boot_ns=found.state.front_ns) for event in force.events]
    for event in [*_first_events(here, found, run, documents), *begun]:
        found.desk.apply(event)
        daemon.note(event)
    return daemon


def _first_events(
    here: Station, found: Recovered, run: Run, documents: Sequence[tuple[str, str, bytes]]
) -> list[Event]:
    """That a run starts and on what files it rests; what it could not go on from; alarms that
    nothing watches any more return, or they would stand for ever."""
    at_ns = found.state.front_ns
    body: dict[str, object] = {
        name: hashlib.sha256(document).hexdigest() for name, _, document in documents
    }
    events = [Event(at_ns, "start", "daemon", body | {"chain": run.chain})]
    if found.trouble:
        events.append(Event(at_ns, "fault", "windows begin empty", {"why": found.trouble}))
    watched = {watch.key for watch in here.watches} | {
        SILENCE,
        RECORD,
        *INSTRUMENT_KEYS,
        *KEYS,
        SUSPECTED,
    }
    gone: dict[str, object] = {"raised": False, "why": "no longer watched"}
    return events + [
        Event(at_ns, "alarm", key, gone) for key in sorted(found.desk.raised() - watched)
    ]


def _boot(site: Site, front: FrontEnd, clock: SystemClock) -> tuple[str, str]:
    """Identity and kind of the boot: the machine's, or one of its own for a recorded series.

    A recorded series is known by its content: the same name may hold another one tomorrow.
    """
    if not front.owns_clock:
        return clock.boot_id(), "machine"
    began = rfc3339(front.clock_fix[1] if front.clock_fix else None)
    if site.sensor_kind not in RECORDED:
        return f"{site.sensor_options.get('device', '')} from {began}", "rehearsal"
    path = site.path.parent / str(site.sensor_options["file"])
    with path.open("rb") as file:
        digest = hashlib.file_digest(file, "sha256").hexdigest()
    return f"{path.name} from {began} sha256 {digest}", "series"


def chain_identity(chain: Chain) -> str:
    """What power and E squared per watt are made of: equal where figures may be added."""
    nothing = np.empty(0)
    tables = chain.temperature or (None,) * len(chain.tables)
    pairs = [table or (nothing, nothing) for table in tables]
    arrays = [*chain.frequencies_hz, *chain.k, chain.noise_w, *(x for pair in pairs for x in pair)]
    parts = [table.to_bytes() for table in chain.tables] + [array.tobytes() for array in arrays]
    sizes = np.array([len(part) for part in parts], "<i8").tobytes()
    return hashlib.sha256(b"".join((sizes, *parts))).hexdigest()


def _documents(site: Site, chain: Chain) -> list[tuple[str, str, bytes]]:
    """(name, kind, body) of the files that the figures rest on."""
    documents = [("calibration", "calibration", chain.document)]
    documents.append(("site", "site", site.path.read_bytes()))
    documents += [(name, "limit set", limitsets.document(name)) for name in site.limit_sets]
    documents += [
        (f"counts {channel.name}", "count table", table.to_bytes())
        for channel, table in zip(site.channels, chain.tables)
    ]
    return documents
