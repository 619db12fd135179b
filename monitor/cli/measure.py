"""fieldsill measure: the daemon alone."""

from __future__ import annotations

import signal
import threading
from pathlib import Path
from types import FrameType

import click

from monitor.config import Site, default_site_path, load_site
from monitor.core.errors import RecordError


@click.command("measure")
@click.option("--site", "site_file", type=click.Path(path_type=Path), help="Site file.")
@click.option("--exit", "exit_at_end", is_flag=True, help="End when a recorded series has ended.")
@click.option("--history", "history_s", type=float, hidden=True, help="Length of a rehearsal, s.")
def command(site_file: Path | None, exit_at_end: bool, history_s: float | None) -> None:
    """Measure, average, judge, alarm and record, without the pages."""
    measure(load_site(default_site_path(site_file)), exit_at_end, history_s)


def measure(site: Site, exit_at_end: bool, history_s: float | None) -> None:
    """Run the daemon until a signal, or until a recorded series has ended."""
    # Late: a wrong site file needs neither numpy nor a front end to say so.
    from monitor import control, wiring

    stop = threading.Event()

    def on_signal(number: int, frame: FrameType | None) -> None:
        stop.set()

    signal.signal(signal.SIGTERM, on_signal)
    signal.signal(signal.SIGINT, on_signal)
    daemon = wiring.daemon_for(
        site, history_s=history_s, say=lambda line: click.echo(line, err=True)
    )
    server = control.Server(site.control_path, daemon.answer)
    try:
        daemon.run(stop, exit_at_end)
    finally:
        server.close()
    if daemon.trouble:
        raise RecordError(daemon.trouble)
