"""Whether everything that a site file names fits together; nothing is opened for writing."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta

from monitor import calfile, limitsets, signalwords
from monitor.calparts import CalibrationFile, ahead, dated, parse, read
from monitor.calterms import assumed_kinds, is_component
from monitor.changed import not_as_calibrated
from monitor.config import Site
from monitor.core.alarms import AlertRule, watches
from monitor.core.averaging_law import UNDECLARED, Averaging
from monitor.core.calibration import Chain
from monitor.core.errors import CalibrationError, ConfigError, LimitError
from monitor.core.exposure import CAP_DB, E_ALONE_FROM_HZ, scope_coefficients
from monitor.core.flags import Flag
from monitor.core.limits import Scope, frequency_text, ratio_per_e2, scopes
from monitor.core.quantities import dbm_from_w
from monitor.core.uncertainty import equal_shares, expanded_db
from monitor.marking import DUE_SOON_DAYS

TELL_NO_TEMPERATURE = ("text_lines", "level_series", "iq_file", "iq_stream")
OUTSIDE_TEXTS = {
    "filter": "a filter keeps out signals outside it",
    "survey": "a survey rules out signals outside it",
}
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing that was looked at. ok False: the site runs, but something cannot be judged."""

    where: str
    text: str
    ok: bool = True


def findings(
    site: Site,
    now_utc_ns: int,
    front_end: Callable[[Site], Iterable[Finding]],
    averages: Callable[[Site], Averaging] = lambda _: UNDECLARED,
) -> Iterator[Finding]:
    """What fits and what does not. front_end: the check of sensor and record; averages: what the
    front end averages.

    Raises what makes the site unable to run: ConfigError, CalibrationError, LimitError (2) or
    DeviceError (3), one line each.
    """
    file, front = read(site.calibration), averages(site)
    chain = calfile.chain(file, site.channels, site.bands, front)
    refuse_future_date(site.calibration.name, *dated(chain.document), now_utc_ns)
    tops = [(scope, _top(site, chain, scope)) for scope in _scopes(site)]
    yield from _site(site)
    yield from _calibration(site, chain, now_utc_ns)
    yield from _installed(site, file)
    yield from _as_found(site, file)
    yield from _temperature(site, chain)
    yield from _channels(site, file, chain)
    if signalwords.trusted(site, file, front):
        yield Finding("calibration", signalwords.NOTHING_AVERAGED)
    for text, ok in signalwords.told(site, file, front):
        yield Finding("band.signal", text, ok)
    yield from front_end(site)
    for scope, top in tops:
        yield _limit(scope, top)
    for rule in site.alerts:
        yield _alert(rule, tops)


def refuse_future(site: Site, now_utc_ns: int) -> None:
    """CalibrationError where the site's calibration is dated in the future."""
    chain = calfile.load_chain(site.calibration, site.channels, site.bands)
    refuse_future_date(site.calibration.name, *dated(chain.document), now_utc_ns)


