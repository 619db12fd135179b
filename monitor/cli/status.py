"""fieldsill status: how one box is, or every box of a folder, worst first."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path

import click

from dashboard import bounds, told
from dashboard.models import stands
from dashboard.reservations import days_left, sentences
from dashboard.standstill import nothing_valid, sensor
from dashboard.words import NOT_JUDGED
from monitor.cli import status_lines
from monitor.cli.output import print_json
from monitor.cli.status_lines import ratios as _ratios
from monitor.cli.status_lines import rows as _rows
from monitor.clock import SystemClock
from monitor.control import ask
from monitor.core.errors import ConfigError, DeviceError, FieldsillError
from monitor.core.exposure import Verdict
from monitor.core.flags import words
from monitor.record.reader import Record
from monitor.record.types import Latest

Row = Mapping[str, object]
STATES = ("exceeds", "alarm", "unreadable", "stopped", "silent", "undecided", "conforms")
"""Worst first. A box that does not measure stands before one that measures and cannot decide."""
SILENT_AFTER_S = 30.0
_NOTHING_SINCE = "no measurement since {}; this says nothing about the field"


@dataclass(frozen=True, slots=True)
class Standing:
    """How one box is. now: the daemon's document, or the same keys as the record knows them."""

    record: Path
    state: str
    text: str
    live: bool
    simulated: bool | None
    now: Row

    @property
    def name(self) -> str:
        """The site's name where the daemon says it, else the record's."""
        site = self.now.get("site")
        named = site.get("name") if isinstance(site, Mapping) else None
        return str(named or self.record.stem)

    @property
    def largest(self) -> bounds.Ratio | None:
        """The largest exposure ratio; by its lower bound where no mean is known."""
        known = [one for one in _ratios(self.now) if one.stands is not None]
        return max(known, key=_rank, default=None)

    @property
    def ratio(self) -> float | None:
        """The figure by which boxes are ranked."""
        return None if self.largest is None else _rank(self.largest)

    @property
    def _told(self) -> float | None:
        """The figure of the largest exposure ratio as it is said: a bound has U counted."""
        bound = self.largest is not None and self.largest.kind is bounds.Kind.AT_LEAST
        return self.largest.stands if bound and self.largest else self.ratio

    def document(self) -> dict[str, object]:
        """As JSON."""
        return {
            "record": str(self.record),
            "name": self.name,
            "state": self.state,
            "text": self.text,
            "answering": self.live,
            "simulated": self.simulated,
            "largest_exposure_ratio": self._told,
            "largest_is": None if self.largest is None else str(self.largest.kind),
            "not_judged": NOT_JUDGED,
            "now": dict(self.now),
        }


@click.command(name="status")
@click.argument("folder", required=False, type=click.Path(path_type=Path))
@click.option("--record", type=click.Path(path_type=Path), help="The record to look at.")
@click.option("--site", type=click.Path(path_type=Path), help="The site file that names it.")
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def command(folder: Path | None, record: Path | None, site: Path | None, as_json: bool) -> None:
    """How the monitor is now; with FOLDER, one line for each record in it, worst first."""
    if sum(given is not None for given in (folder, record, site)) > 1:
        raise ConfigError("status: give a folder, or --record, or --site; not several")
    utc_ns = SystemClock().utc_ns()
    if folder is None:
        box = standing_of(_chosen(record, site), utc_ns)
        print_json(box.document()) if as_json else click.echo("\n".join(_in_full(box)))
        return
    boxes = worst_first(_of_folder(path, utc_ns) for path in _records(folder))
    if as_json:
        print_json({"boxes": [box.document() for box in boxes]})
    else:
        click.echo("\n".join([*(_one_line(box) for box in boxes), NOT_JUDGED]))


def standing_of(path: Path, utc_ns: int) -> Standing:
    """Ask the daemon beside the record, else read the record. RecordError where it is none."""
    try:
        now = ask(path.with_suffix(".sock"), {"do": "now"}).get("now")
    except DeviceError:
        now = None
    if isinstance(now, Mapping):
        state, text = _judged(now)
        return Standing(path, state, text, True, bool(now.get("simulated")), now)
    with Record.open(path) as record:
        latest = record.latest()
        simulated = record.simulated
    if latest is None:
        return Standing(path, "stopped", "no measurement yet", False, simulated, {})
    text = _NOTHING_SINCE.format(_utc(_last_ns(latest)) or "a time that no clock tells")
    return Standing(path, "stopped", text, False, simulated, _as_now(latest, simulated, utc_ns))


def worst_first(boxes: Iterable[Standing]) -> list[Standing]:
    """By state as in STATES, then by exposure ratio, then by name."""
    return sorted(boxes, key=lambda b: (STATES.index(b.state), -(b.ratio or 0.0), b.name))


def _of_folder(path: Path, utc_ns: int) -> Standing:
    try:
        return standing_of(path, utc_ns)
    except FieldsillError as error:
        return Standing(path, "unreadable", str(error), False, None, {})


