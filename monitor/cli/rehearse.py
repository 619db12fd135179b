"""fieldsill rehearse: the whole chain on a simulated board; every reading is invented."""

from __future__ import annotations

import os
import re
import shutil
import signal
import sys
import threading
import time
from datetime import UTC, datetime
from pathlib import Path

import click

from monitor import control, rehearsal, supervise
from monitor.core.errors import ConfigError, DeviceError, FieldsillError

_SPAN = re.compile(r"^(\d+(?:\.\d+)?)(s|min|h|d)$")
_LONGEST_S = 10 * 365 * 86_400.0
_SECONDS = {"s": 1.0, "min": 60.0, "h": 3600.0, "d": 86400.0}


@click.command("rehearse")
@click.option(
    "--scenario",
    default="busy-day",
    show_default=True,
    help=f"{', '.join(rehearsal.scenarios())}, or a file of one.",
)
@click.option("--history", default="24h", show_default=True, help="Made at full speed: 24h, 90d.")
@click.option("--seed", default=1, show_default=True, help="The same seed, the same readings.")
@click.option("--port", type=click.IntRange(0, 65535), default=0, help="Pages; 0: a free one.")
@click.option("--folder", type=click.Path(path_type=Path), help="New folder for everything.")
@click.option("--exit", "exit_at_end", is_flag=True, help="End after the history; keep the record.")
def command(
    scenario: str, history: str, seed: int, port: int, folder: Path | None, exit_at_end: bool
) -> int:
    """Run daemon and pages over a simulated detector board in an invented place."""
    started = datetime.now(UTC).replace(microsecond=0)
    plan = rehearsal.Rehearsal(
        (folder or _new_folder(started)).absolute(),
        scenario,
        seed,
        span_s(history),
        port or rehearsal.free_port(),
        started,
    )
    _make_site(plan)
    stop = threading.Event()
    signal.signal(signal.SIGTERM, lambda *_: stop.set())
    signal.signal(signal.SIGINT, lambda *_: stop.set())
    return _run(plan, stop, exit_at_end)


def span_s(text: str) -> float:
    """Seconds of a span such as 90min, 24h or 90d, ten years at most; ConfigError otherwise."""
    match = _SPAN.match(text.strip())
    if match is None:
        raise ConfigError(f"--history {text!r}: not a span; write for example 30min, 24h or 90d")
    seconds = float(match.group(1)) * _SECONDS[match.group(2)]
    if seconds > _LONGEST_S:
        raise ConfigError(f"--history {text!r}: too long; ten years (3650d) at most")
    return seconds


def _new_folder(started: datetime) -> Path:
    base = os.environ.get("XDG_STATE_HOME") or str(Path.home() / ".local" / "state")
    return Path(base) / "fieldsill" / f"rehearsal-{started:%Y%m%dT%H%M%SZ}-{os.getpid()}"


def _make_site(plan: rehearsal.Rehearsal) -> None:
    """The folder and its site file; nothing of them stays where that fails."""
    try:
        rehearsal.write_site(plan)
    except FileExistsError:
        raise ConfigError(f"--folder {plan.folder}: is there already; name a new one") from None
    except OSError as error:
        # The folder was not there before: what stands in it is ours.
        shutil.rmtree(plan.folder, ignore_errors=True)
        raise DeviceError(
            f"--folder {plan.folder}: cannot be made ({error.strerror}); name another"
        ) from None


def _run(plan: rehearsal.Rehearsal, stop: threading.Event, exit_at_end: bool) -> int:
    try:
        board = rehearsal.start_board(plan)
    except FieldsillError:
        shutil.rmtree(plan.folder)
        raise
    site = str(plan.site_path)
    measure = supervise.Child(
        "measure",
        ["monitor", "measure", "--site", site, "--history", f"{plan.history_s:g}"],
        lasting=False,
    )
    serve = supervise.Child("serve", ["monitor", "serve", "--site", site])
    children = [measure] if exit_at_end else [measure, serve]
    _announce(plan, exit_at_end)
    began_s = time.monotonic()
    try:
        for child in children:
            child.start(began_s)
        _show_progress(plan, measure, stop)
        took_s = time.monotonic() - began_s
        if not stop.is_set() and measure.code() is None:
            click.echo(f"History of {plan.history_s / 3600:g} h written in {took_s:.1f} s.")
            measure.lasting = not exit_at_end
            if not exit_at_end:
                click.echo(f"Pages: http://127.0.0.1:{plan.port}/   Stop with Ctrl-C.")
        if exit_at_end:
            return measure.code() or 0
        return supervise.watch(children, stop, lambda line: click.echo(line, err=True))
    finally:
        supervise.end(children)
        board.terminate()
        board.wait()
        if stop.is_set():
            click.echo(supervise.stopped(plan.record_path))


def _announce(plan: rehearsal.Rehearsal, exit_at_end: bool) -> None:
    click.echo("REHEARSAL: the place, the transmitters and every reading are invented.")
    click.echo(f"Scenario {plan.scenario}, seed {plan.seed}; board simulated on {plan.device}")
    click.echo(f"Record: {plan.record_path}   Truth: {plan.folder / 'truth.csv'}")
    if not exit_at_end:
        click.echo("The pages are for this machine only and ask for no account.")
    click.echo(f"Stop: Ctrl-C.   Delete: rm -r {plan.folder}")


def _show_progress(
    plan: rehearsal.Rehearsal, measure: supervise.Child, stop: threading.Event
) -> None:
    """Follow the backfill until it is done, the daemon has ended or somebody stops it."""
    path = plan.record_path.with_suffix(".sock")
    bar = click.progressbar(
        length=100, label="History", file=sys.stderr, show_eta=True, show_percent=True
    )
    shown = 0
    with bar:
        while not stop.wait(0.2) and measure.code() is None:
            try:
                now = control.ask(path, {"do": "now"}).get("now")
            except DeviceError:
                continue
            done = _done(now)
            bar.update(round(100 * done) - shown)
            shown = round(100 * done)
            if done >= 1.0:
                return


def _done(now: object) -> float:
    """Share of the history that has been judged."""
    if not isinstance(now, dict):
        return 0.0
    progress = now.get("progress")
    if progress is None:
        return 1.0
    return min(float(progress["done_s"]) / float(progress["total_s"]), 1.0)
