"""fieldsill serve: the pages alone, over a record and its daemon."""

from __future__ import annotations

import ipaddress
import signal
import sys
from pathlib import Path
from types import FrameType
from typing import Any

import click

from monitor.config import default_site_path, load_site
from monitor.core.errors import ConfigError, DeviceError

THREADS = 4


@click.command("serve")
@click.option("--site", type=click.Path(path_type=Path), help="Site file.")
@click.option("--record", type=click.Path(path_type=Path), help="Record; default: the site's.")
@click.option("--host", help="Address to listen on; default: the site's, else 127.0.0.1.")
@click.option("--port", type=click.IntRange(0, 65535), help="Port; 0 takes a free one.")
def command(site: Path | None, record: Path | None, host: str | None, port: int | None) -> None:
    """Serve the pages: now, history and spectrum. Each part of the monitor can end alone."""
    settings = _settings(site, record)
    host = host or settings.pop("host")
    port = settings.pop("port") if port is None else port
    settings.pop("host", None)
    settings.pop("port", None)
    _serve(settings, host, port)


def _settings(site: Path | None, record: Path | None) -> dict[str, Any]:
    """Arguments of create_app, and host and port; a record alone needs no site file."""
    if record is not None and site is None:
        record = record.absolute()
        return {
            "record_path": record,
            "control_path": record.with_suffix(".sock"),
            "host": "127.0.0.1",
            "port": 8080,
        }
    known = load_site(default_site_path(site))
    record_path = known.record_path if record is None else record.absolute()
    return {
        "record_path": record_path,
        "control_path": record_path.with_suffix(".sock"),
        "name": known.name,
        "place": known.place,
        "occupancy": known.occupancy,
        "silence_after_s": known.silence_after_s,
        "alerts": known.alerts,
        "host": known.host,
        "port": known.port,
    }


def is_loopback(host: str) -> bool:
    """Whether only this machine reaches an address or name."""
    if host == "localhost":
        return True
    try:
        return ipaddress.ip_address(host).is_loopback
    except ValueError:
        return False


def _serve(settings: dict[str, Any], host: str, port: int) -> None:
    # Imported here: a command that serves nothing must not pay for the web server.
    from waitress.server import create_server  # type: ignore[import-untyped]

    from dashboard.app import create_app

    loopback = is_loopback(host)
    app = create_app(**settings, loopback=loopback)
    try:
        server = create_server(app, host=host, port=port, threads=THREADS, ident=None)
    except OSError as error:
        raise DeviceError(
            f"{host}:{port}: cannot listen there: {error.strerror or error}; "
            "name another with --host and --port (0 takes a free one)"
        ) from error
    except ValueError as error:
        raise ConfigError(
            f"--host {host}: is neither an address nor a name of this machine; "
            "write for example 127.0.0.1"
        ) from error
    if not loopback:
        click.echo(
            f"fieldsill: {host} can be reached by other machines: whoever reaches it reads the "
            "pages without an account; alarms cannot be confirmed or muted there",
            err=True,
        )
    signal.signal(signal.SIGTERM, _end)
    shown = f"[{host}]" if ":" in host else host
    click.echo(f"Pages: http://{shown}:{server.effective_port}/")
    sys.stdout.flush()
    try:
        server.run()
    finally:
        server.close()


def _end(number: int, frame: FrameType | None) -> None:
    raise SystemExit(0)
