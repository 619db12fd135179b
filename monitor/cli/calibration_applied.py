"""fieldsill calibration applied: keep what the box read while a known level was applied."""

from __future__ import annotations

import re
from pathlib import Path

import click

from monitor import refnotes, refstrikes
from monitor.cli.averages_record import site_record, utc_ns_asked
from monitor.cli.levels import duration_s
from monitor.cli.output import print_json
from monitor.control import NoDaemonError, ask
from monitor.core.errors import ConfigError
from monitor.core.readings import NS_PER_S
from monitor.core.rows import Event
from monitor.record.reader import Record
from monitor.record.types import Commit
from monitor.record.writer import Writer
from monitor.refchecks import PLACES, Mean, event_of, mean_of, request_of

LEVEL_DBM = (-150.0, 60.0)


@click.command("applied")
@click.option("--record", type=click.Path(path_type=Path), help="Default: the site's.")
@click.option("--channel", help="Name of the channel as in the site file.")
@click.option("--level", help="What was applied, for example -30dBm.")
@click.option(
    "--at", type=click.Choice(PLACES), default="port", show_default=True,
    help="Applied at the detector's port, or at the input of the chain (losses then count too).",
)  # fmt: skip
@click.option("--from", "start", help="Begin of the time that it was applied, RFC 3339.")
@click.option("--to", "end", help="End of that time, RFC 3339.")
@click.option("--last", default="60s", show_default=True, help="Or: the newest in the record.")
@click.option("--strike", type=click.IntRange(1), help="Strike out the check of that number.")
@click.option("--note", default="", help="For example the generator's serial number, or why.")
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def command(
    record: Path | None,
    channel: str | None,
    level: str | None,
    at: str,
    start: str | None,
    end: str | None,
    last: str,
    strike: int | None,
    note: str,
    as_json: bool,
) -> None:
    """Compare a level that was applied on site with what was read, and keep the difference.

    The record lags up to a minute behind: apply the level for three minutes, or give --from and
    --to afterwards. Switch off and lock off what feeds the antenna before a connector is opened.
    With --strike a check that was a mistake is left out of the chart, which numbers them.
    """
    if strike is not None:
        if channel or level or start or end:
            raise ConfigError("--strike goes with --note alone: the check is known by its number")
        _strike(record or site_record(), strike, note, as_json)
        return
    if channel is None or level is None:
        raise ConfigError("give --channel and --level, or --strike")
    applied_dbm, span = level_dbm(level), _span(start, end)
    _keep_check(record or site_record(), channel, at, applied_dbm, span, last, note, as_json)


def _span(start: str | None, end: str | None) -> tuple[int, int] | None:
    if (start is None) != (end is None):
        raise ConfigError("--from and --to go together")
    if start is None:
        return None
    span = utc_ns_asked(start, "--from", 0), utc_ns_asked(end, "--to", 0)
    if not span[0] < span[1]:
        raise ConfigError("--from must be before --to")
    return span


def _keep_check(
    path: Path, channel: str, at: str, applied_dbm: float, span: tuple[int, int] | None,
    last: str, note: str, as_json: bool,
) -> None:  # fmt: skip
    with Record.open(path) as held:
        mean = mean_of(held, channel, span, round(duration_s(last) * NS_PER_S))
        names, simulated = [row.name for row in held.channels()], held.simulated
        notes = refnotes.notes(held, mean, channel, at, applied_dbm)
    request = request_of(mean, channel, at, applied_dbm, note)
    event = event_of(request, names, mean.end_ns)  # a mistake is told before the daemon is asked
    kept_by = _keep(path, request, mean.boot.boot, event, simulated)
    # What is not known stands as an empty text in an event, and as null in a document.
    document = {key: None if value == "" else value for key, value in request.items()}
    document |= {
        "difference_db": mean.mean_dbm - applied_dbm, "kept_by": kept_by, "notes": notes,
    }  # fmt: skip
    del document["do"]
    if as_json:
        print_json(document)
        return
    for line in (*_lines(mean, channel, applied_dbm, document), *(f"  Note: {n}" for n in notes)):
        click.echo(line)


def _strike(path: Path, number: int, note: str, as_json: bool) -> None:
    """Strike out a check by a further event; what was kept stays."""
    with Record.open(path) as held:
        request = refstrikes.request_of(held, number, note)
        names, simulated = [row.name for row in held.channels()], held.simulated
        boot = held.boots()[-1].boot
        last_ns = held.last_reading_ns(boot) or 0
    event = refstrikes.event_of(request, names, last_ns)
    kept_by = _keep(path, request, boot, event, simulated)
    if as_json:
        document = {key: None if value == "" else value for key, value in request.items()}
        del document["do"]
        print_json({**document, "kept_by": kept_by})
        return
    click.echo(f"{request['channel']}: {event.body['text']}")


def level_dbm(text: str) -> float:
    """dBm of a text; ConfigError where it is none."""
    match = re.fullmatch(r"([+-]?\d+(?:\.\d+)?) ?dBm", text.strip(), re.ASCII | re.IGNORECASE)
    value = float(match.group(1)) if match else None
    if value is None or not LEVEL_DBM[0] <= value <= LEVEL_DBM[1]:
        raise ConfigError(f"--level {text!r}: write a level in dBm, for example -30dBm")
    return value


def _keep(path: Path, request: dict[str, object], boot: int, event: Event, simulated: bool) -> str:
    """Through the daemon where one listens; else by this process, which then is the writer.

    A daemon that took it and has not answered may still keep it: that is an error, or it would be
    kept twice.
    """
    try:
        reply = ask(path.with_suffix(".sock"), request)
    except NoDaemonError:
        writer = Writer(path, simulated=simulated)
        try:
            writer.commit(boot, Commit(events=(event,)))
        finally:
            writer.close()
        return "command"
    if not reply.get("ok"):
        raise ConfigError(str(reply.get("error")))
    return "daemon"


def _lines(mean: Mean, channel: str, applied_dbm: float, document: dict[str, object]) -> list[str]:
    where = "the detector's port" if document["at"] == "port" else "the chain's input"
    return [
        f"{channel}: {applied_dbm:.2f} dBm applied at {where}, {mean.mean_dbm:.2f} dBm read",
        f"  from {document['from_utc'] or 'a time not known'} to {document['to_utc'] or '-'},"
        f" {mean.valid_s:.3g} s with readings",
        f"  readings between {mean.lowest_dbm:.2f} and {mean.highest_dbm:.2f} dBm",
        f"  difference {mean.mean_dbm - applied_dbm:+.2f} dB: kept",
    ]