def _judged(now: Row) -> tuple[str, str]:
    """State and words of a box whose daemon answers."""
    age_s = bounds.number(now, "last_reading_age_s")
    if stands(now, "silence") or (age_s is not None and age_s > SILENT_AFTER_S):
        ago = "" if age_s is None else f"{age_s:.0f} s ago"
        said = nothing_valid(now, str(now.get("last_reading_utc") or ago), status_lines.flags(now))
        return "silent", said[:1].lower() + said[1:].removesuffix(".")
    if age_s is None:
        return "silent", "no reading yet"
    verdicts = {str(row.get("verdict")) for row in _rows(now, "exposures")}
    alarms = [
        status_lines.alarm_text(row) for row in _rows(now, "alarms") if row.get("state") != "normal"
    ]
    heard = f"last reading {age_s:.0f} s ago"
    if "exceeds" in verdicts:
        return "exceeds", f"a limit is exceeded, {heard}"
    if alarms:
        return "alarm", f"{', '.join(alarms)}, {heard}"
    if verdicts == {"conforms"}:
        return "conforms", f"below each limit that is judged, at the antenna, {heard}"
    if any(_rank(one) >= 1 and not one.window.thin for one in _ratios(now)):
        return "undecided", f"at or above a limit, cannot be decided, {heard}"
    return "undecided", f"no limit known to be exceeded, not all can be decided, {heard}"


def _as_now(latest: Latest, simulated: bool, utc_ns: int) -> Row:
    last_ns = _last_ns(latest)
    age_s = None if last_ns is None else (utc_ns - last_ns) / 1e9
    fields = [
        {
            "averaging_s": f.averaging_s, "e_low": f.e_low, "e_mean": f.e_mean,
            "e_high": f.e_high, "e_max": f.e_max, "u_db": f.u_db, "k": f.k,
            "added_e2": f.added_e2,
            "valid_share": f.valid_share, "observed_share": f.observed_share,
            "flags": words(f.flags),
        }
        for f in latest.fields
    ]  # fmt: skip
    exposures = [
        {
            "index": x.index, "set": x.scope.set_id, "edition": x.scope.edition,
            "population": x.scope.population, "scope": x.scope.scope,
            "averaging_s": x.scope.averaging_s, "clause": x.scope.clause,
            "verified": x.scope.verified, "ratio_low": x.ratio_low, "ratio_mean": x.ratio_mean,
            "ratio_high": x.ratio_high, "u_db": x.u_db, "added_ratio": x.added_ratio,
            "verdict": Verdict(x.verdict).name.lower(),
        }
        for x in latest.exposures
    ]  # fmt: skip
    return {
        "utc": _utc(latest.utc_ns), "boot": latest.boot, "boot_ns": latest.end_ns,
        "last_reading_utc": _utc(latest.last_reading_utc_ns), "last_reading_age_s": age_s,
        "simulated": simulated, "fields": fields, "exposures": exposures,
        "flags": words(latest.flags),
    }  # fmt: skip


def _chosen(record: Path | None, site: Path | None) -> Path:
    if record is not None:
        return record
    from monitor.config import default_site_path, load_site  # only where a site is needed

    return load_site(default_site_path(site)).record_path


def _records(folder: Path) -> list[Path]:
    if not folder.is_dir():
        raise ConfigError(f"{folder}: no such folder; name the one that holds the records")
    found = sorted([*folder.glob("*.db"), *folder.glob("*/*.db")])
    if not found:
        raise ConfigError(f"{folder}: no record (*.db) in it or one folder down; name another")
    return found


def _one_line(box: Standing) -> str:
    ratio = "ratio -" if box.largest is None else f"ratio {told.figure(box.largest)}"
    mark = "  SIMULATED" if box.simulated else ""
    return f"{box.state:<10} {box.name:<24} {ratio:<20} {box.text}{mark}"


def _in_full(box: Standing) -> list[str]:
    lines = [box.name + ("  SIMULATED: the data are invented" if box.simulated else "")]
    lines += [f"  record   {box.record}", f"  state    {box.state}: {box.text}"]
    if box.live and "device" in box.now:
        lines.append(f"  device   {sensor(box.now).removeprefix('Sensor: ')}")
    silent = box.state == "silent"
    if silent or (not box.live and box.now):
        lines.append("  the last figures, none of the present:")
    carried = status_lines.flags(box.now)
    lines += [f"  {status_lines.field(row, carried)}" for row in _rows(box.now, "fields")]
    lines += [
        f"  {status_lines.exposure(row, ratio)}"
        for row, ratio in zip(_rows(box.now, "exposures"), _ratios(box.now), strict=True)
    ]
    lines += [f"  carried  {line}" for line in sentences(carried, days_left(box.now))]
    lines += [f"  alarm    {status_lines.alarm(row)}" for row in _rows(box.now, "alarms")]
    return [*lines, f"  {NOT_JUDGED}"]


def _rank(ratio: bounds.Ratio) -> float:
    figures = (ratio.mean, ratio.low)
    return next((figure for figure in figures if figure is not None), 0.0)


def _last_ns(latest: Latest) -> int | None:
    return latest.last_reading_utc_ns or latest.utc_ns


def _utc(utc_ns: int | None) -> str | None:
    if utc_ns is None:
        return None
    moment = datetime(1970, 1, 1, tzinfo=UTC) + timedelta(microseconds=utc_ns // 1000)
    return moment.isoformat(timespec="milliseconds").replace("+00:00", "Z")
