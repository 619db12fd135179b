"""Limit sets from their data files: monitor/data/limits/<id>.toml, facts with clause and mark."""

from __future__ import annotations

import tomllib
from functools import cache
from importlib import resources

from monitor.core.errors import ConfigError, LimitError
from monitor.core.keys import Table
from monitor.core.limits import MEASURES, POPULATIONS, SCOPES, UNITS, USES, LimitRow, LimitSet
from monitor.core.quantities import frequency_hz

F_UNITS = {"MHz": 1e6, "GHz": 1e9}


def available() -> list[str]:
    """Ids of the limit sets that come with the product."""
    folder = resources.files("monitor") / "data" / "limits"
    return sorted(
        item.name.removesuffix(".toml") for item in folder.iterdir() if item.name.endswith(".toml")
    )


@cache
def load(set_id: str) -> LimitSet:
    """The limit set of that id; LimitError names the known ones, or what is wrong in its file."""
    return parse(document(set_id), set_id)


def document(set_id: str) -> bytes:
    """The file of a limit set, as it is kept in the record; LimitError names the known ones."""
    if set_id not in available():
        raise LimitError(f"limit set {set_id!r} is not known; known: {', '.join(available())}")
    return (resources.files("monitor") / "data" / "limits" / f"{set_id}.toml").read_bytes()


def parse(body: bytes, set_id: str) -> LimitSet:
    """A limit set from the text of its file; LimitError says where it is wrong."""
    try:
        document = Table(tomllib.loads(body.decode("utf-8")), set_id)
        limit_set = _limit_set(document, set_id)
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise LimitError(f"{set_id}: {error}; not a TOML text") from error
    except LimitError:
        raise
    except ConfigError as error:
        raise LimitError(str(error)) from error
    return limit_set


def _limit_set(document: Table, set_id: str) -> LimitSet:
    head = document.table("set")
    named = head.text("id")
    if named != set_id:
        raise head.error("id", f"{named!r} must be the name of the file, {set_id!r}")
    words = head.table("population_words", {})
    population_words = tuple(
        (population, words.text(population, population)) for population in POPULATIONS
    )
    words.finish()
    edition, title, source = head.text("edition"), head.text("title"), head.text("source")
    missing, notes = _texts(head, "missing"), _texts(head, "notes")
    head.finish()
    rows = [row for table in document.tables("table") for row in _rows(table)]
    document.finish()
    if not rows:
        raise document.error("table", "holds no rows")
    return LimitSet(set_id, edition, title, source, tuple(rows), population_words, missing, notes)


def _texts(table: Table, key: str) -> tuple[str, ...]:
    values = table.any(key, [])
    if not isinstance(values, list) or not all(isinstance(value, str) for value in values):
        raise table.error(key, "must be a list of texts")
    return tuple(values)


def _rows(table: Table) -> list[LimitRow]:
    """The rows of one [[table]]; what stands at its head holds for each row without its own."""
    shared = {
        "population": table.text("population", choices=POPULATIONS),
        "scope": table.text("scope", choices=SCOPES),
        "clause": table.text("clause"),
        "verified": table.flag("verified"),
        "averaging_s": _averaging(table),
        "averaging_b": table.number("averaging_b", 0.0),
        "f_unit_hz": F_UNITS[table.text("f_unit", "MHz", choices=tuple(F_UNITS))],
        "measure": table.text("measure", "rms", choices=MEASURES),
        "use": table.text("use", "both", choices=USES),
        "area_cm2": table.number("area_cm2", None, low=0.0),
        "note": table.text("note", ""),
        "brief": _brief(table),
    }
    rows = [_row(row, shared) for row in table.tables("rows")]
    table.finish()
    return rows


def _row(row: Table, shared: dict[str, object]) -> LimitRow:
    low, high = _frequency(row, "low"), _frequency(row, "high")
    if not low <= high:
        raise row.error("low", "must not be above high")
    quantity = row.text("quantity", choices=tuple(UNITS))
    own = {
        "verified": row.flag("verified", shared["verified"]),
        "use": row.text("use", shared["use"], choices=USES),
        "note": row.text("note", shared["note"]),
    }
    made = LimitRow(
        f_low_hz=low,
        f_high_hz=high,
        quantity=quantity,
        unit=UNITS[quantity],
        a=row.number("a", low=1e-12),
        b=row.number("b", 0.0),
        **{**shared, **own},  # type: ignore[arg-type]
    )
    row.finish()
    return made


def _frequency(row: Table, key: str) -> float:
    text = row.text(key)
    try:
        return frequency_hz(text)
    except ConfigError as error:
        raise row.error(key, str(error)) from error


def _averaging(table: Table) -> float | None:
    if table.any("averaging_s") in ("pulse", "brief"):
        return None
    return table.number("averaging_s", low=0.0)


def _brief(table: Table) -> tuple[float, float, float] | None:
    """Factor c0 * (c1 + c2 * sqrt(t / 360 s)) of a table for exposures shorter than 360 s."""
    values = table.any("brief", None)
    if values is None:
        return None
    if not isinstance(values, list) or len(values) != 3:
        raise table.error("brief", "must be three numbers")
    return float(values[0]), float(values[1]), float(values[2])
