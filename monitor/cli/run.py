"""fieldsill run: the daemon and the pages, each started again if it ends."""

from __future__ import annotations

import functools
import signal
import threading
from pathlib import Path

import click

from monitor import checks, supervise
from monitor.clock import SystemClock
from monitor.config import default_site_path, load_site


@click.command("run")
@click.option("--site", "site_file", type=click.Path(path_type=Path), help="Site file.")
@click.option("--exit", "exit_at_end", is_flag=True, help="End when a recorded series has ended.")
def command(site_file: Path | None, exit_at_end: bool) -> int:
    """Run both halves of the monitor: the daemon that measures and the pages that show."""
    site = load_site(default_site_path(site_file))
    clock = SystemClock()
    # A clock that nothing has set may be years behind; a box with a record goes on, and says so.
    if clock.uncertainty_ns() is not None and not site.record_path.exists():
        checks.refuse_future(site, clock.utc_ns())
    stop = threading.Event()
    signal.signal(signal.SIGTERM, lambda *_: stop.set())
    signal.signal(signal.SIGINT, lambda *_: stop.set())
    arguments = ["monitor", "measure", "--site", str(site.path)] + ["--exit"] * exit_at_end
    measure = supervise.Child("measure", arguments, finishes=exit_at_end)
    serve = supervise.Child("serve", ["monitor", "serve", "--site", str(site.path)])
    serve.may_start = functools.partial(supervise.under_way, measure, site.control_path)
    children = [measure, serve]
    try:
        return supervise.watch(children, stop, lambda line: click.echo(line, err=True))
    finally:
        supervise.end(children)
        if stop.is_set():
            click.echo(supervise.stopped(site.record_path))
