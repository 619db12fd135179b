"""fieldsill calibration chart: the reference checks of a record on a control chart."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import click

from monitor.cli.averages_record import site_record
from monitor.cli.levels import Within
from monitor.cli.output import print_json
from monitor.core.control_chart import ACTION_SIGMA, BASELINE
from monitor.record.reader import Record
from monitor.refchart import charts

Entry = Mapping[str, Any]
HALF_WIDTH = 16
"""Characters on either side of the centre."""
REACH_SIGMA = 4.0


@click.command("chart")
@click.option("--record", type=click.Path(path_type=Path), help="Default: the site's.")
@click.option("--channel", help="All if left out.")
@click.option(
    "--repeatability", "floor_db", type=Within(0.0, 10.0),
    help="Least sigma, dB; the calibration's lines of kind repeatability if left out.",
)  # fmt: skip
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def command(record: Path | None, channel: str | None, floor_db: float | None, as_json: bool) -> int:
    """Reference checks against their warning and action lines.

    Exit code 1 where the last check of a chart lies beyond an action line.
    """
    with Record.open(record or site_record()) as held:
        found, simulated = charts(held, channel, floor_db), held.simulated
    if as_json:
        print_json({"simulated": simulated, "charts": found})
    else:
        if simulated:
            click.echo("SIMULATED: these figures are invented")
        if not found:
            click.echo("no reference check yet; fieldsill calibration applied keeps one")
        for one in found:
            click.echo("\n".join(lines(one)))
    return 1 if any(one["action"] for one in found) else 0


def lines(one: Entry) -> Iterator[str]:
    """A chart for people: its lines, then one row a check with its place between them."""
    where = "detector's port" if one["at"] == "port" else "chain's input"
    yield f"{one['channel']}, level applied at the {where}: read less applied, dB"
    if one["checks_on_other_tables"]:
        yield f"  {one['checks_on_other_tables']} earlier checks rest on other detector tables"
    if one["centre_db"] is None:
        yield f"  {len(one['checks'])} of the {BASELINE} checks that make the lines"
    else:
        least = ", the least allowed" if one["sigma_is_least"] else ""
        (low, high), (lowest, highest) = one["warning_db"], one["action_db"]
        yield f"  centre {one['centre_db']:+.3f}, sigma {one['sigma_db']:.3f}{least}"
        yield f"  warning beyond {low:+.3f} and {high:+.3f}"
        yield f"  action beyond {lowest:+.3f} and {highest:+.3f}"
        yield f"  {'':<25} {'':>8}  ! action line   : warning line   | centre   o check"
    for check in one["checks"]:
        yield (
            f"  {_name(check)} {check['difference_db']:>+8.3f}"
            f"  {_row(one, check['difference_db'])}  {_word(check, one['centre_db'])}"
        ).rstrip()
    for check in one["struck"]:
        why = f": {check['why']}" if check["why"] else ""
        yield f"  {_name(check)} {check['difference_db']:>+8.3f}  struck{why}"
    if one["action"]:
        yield (
            "  The last check calls for action: look for what changed (connector, cable, detector)"
            " and have the chain calibrated before its figures are used."
        )


def _name(check: Entry) -> str:
    """The check's number, by which it can be struck, and when it was."""
    return f"{check['number']:>4} {check['to'] or 'time not known':<20.20}"


def _word(check: Entry, centre_db: float | None) -> str:
    if centre_db is None:
        return ""
    side = "above" if check["difference_db"] > centre_db else "below"
    words = {"within": "within", "beyond a warning line": f"WARNING, {side}"}
    return words.get(check["state"], f"ACTION, {side}")


def _row(one: Entry, value: float) -> str:
    """Where a check lies between the lines; beyond the row's ends stands an arrow."""
    if one["centre_db"] is None:
        return ""
    row = [" "] * (2 * HALF_WIDTH + 1)
    for sign, figures in (("!", one["action_db"]), (":", one["warning_db"])):
        for figure in figures:
            row[_column(one, figure)] = sign
    row[HALF_WIDTH] = "|"
    at = _column(one, value)
    row[max(0, min(at, 2 * HALF_WIDTH))] = "<" if at < 0 else ">" if at > 2 * HALF_WIDTH else "o"
    return "".join(row)


def _column(one: Entry, value: float) -> int:
    scale_db: float = (one["action_db"][1] - one["centre_db"]) / ACTION_SIGMA * REACH_SIGMA
    if scale_db == 0.0:
        return HALF_WIDTH if value == one["centre_db"] else -1 if value < one["centre_db"] else 99
    off_db: float = value - one["centre_db"]
    return HALF_WIDTH + round(off_db / scale_db * HALF_WIDTH)
