"""fieldsill check: does everything that a site file names fit together? Nothing is written."""

from __future__ import annotations

import click

from monitor.checks import findings, refuse_future
from monitor.cli.levels import Within
from monitor.cli.output import print_json
from monitor.clock import SystemClock
from monitor.config import Site, default_site_path, load_site
from monitor.inforce import WRONG, would_go_on


@click.command("check")
@click.option("--site", "site_file", help="Site file; else $FIELDSILL_SITE, ./site.toml, /etc.")
@click.option(
    "--listen",
    "listen_s",
    type=Within(0.0, 600.0),
    help="Seconds to listen to the sensor, 0: not at all; default: until a reading may be there.",
)
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def command(site_file: str | None, listen_s: float | None, as_json: bool) -> None:
    """Read the site file and all that it names; say what fits and what cannot be judged.

    Ends with 0 where the site can run, with 2 or 3 and one line where it cannot.
    """
    site = load_site(default_site_path(site_file))
    # Late: a wrong site file needs no front end to say so.
    from monitor import wiring

    now_utc_ns = SystemClock().utc_ns()
    try:
        found = list(findings(site, now_utc_ns, wiring.check, wiring.averaging_of))
    except WRONG:
        _refuse_calibration(site, now_utc_ns)
        raise
    if listen_s != 0.0 and site.sensor_kind not in wiring.RECORDED:
        found += wiring.listen(site, listen_s)
    if as_json:
        rows = [{"where": f.where, "text": f.text, "ok": f.ok} for f in found]
        judged = all(f.ok for f in found)
        print_json({"site": str(site.path), "runs": True, "ok": judged, "findings": rows})
        return
    width = max(len(finding.where) for finding in found)
    for finding in found:
        click.echo(f"{'ok  ' if finding.ok else 'note'}  {finding.where:{width}}  {finding.text}")


def _refuse_calibration(site: Site, now_utc_ns: int) -> None:
    """What is wrong with the calibration file, if that is at fault, and what a run would do."""
    try:
        refuse_future(site, now_utc_ns)
    except WRONG as error:
        instead = would_go_on(site)
        if instead:
            raise type(error)(f"{error}; {instead}") from error
