"""fieldsill limits: what the published tables allow, at a frequency or as a whole."""

from __future__ import annotations

from collections.abc import Sequence

import click

from monitor import limitsets
from monitor.cli import levels
from monitor.cli.output import print_json
from monitor.core.limits import (
    POPULATIONS,
    LimitRow,
    LimitSet,
    frequency_text,
    rows_at,
    span_text,
)
from monitor.core.quantities import frequency_hz

MEMORY = "from memory"


@click.command("limits")
@click.option("--set", "set_id", help="Limit set, for example icnirp-2020; all where left out.")
@click.option("--population", type=click.Choice(POPULATIONS), help="Both where left out.")
@click.option("--frequency", help="For example 900MHz; the whole tables where left out.")
@click.option("--duration", help="For rows on brief exposures: how long, for example 10s.")
@click.option("--json", "as_json", is_flag=True, help="One JSON document.")
def command(
    set_id: str | None,
    population: str | None,
    frequency: str | None,
    duration: str | None,
    as_json: bool,
) -> None:
    """Limits and reference levels at a frequency, or the tables as they are held."""
    sets = [limitsets.load(name) for name in ([set_id] if set_id else limitsets.available())]
    if frequency is None:
        document: dict[str, object] = {
            "limits": [row for held in sets for row in _whole(held, population)]
        }
    else:
        seconds = levels.duration_s(duration) if duration else None
        document = _at(sets, population, frequency_hz(frequency), seconds)
    if as_json:
        print_json(document)
        return
    _print(document, sets)


def _at(
    sets: Sequence[LimitSet], population: str | None, hz: float, duration_s: float | None
) -> dict[str, object]:
    found: list[dict[str, object]] = []
    outside: dict[str, str] = {}
    for held in sets:
        rows = rows_at(held, hz, population)
        found += [_entry(held, row, hz, duration_s) for row in rows]
        if not rows:
            outside[held.id] = _why_nothing(held, population, hz)
    reason = None if found else "; ".join(outside.values())
    return {"frequency_hz": hz, "limits": found, "reason": reason, "outside": outside}


def _why_nothing(held: LimitSet, population: str | None, hz: float) -> str:
    if population and not any(row.population == population for row in held.rows):
        return f"{held.id} says nothing about {population}"
    return f"{held.id} has no row at {frequency_text(hz)}; {span_text(held)}"


def _common(held: LimitSet, row: LimitRow) -> dict[str, object]:
    return {
        "set": held.id,
        "edition": held.edition,
        "population": row.population,
        "scope": row.scope,
        "quantity": row.quantity,
        "unit": row.unit,
        "clause": row.clause,
        "verified": row.verified,
        "measure": row.measure,
        "area_cm2": row.area_cm2,
        "use": row.use,
        "note": row.note or None,
    }


def _entry(held: LimitSet, row: LimitRow, hz: float, duration_s: float | None) -> dict[str, object]:
    known = row.brief is None or duration_s is not None
    return _common(held, row) | {
        "value": row.value(hz, duration_s) if known else None,
        "averaging_s": row.averaging_at(hz),
        "duration_s": duration_s if row.brief is not None else None,
        "formula": row.formula,
    }


def _whole(held: LimitSet, population: str | None) -> list[dict[str, object]]:
    return [
        _common(held, row)
        | {
            "f_low_hz": row.f_low_hz,
            "f_high_hz": row.f_high_hz,
            "formula": row.formula,
            "averaging_s": row.averaging_s if row.averaging_b == 0.0 else None,
            "averaging_formula": _averaging_formula(row),
        }
        for row in held.rows
        if population in (None, row.population)
    ]


def _averaging_formula(row: LimitRow) -> str | None:
    if row.averaging_s is None or row.averaging_b == 0.0:
        return None
    unit = "f_GHz" if row.f_unit_hz == 1e9 else "f_MHz"
    return f"{row.averaging_s:.6g} * {unit}^{row.averaging_b:g}"


def _print(document: dict[str, object], sets: Sequence[LimitSet]) -> None:
    entries: list[dict[str, object]] = document["limits"]  # type: ignore[assignment]
    for held in sets:
        mine = [entry for entry in entries if entry["set"] == held.id]
        if not mine:
            continue
        click.echo(f"{held.id}, edition {held.edition}: {held.title}")
        click.echo(f"  {held.source}")
        words = dict(held.population_words)
        for entry in mine:
            click.echo("  " + _line(entry, words))
        for note in held.notes:
            click.echo(f"  Note: {note}")
        if held.missing:
            click.echo(f"  Not held: {', '.join(held.missing)}")
        click.echo()
    outside: dict[str, str] = document.get("outside", {})  # type: ignore[assignment]
    for reason in outside.values():
        click.echo(f"No figure: {reason}")
    click.echo("Which of these apply, and whether others do, is for local codes to say.")


def _line(entry: dict[str, object], words: dict[str, str]) -> str:
    if "f_low_hz" in entry:
        low, high = float(entry["f_low_hz"]), float(entry["f_high_hz"])  # type: ignore[arg-type]
        figure = f"{frequency_text(low)} to {frequency_text(high)}: {entry['formula']}"
    elif entry["value"] is None:
        figure = f"{entry['formula']}"
    else:
        figure = f"{entry['value']:.4g}"
    parts = [
        f"{words[str(entry['population'])].replace('_', ' ')},",
        f"{str(entry['scope']).replace('_', '-')}: {entry['quantity']} {figure} {entry['unit']},",
        f"{_averaging_text(entry)} ({entry['clause']})",
    ]
    for key, text in (("measure", "rms"), ("use", "both")):
        if entry[key] != text:
            parts.append(f"[{str(entry[key]).replace('_', ' ')}]")
    if entry["note"]:
        parts.append(f"[{entry['note']}]")
    if not entry["verified"]:
        parts.append(f"[{MEMORY}]")
    return " ".join(parts)


def _averaging_text(entry: dict[str, object]) -> str:
    seconds = entry["averaging_s"]
    if entry.get("averaging_formula"):
        return f"over {entry['averaging_formula']} s"
    if seconds is None:
        return "for the exposure of t seconds" if entry["quantity"] == "U" else "over the pulse"
    if seconds == 0:
        return "not averaged"
    return f"over {float(seconds) / 60.0:.4g} min"  # type: ignore[arg-type]
