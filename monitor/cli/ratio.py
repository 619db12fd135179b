"""fieldsill ratio: total exposure ratios of levels at known frequencies."""

from __future__ import annotations

from collections.abc import Sequence

import click

from monitor import limitsets
from monitor.cli import levels
from monitor.cli.output import print_json
from monitor.core.errors import ConfigError
from monitor.core.limits import POPULATIONS, UNITS, frequency_text
from monitor.core.total import H_NEEDED_BELOW_HZ, Level, Term, Total, totals

CAUTION = (
    "The levels are taken as means over the averaging time, as they were given. Which limits"
    " apply is for local codes and licensed practice to say."
)


@click.command("ratio")
@click.option("--set", "set_id", required=True, help="Limit set, for example icnirp-2020.")
@click.option("--population", type=click.Choice(POPULATIONS), required=True)
@click.option(
    "--at", "at", multiple=True, required=True, help="FREQUENCY=LEVEL, for example 900MHz=3.2V/m."
)
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def command(set_id: str, population: str, at: tuple[str, ...], as_json: bool) -> None:
    """Exposure ratios of levels at known frequencies, summed for each scope of a limit set."""
    held = limitsets.load(set_id)
    given = [Level(*levels.level_at(text)) for text in at]
    found = totals(held, population, given)
    if not found:
        raise ConfigError(f"{set_id}: nothing to compare for {population}; give E or S levels")
    alone = _alone(given)
    if as_json:
        print_json(
            {
                "set": held.id,
                "edition": held.edition,
                "population": population,
                "cannot_be_decided": alone or None,
                "totals": [_document(total) for total in found],
            }
        )
        return
    click.echo(f"{held.id}, edition {held.edition}, {population.replace('_', ' ')}")
    for total in found:
        _print(total, _beside(total, alone, len(given)))
    click.echo(CAUTION)


def _alone(given: Sequence[Level]) -> str:
    """Why no sum decides anything: "E alone" below 30 MHz; "" where nothing stands in the way."""
    low = [level for level in given if level.frequency_hz < H_NEEDED_BELOW_HZ]
    lone = set()
    for hz in {level.frequency_hz for level in low}:
        have = {level.quantity for level in low if level.frequency_hz == hz}
        lone |= set() if have >= {"E", "H"} else have
    return f"{' or '.join(sorted(lone))} alone" if lone else ""


def _document(total: Total) -> dict[str, object]:
    return {
        "scope": total.scope,
        "averaging_s": total.averaging_s,
        "exposure_ratio": total.exposure_ratio,
        "verified": total.verified,
        "notes": list(total.notes),
        "terms": [
            {
                "frequency_hz": term.frequency_hz,
                "quantity": term.quantity,
                "value": term.value,
                "limit": term.limit,
                "unit": UNITS[term.quantity],
                "exposure_ratio": term.exposure_ratio,
                "clause": term.clause,
                "verified": term.verified,
                "note": term.note or None,
            }
            for term in total.terms
        ],
    }


def _print(total: Total, beside: str) -> None:
    if total.averaging_s is None:
        time = "averaging times differ"
    elif total.averaging_s == 0.0:
        time = "not averaged"
    else:
        time = f"mean over {total.averaging_s / 60.0:.4g} min"
    click.echo(
        f"\n{total.scope.replace('_', '-')}, {time}: total exposure ratio"
        f" {total.exposure_ratio:.4g} ({beside})"
    )
    for term in total.terms:
        click.echo("  " + _line(term))
    for note in total.notes:
        click.echo(f"  Note: {note}")
    if not total.verified:
        click.echo("  Note: figures from memory; not confirmed against the published text")


def _beside(total: Total, alone: str, given: int) -> str:
    """Where the sum stands, and no more than the levels given allow to say."""
    whole = len(total.terms) == given or total.scope == "instantaneous"
    what = "sum" if whole else "sum of a part"
    at = "above" if total.exposure_ratio > 1.0 else "at" if total.exposure_ratio == 1.0 else "below"
    if not alone:
        return f"{what} {at} 1, without uncertainty"
    unsure = f"cannot be decided ({alone})"
    return f"{what} above 1; {unsure}" if at == "above" else unsure


def _line(term: Term) -> str:
    unit = UNITS[term.quantity]
    text = (
        f"{frequency_text(term.frequency_hz)}: {term.quantity} {term.value:.4g} {unit} against"
        f" {term.limit:.4g} {unit} ({term.clause}): {term.exposure_ratio:.4g}"
    )
    return f"{text} [{term.note}]" if term.note else text
