"""fieldsill averages: rolling averages of a field strength, of an outside file or of a record."""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path

import click
import numpy as np
from numpy.typing import NDArray

from monitor.cli import averages_record, levels
from monitor.cli.output import print_json
from monitor.core.errors import ConfigError
from monitor.core.readings import NS_PER_S
from monitor.seriesfile import Series, read_series
from monitor.times import text_of

F = NDArray[np.float64]
MOST_BLOCKS = 5_000_000


@dataclass(frozen=True, slots=True)
class Steps:
    """How to average, ns."""

    averaging_ns: int
    every_ns: int
    hold_ns: int


@dataclass(frozen=True, slots=True)
class Averages:
    """Per window end (n,): V/m, nan where nothing is valid.

    e_rms is right; mean_of_e and mean_of_db are what averaging V/m and dB would have given.
    """

    end_ns: NDArray[np.int64]
    e_rms: F
    valid_share: F
    e_max: F
    mean_of_e: F
    mean_of_db: F


@click.command("averages")
@click.argument("file", required=False, type=click.Path(path_type=Path))
@click.option("--averaging", default="360", show_default=True, help="Seconds, or 6min, 24h.")
@click.option("--every", help="Step from end to end, seconds; 60 if left out. Of a FILE only.")
@click.option(
    "--hold", help="Longest time that a reading of a FILE stands for; three median intervals."
)
@click.option("--record", type=click.Path(path_type=Path), help="A record; the site's if left out.")
@click.option("--from", "start", help="Begin of a record's span, RFC 3339.")
@click.option("--to", "end", help="End of a record's span, RFC 3339.")
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def command(
    file: Path | None,
    averaging: str,
    every: str | None,
    hold: str | None,
    record: Path | None,
    start: str | None,
    end: str | None,
    as_json: bool,
) -> None:
    """Means of E squared over a sliding window [end - averaging, end).

    FILE is CSV with a header that holds time,e_v_per_m. Without it, the windows of a record.
    """
    averaging_s = levels.duration_s(averaging)
    if file is None:
        if every or hold:
            raise ConfigError("--every and --hold go with a FILE; a record's averages are as kept")
        averages_record.show(record, averaging_s, start, end, as_json)
        return
    if record or start or end:
        raise ConfigError("--record, --from and --to go with a record; leave FILE out, or them")
    series = read_series(file)
    steps = _steps(file, series, averaging_s, levels.duration_s(every or "60"), hold)
    found = _average(series, steps)
    if as_json:
        print_json({"averages": _entries(series, found), "hold_s": steps.hold_ns / NS_PER_S})
    else:
        _print(series, found, steps)


def _steps(
    file: Path, series: Series, averaging_s: float, every_s: float, hold: str | None
) -> Steps:
    if hold is not None:
        hold_s = levels.duration_s(hold)
    elif series.times_ns.size > 1:
        hold_s = 3.0 * float(np.median(np.diff(series.times_ns))) / NS_PER_S
    else:
        raise ConfigError(f"{file}: one reading has no interval; give --hold SECONDS")
    ns = [round(seconds * NS_PER_S) for seconds in (averaging_s, every_s, hold_s)]
    if min(ns) <= 0:
        raise ConfigError("averaging, every and hold must be at least a nanosecond")
    span_ns = int(series.times_ns[-1] - series.times_ns[0]) + ns[0] + ns[2]
    if span_ns // math.gcd(ns[0], ns[1]) > MOST_BLOCKS:
        raise ConfigError(
            f"{file}: too many steps; choose an --every that divides the averaging time, or"
            " a coarser one, or cut the file"
        )
    return Steps(*ns)


