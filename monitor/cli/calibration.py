"""fieldsill calibration: what a calibration file holds, and what two differ in."""

from __future__ import annotations

import time
from pathlib import Path

import click

from monitor import calcompare, calparts, calreview
from monitor.cli import (
    calibration_applied,
    calibration_chart,
    calibration_files,
    calibration_lines,
)
from monitor.cli.output import print_json
from monitor.core.errors import ConfigError
from monitor.core.montecarlo import FEWEST_DRAWS, MOST_DRAWS
from monitor.core.quantities import frequency_hz

FILE = click.Path(path_type=Path)


@click.group("calibration")
def command() -> None:
    """What a calibration file holds and what it is worth; what two of them differ in."""


command.add_command(calibration_applied.command)
command.add_command(calibration_chart.command)


@command.command("show")
@click.argument("file", type=FILE, required=False)
@click.option("--record", type=FILE, help="A record in place of FILE: the calibration in force.")
@click.option("--at", help="In force then, RFC 3339; default: at the newest start.")
@click.option("--band", help="LOW:HIGH, for example 700MHz:2.7GHz; all of the tables if left out.")
@click.option("--axes", help="For example xyz or z; all that the file serves if left out.")
@click.option("--gain", default="", help="A receiver's gain step, where there are several.")
@click.option("--shares", help="Each axis' part of E squared, for example 0.5,0.3,0.2; or equal.")
@click.option(
    "--monte-carlo", "draws", type=click.IntRange(FEWEST_DRAWS, MOST_DRAWS),
    help="Find the uncertainty by this many draws, too.",
)  # fmt: skip
@click.option("--seed", type=click.IntRange(0), default=1, help="Of the draws.", show_default=True)
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def show(
    file: Path | None,
    record: Path | None,
    at: str | None,
    band: str | None,
    axes: str | None,
    gain: str,
    shares: str | None,
    draws: int | None,
    seed: int,
    as_json: bool,
) -> None:
    """Certificates, tables, response over the band, table of contributions, uncertainty."""
    (held,) = calibration_files.of([] if file is None else [file], record, at, 1)
    shown = calreview.view(held, _axes(axes), _band(band), gain)
    parts = calreview.shares_of(shares, shown.axes)
    document = calreview.document(shown, parts, time.time_ns())
    document["band_given"] = band is not None
    document["monte_carlo"] = (
        calreview.monte_carlo(shown.chain, parts, draws, seed) if draws else None
    )
    if as_json:
        print_json(document)
        return
    for line in calibration_lines.shown(document):
        click.echo(line)


@command.command("compare")
@click.argument("files", metavar="[A] B", type=FILE, nargs=-1)
@click.option("--record", type=FILE, help="A record in place of A: the calibration in force.")
@click.option("--at", help="In force then, RFC 3339; default: at the newest start.")
@click.option("--band", help="LOW:HIGH; all that both files cover if left out.")
@click.option("--axes", help="For example xyz or z; all that both files serve if left out.")
@click.option("--gain", default="", help="A receiver's gain step, where there are several.")
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def compare(
    files: tuple[Path, ...],
    record: Path | None,
    at: str | None,
    band: str | None,
    axes: str | None,
    gain: str,
    as_json: bool,
) -> None:
    """What B has otherwise than A, and what that does to response and uncertainty."""
    held = calibration_files.of(files, record, at, 2)
    both = set(calparts.axes_of(held[0])) & set(calparts.axes_of(held[1]))
    chosen = _axes(axes) or "".join(sorted(both))
    if not chosen:
        raise ConfigError("the calibration files serve no axis in common")
    band_hz = _band(band) or calreview.common_band(held, chosen)
    narrowed = band is None and band_hz != calreview.common_band(held, chosen, drift=False)
    views = [calreview.view(file, chosen, band_hz, gain) for file in held]
    document = {**calcompare.comparison(*views), "band_by_as_found": narrowed}
    if as_json:
        print_json(document)
        return
    for line in calibration_lines.compared(document):
        click.echo(line)


def _axes(text: str | None) -> str | None:
    if text is not None and (not text or set(text) - set("xyz") or len(set(text)) < len(text)):
        raise ConfigError(f"axes {text!r}: write some of the letters xyz, each once")
    return text


def _band(text: str | None) -> tuple[float, float] | None:
    if text is None:
        return None
    low, colon, high = text.partition(":")
    if not colon:
        raise ConfigError(f"band {text!r}: write LOW:HIGH, for example 700MHz:2.7GHz")
    low_hz, high_hz = frequency_hz(low), frequency_hz(high)
    if not low_hz < high_hz:
        raise ConfigError(f"band {text!r}: its low end must lie below its high end")
    return low_hz, high_hz
