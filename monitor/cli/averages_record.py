"""The averages that a record holds, as fieldsill averages prints them."""

from __future__ import annotations

import math
import re
from decimal import ROUND_CEILING, ROUND_FLOOR, Context
from pathlib import Path
from typing import TYPE_CHECKING

import click
import numpy as np
from numpy.typing import NDArray

from monitor.cli.output import print_json
from monitor.core import flags
from monitor.core.errors import ConfigError
from monitor.core.interval import interval
from monitor.times import text_of, utc_ns_of

if TYPE_CHECKING:
    from monitor.record.types import History

FIRST_NS, LAST_NS = 0, 1 << 62
MOST_POINTS = 1 << 40
"""More points than any record holds: every window comes by itself, none is merged."""


def show(
    record: Path | None, averaging_s: float, start: str | None, end: str | None, as_json: bool
) -> None:
    """Print the windows of that averaging time that end in (start, end] of UTC."""
    from monitor.record.reader import Record

    first, last = utc_ns_asked(start, "--from", FIRST_NS), utc_ns_asked(end, "--to", LAST_NS)
    if not first < last:
        raise ConfigError("--from must be before --to")
    if averaging_s != int(averaging_s):
        raise ConfigError(
            f"--averaging {averaging_s:g}: a record holds whole seconds, 360 and 1800"
        )
    with Record.open(record or site_record()) as held:
        history = held.history(first, last, int(averaging_s), MOST_POINTS)
        simulated = held.simulated
    rows = _entries(history)
    if as_json:
        print_json({"simulated": simulated, "averaging_s": averaging_s, "averages": rows})
        return
    if simulated:
        click.echo("SIMULATED: these figures are invented")
    click.echo(
        f"{'end':>24} {'E low':>9} {'E rms':>9} {'E high':>9} {'E max':>9} V/m  {'U dB':>6}"
        f" {'valid':>7}  notes"
    )
    for row in rows:
        click.echo(_line(row))
    if not rows:
        click.echo(f"no window of {averaging_s:g} s ends in that span")


def site_record() -> Path:
    """The record of the site file in use."""
    from monitor.config import default_site_path, load_site

    return load_site(default_site_path(None)).record_path


def utc_ns_asked(text: str | None, option: str, default: int) -> int:
    """UTC in ns of what stands after an option, a time or a day; ConfigError names the option."""
    if text is None:
        return default
    if re.fullmatch(r"\d{4}-\d\d-\d\d", text, re.ASCII):
        text += "T00:00:00Z"
    try:
        return utc_ns_of(text)
    except ValueError as error:
        raise ConfigError(f"{option}: {error}") from error


def _entries(history: History) -> list[dict[str, object]]:
    columns = {
        "e_rms_v_per_m": history.e_mean,
        "valid_share": history.valid_share,
        "e_max_v_per_m": history.e_max,
        "e_low_v_per_m": history.e_low,
        "e_high_v_per_m": history.e_high,
        "expanded_uncertainty_db": history.u_db,
        "widened_by_drift_db": history.widened_by_drift_db,
        "at_least_v_per_m": _at_least(history),
    }
    rows = zip(history.utc_ns.tolist(), *(column.tolist() for column in columns.values()))
    return [
        _entry(end_ns, dict(zip(columns, values)), bits)
        for (end_ns, *values), bits in zip(rows, history.flags.tolist())
    ]


def _at_least(history: History) -> NDArray[np.float64]:
    """Lower end of the interval with U (n,), V/m."""
    e2_low = history.e_low**2
    return np.sqrt(interval(e2_low, e2_low, history.base_u_db, history.added_e2).low)


def _entry(end_ns: int, figures: dict[str, object], bits: int) -> dict[str, object]:
    """A window below its detection limit has no mean: it has what it is below of, unless logs were
    averaged, for then the field may lie above. One that is a lower bound has what it is at the
    least with U counted; with fewer than three axes both are of the component."""
    below, above = bits & flags.UPPER_BOUND, bits & flags.LOWER_BOUND
    open_above = above & ~flags.Flag.COMPONENT_ONLY
    bound = {
        "below_v_per_m": figures["e_high_v_per_m"] if below and not open_above else None,
        "at_least_v_per_m": figures["at_least_v_per_m"] if above and not below else None,
    }
    unknown = {"e_rms_v_per_m": None} if below else {}
    return {"end": text_of(end_ns), **figures, **unknown, **bound, "flags": flags.words(bits)}


def _line(row: dict[str, object]) -> str:
    names = ("e_low_v_per_m", "e_rms_v_per_m", "e_high_v_per_m", "e_max_v_per_m")
    said = {name: _figure(row[name]) for name in names}
    if row["below_v_per_m"] is not None:
        said["e_rms_v_per_m"] = f"<{_towards(row['below_v_per_m'], ROUND_CEILING)}"
    elif row["at_least_v_per_m"] is not None:
        said["e_rms_v_per_m"] = f">={_towards(row['at_least_v_per_m'], ROUND_FLOOR)}"
        said["e_high_v_per_m"] = "-"  # by gaps and band alone; nothing bounds it above
    figures = " ".join(f"{said[name]:>9}" for name in names)
    words = list(row["flags"])  # type: ignore[call-overload]
    drift_db = float(row["widened_by_drift_db"])  # type: ignore[arg-type]
    if drift_db:
        words.append(f"U widened by a drift of {drift_db:.2g} dB that was found later")
    return (
        f"{row['end']!s:>24} {figures}      {_figure(row['expanded_uncertainty_db']):>6}"
        f" {row['valid_share']:>7.1%}  {', '.join(words)}"
    )


def _towards(value: object, rounding: str) -> str:
    """A bound, never more than what is known."""
    number = float(value)  # type: ignore[arg-type]
    if not math.isfinite(number):
        return "-"
    return _figure(float(Context(prec=4, rounding=rounding).create_decimal_from_float(number)))


def _figure(value: object) -> str:
    number = math.nan if value is None else float(value)  # type: ignore[arg-type]
    return f"{number:.4g}" if math.isfinite(number) else "-"