def refuse_future_date(name: str, key: str, date: date, now_utc_ns: int) -> None:
    """CalibrationError where a date of the calibration file of that name lies in the future."""
    if ahead(date, now_utc_ns):
        now = _EPOCH + timedelta(microseconds=now_utc_ns // 1000)
        raise CalibrationError(
            f"{name}: {key}: {date} lies in the future, this machine's "
            f"clock says {now:%Y-%m-%d}; look at the date or the clock"
        )


def _site(site: Site) -> Iterator[Finding]:
    kind = "simulated" if site.simulated else "real"
    yield Finding("site", f"{site.name}, {site.occupancy}; readings are {kind}")
    if site.field_region == "undeclared":
        yield Finding("site.field_region", "undeclared: nothing will ever conform", ok=False)
    elif site.field_region == "reactive_near":
        yield Finding("site.field_region", "reactive near field: no verdict from E alone", ok=False)
    elif site.field_region == "radiating_near":
        text = "radiating near field: nothing will conform, for E alone does not show it there"
        yield Finding("site.field_region", text, ok=False)
    else:
        yield Finding("site.field_region", "far field")


def _calibration(site: Site, chain: Chain, now_utc_ns: int) -> Iterator[Finding]:
    if chain.due_utc_ns is not None:
        days = (chain.due_utc_ns - now_utc_ns) / 86_400e9
        last = _EPOCH + timedelta(microseconds=chain.due_utc_ns // 1000 - 1)
        first = parse(chain.document).dues("".join(channel.axis for channel in site.channels))[0]
        text = f"due {last.date()}" + ("" if first.what == "calibration" else f" ({first.what})")
        if days <= 0:
            yield Finding("calibration", f"overdue, was {text}: nothing will conform", ok=False)
        elif days < DUE_SOON_DAYS:
            yield Finding("calibration", f"{text}, in {int(days)} days", ok=False)
        else:
            yield Finding("calibration", text)
    if chain.flags & Flag.INVENTED_CALIBRATION:
        yield Finding(
            "calibration",
            "figures of an example, invented: nothing will ever conform; once every figure and "
            "every name is yours, take out invented = true",
            ok=False,
        )
    if chain.flags & Flag.LOG_AVERAGED:
        yield Finding(
            "calibration", "something averages logs: every figure is a lower bound", ok=False
        )
    if chain.flags & Flag.ASSUMED_TERMS:
        kinds = ", ".join(assumed_kinds(chain.contributions))
        yield Finding(
            "calibration",
            f"assumed, which nobody has confirmed: {kinds}; nothing will conform until the file has"
            " a contribution of each such kind, even of zero",
            ok=False,
        )
    expanded, k = expanded_db(chain.contributions, equal_shares(len(chain.tables))[None, :])
    u_db = float(expanded[0])
    over = u_db > CAP_DB
    yield Finding(
        "calibration",
        f"expanded uncertainty {u_db:.2f} dB (95 %, k = {k:.2f}), equal shares of the channels"
        + (f"; above {CAP_DB:g} dB nothing will conform" if over else ""),
        not over,
    )


def _installed(site: Site, file: CalibrationFile) -> Iterator[Finding]:
    lines = not_as_calibrated(site.installed, file)
    for line in lines:
        yield Finding("installed", f"{line}: nothing will conform", ok=False)
    if site.installed and not lines:
        yield Finding("installed", f"{len(site.installed)} parts, each is the one calibrated")


def _as_found(site: Site, file: CalibrationFile) -> Iterator[Finding]:
    if file.as_found is not None:
        drift_db = file.as_found.over(site.channels, site.bands)
        yield Finding(
            "calibration",
            f"found a drift of up to {drift_db:.2g} dB since {file.as_found.previous!r}; figures "
            "that rest on that one are read with a wider uncertainty",
        )


def _temperature(site: Site, chain: Chain) -> Iterator[Finding]:
    told = bool(site.sensor_options.get("temperature_file"))
    if site.sensor_kind in TELL_NO_TEMPERATURE and not told:
        low, high = chain.valid_temperature_c
        yield Finding(
            "sensor",
            f"tells no temperature; whether it is between {low:g} and {high:g} °C is not known: "
            "nothing will conform",
            ok=False,
        )


def _channels(site: Site, file: CalibrationFile, chain: Chain) -> Iterator[Finding]:
    axes = Counter(channel.band for channel in site.channels)
    whole = {c.band for c in site.channels if calfile.isotropic(file, c)}
    for name, band in site.bands.items():
        few = is_component(axes[name], band.polarisation, isotropic=name in whole)
        text = f"{name}: {frequency_text(band.low_hz)} to {frequency_text(band.high_hz)}"
        if few:
            rest = "; a component only, a lower bound: nothing will conform"
        else:
            rest = "" if axes[name] == 3 else "; a survey stands for the others"
        seen = f"{axes[name]} of 3 axes{rest}"
        seen = "an isotropic probe: the whole field" if name in whole else seen
        yield Finding("band", f"{text}, {seen}", not few)
        outside = OUTSIDE_TEXTS.get(band.outside)
        yield Finding(
            "band.outside",
            f"{name}: {outside or 'undeclared: nothing will ever conform'}",
            outside is not None,
        )
        if band.low_hz < E_ALONE_FROM_HZ:
            yield Finding("band", f"{name}: no verdict from E alone below 30 MHz", ok=False)
    of_each = zip(site.channels, chain.tables, chain.k_mid, chain.least_w)
    for channel, table, k_mid, least_w in of_each:
        low_w, high_w = float(least_w), table.range_w()[1]
        low, high = ((p_w * float(k_mid)) ** 0.5 for p_w in (low_w, high_w))
        levels = f"{dbm_from_w(low_w):.1f} to {dbm_from_w(high_w):.1f} dBm"
        yield Finding("channel", f"{channel.name}: {levels}, {low:.3g} to {high:.3g} V/m")


def compare_bands(
    site: Site, bands_hz: Sequence[tuple[float, float]] | None, bin_hz: float
) -> None:
    """ConfigError unless each channel's band in the site file is the one that it receives.

    bands_hz: (low, high) on the air per channel, Hz; None where the sensor has no bands of its
    own. bin_hz: how far an edge may be off, one bin of the sensor's spectrum.
    """
    if bands_hz is None:
        return
    if len(bands_hz) != len(site.channels):
        raise ConfigError(
            f"{site.path.name}: sensor.bands: {len(bands_hz)} bands for {len(site.channels)} "
            "channels; give one [low, high] for each channel"
        )
    for i, (channel, (low_hz, high_hz)) in enumerate(zip(site.channels, bands_hz), 1):
        band = site.bands[channel.band]
        if max(abs(band.low_hz - low_hz), abs(band.high_hz - high_hz)) > bin_hz:
            raise ConfigError(
                f"{site.path.name}: band {band.name!r}: {_span(band.low_hz, band.high_hz)}, but "
                f"sensor.bands[{i}] round the recording's centre is {_span(low_hz, high_hz)}; "
                "correct centre_hz, bands or the band"
            )


def _span(low_hz: float, high_hz: float) -> str:
    """To the hertz: two bands that differ must not look alike."""
    return f"{low_hz / 1e6:.10g} to {high_hz / 1e6:.10g} MHz"


def _scopes(site: Site) -> list[Scope]:
    """The scopes of every set in the site's bands; LimitError for a set that has none there."""
    low_hz = min(band.low_hz for band in site.bands.values())
    high_hz = max(band.high_hz for band in site.bands.values())
    found: list[Scope] = []
    for set_id in site.limit_sets:
        here = scopes(limitsets.load(set_id), low_hz, high_hz)
        if not here:
            raise LimitError(
                f"{site.path.name}: limits.sets: {set_id} has no limit for a field strength at "
                f"{frequency_text(low_hz)} to {frequency_text(high_hz)}; take it out"
            )
        found += here
    return found


def _alert(rule: AlertRule, tops: Sequence[tuple[Scope, float]]) -> Finding:
    """Where it is raised, and in how many scopes the detector's range ends below its ratio."""
    watched = [top for scope, top in tops if watches([rule], [scope])]
    text = f"{rule.name}: raised at an exposure ratio of {rule.ratio:g}, in {len(watched)} scopes"
    beyond = sum(top < rule.ratio for top in watched)
    if beyond:
        text += f"; in {beyond} of them the detector's range ends below that: never raised there,"
        text += " only the alarm of readings above the range is"
    return Finding("alert", text, bool(watched) and not beyond)


def _limit(scope: Scope, top: float) -> Finding:
    """What stands in the way of a verdict. top: exposure ratio where the detector's range ends."""
    notes = [f"{scope.set_id}: {scope.population}, {scope.scope}, {scope.averaging_s:g} s"]
    if not scope.verified:
        notes.append("from memory, will not conform until confirmed")
    if top < 1.0:
        notes.append(f"the detector's range ends at {top:.2g} times the limit")
    return Finding("limits", "; ".join(notes), len(notes) == 1)


def _top(site: Site, chain: Chain, scope: Scope) -> float:
    """Exposure ratio at the top of the poorest channel's range; LimitError outside the table."""
    limit_set = limitsets.load(scope.set_id)
    tops = []
    for table, frequencies_hz, k in zip(chain.tables, chain.frequencies_hz, chain.k):
        try:
            per_e2 = ratio_per_e2(limit_set, scope, frequencies_hz)
        except LimitError as error:
            raise LimitError(f"{site.path.name}: limits.sets: {error}; take it out") from None
        tops.append(table.range_w()[1] * scope_coefficients(k, per_e2))
    return min(tops)
