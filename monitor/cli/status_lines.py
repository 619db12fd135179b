"""The words of fieldsill status: those of the pages, without their pictures."""

from __future__ import annotations

from collections.abc import Mapping

from dashboard import bounds, told, words

Row = Mapping[str, object]
SIMULATED = "simulated"


def rows(now: Row, key: str) -> list[Row]:
    """The rows of a list in a box's document; none where there is no list."""
    found = now.get(key)
    return [row for row in found if isinstance(row, Mapping)] if isinstance(found, list) else []


def flags(now: Row) -> list[str]:
    """The reservations of the figures, invented data aside."""
    found = now.get("flags")
    every = found if isinstance(found, list) else []
    return [str(flag) for flag in every if flag != SIMULATED]


def ratios(now: Row) -> list[bounds.Ratio]:
    """Every exposure ratio."""
    fields, carried = rows(now, "fields"), flags(now)
    return [bounds.ratio(row, fields, carried) for row in rows(now, "exposures")]


def field(row: Row, carried: list[str]) -> str:
    """One average of the field strength."""
    e = told.e_words(row, carried)
    if e == words.figure(None):
        return f"{_minutes(row)}   E: {e}"
    interval = told.e_interval(row, carried)
    with_u = interval if interval == told.COUNTED else f"with U {interval}"
    return (
        f"{_minutes(row)}   E {e} V/m, {with_u}, "
        f"largest reading {_figure(row, 'e_max')} V/m, U {_figure(row, 'u_db')} dB, "
        f"valid share {words.share(bounds.number(row, 'valid_share'))}"
    )


def exposure(row: Row, ratio: bounds.Ratio) -> str:
    """One exposure ratio: figure, interval with its uncertainty, verdict."""
    interval = told.interval(ratio)
    reasons = row.get("reasons")
    why = told.why(ratio, [str(one) for one in reasons]) if isinstance(reasons, list) else []
    return (
        f"{scope(row)}: exposure ratio {told.figure(ratio)}"
        f"{f' ({interval})' if interval else ''}, {words.verdict(ratio.verdict, why)}"
    )


def scope(row: Row) -> str:
    """The name of an exposure's limit, as on the pages."""
    return words.scope_title(
        str(row.get("set", "")),
        str(row.get("population", "")),
        str(row.get("scope", "")),
        bounds.number(row, "averaging_s") or 0,
    )


def alarm(row: Row) -> str:
    """An alarm and what stands about it."""
    until = words.parse_utc(_text(row.get("muted_until_utc")))
    state = words.alarm_state(
        str(row.get("state")),
        is_level=row.get("level") is not None,
        muted_until=words.moment(until) if until else "",
    )
    return f"{alarm_text(row)}: {state}"


def alarm_text(row: Row) -> str:
    """What an alarm is about."""
    return words.alarm_text(str(row.get("text") or row.get("key")))


def _figure(row: Row, key: str) -> str:
    value = bounds.number(row, key)
    return "-" if value is None else words.figure(value)


def _minutes(row: Row) -> str:
    value = bounds.number(row, "averaging_s")
    return "  -   " if value is None else f"{value / 60:>2.0f} min"


def _text(value: object) -> str | None:
    return value if isinstance(value, str) else None