def _average(series: Series, steps: Steps) -> Averages:
    # Loaded here: what reads a record needs none of it.
    from monitor.core.series import rolling_e2

    def rolling(values: F) -> tuple[NDArray[np.int64], F, F, F]:
        got = rolling_e2(series.times_ns, values, steps.averaging_ns, steps.every_ns, steps.hold_ns)
        return got.end_ns, got.e2_mean, got.valid_share, got.e2_max

    e = series.e_v_per_m
    end_ns, e2_mean, valid_share, e2_max = rolling(e * e)
    with np.errstate(divide="ignore", invalid="ignore"):
        mean_of_db = rolling(20.0 * np.log10(e))[1]
    return Averages(
        end_ns,
        np.sqrt(e2_mean),
        valid_share,
        np.sqrt(e2_max),
        rolling(e)[1],
        10 ** (mean_of_db / 20),
    )


def _end(series: Series, end_ns: int) -> str | int | float:
    """A window's end in the file's own unit."""
    if series.in_utc:
        return text_of(end_ns)
    return end_ns // NS_PER_S if end_ns % NS_PER_S == 0 else end_ns / NS_PER_S


def _entries(series: Series, found: Averages) -> list[dict[str, object]]:
    columns = (found.end_ns, found.e_rms, found.valid_share, found.e_max)
    return [
        {
            "end": _end(series, end_ns),
            "e_rms_v_per_m": e_rms,
            "valid_share": share,
            "e_max_v_per_m": e_max,
        }
        for end_ns, e_rms, share, e_max in zip(*(column.tolist() for column in columns))
    ]


def _print(series: Series, found: Averages, steps: Steps) -> None:
    averaging_s, hold_s = steps.averaging_ns / NS_PER_S, steps.hold_ns / NS_PER_S
    click.echo(f"windows of {averaging_s:g} s; a reading holds at most {hold_s:g} s")
    click.echo(
        f"{'end':>24} {'E rms V/m':>10} {'valid':>7} {'E max V/m':>10}   what averaging would give:"
        " V/m, dB"
    )
    columns = (found.end_ns, found.e_rms, found.valid_share, found.e_max)
    wrong = (found.mean_of_e, found.mean_of_db)
    for row in zip(*(column.tolist() for column in (*columns, *wrong))):
        end_ns, e_rms, share, e_max, of_e, of_db = row
        click.echo(
            f"{_end(series, end_ns)!s:>24} {_figure(e_rms):>10} {share:>7.1%} {_figure(e_max):>10}"
            f"   {_mistake(of_e, e_rms)}; {_mistake(of_db, e_rms)}"
        )
    for line in _summary(found):
        click.echo(line)


def _figure(value: float) -> str:
    return "-" if math.isnan(value) else f"{value:.4g}"


def _mistake(wrong: float, right: float) -> str:
    """A wrong average, and how wrong: in % of E and in dB."""
    if math.isnan(right):
        return "-"
    if right == 0.0:
        return "0"
    if wrong == 0.0 or math.isnan(wrong):
        return "undefined (a reading of 0 has no dB)"
    share = wrong / right
    return f"{wrong:.4g} ({share - 1.0:+.1%}, {20.0 * math.log10(share):+.2f} dB)"


def _summary(found: Averages) -> list[str]:
    valid = np.isfinite(found.e_rms) & (found.e_rms > 0.0)
    if not valid.any():
        return ["No window has a valid field strength above 0."]
    top = float(np.max(found.e_rms[valid]))
    lines = [f"Strongest window: {top:.4g} V/m. Exposure averages E squared, never V/m or dB:"]
    for name, wrong in (("V/m", found.mean_of_e), ("dB", found.mean_of_db)):
        usable = valid & (wrong > 0.0)
        if usable.any():
            share = float(np.min(wrong[usable] / found.e_rms[usable]))
            lines.append(
                f"  averaging {name} would read up to {1.0 - share:.1%} of E"
                f" ({-20.0 * math.log10(share):.2f} dB) too low"
            )
        if name == "dB" and int(np.count_nonzero(valid & ~usable)):
            count = int(np.count_nonzero(valid & ~usable))
            lines.append(
                f"  averaging dB is undefined in {count} windows: a reading of 0 has no dB"
            )
    return lines
