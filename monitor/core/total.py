"""Total exposure ratios of levels at known frequencies: one sum per scope of a limit set."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from monitor.core.errors import LimitError
from monitor.core.limits import (
    SCOPES,
    LimitRow,
    LimitSet,
    frequency_text,
    span_text,
)
from monitor.core.quantities import Z0_OHM, e_from_s, s_from_e

SUM_USES = ("both", "sum")
H_NEEDED_BELOW_HZ = 30e6


@dataclass(frozen=True, slots=True)
class Level:
    """A level at a frequency: quantity E, H or S, value in V/m, A/m or W/m2 (rms, time mean)."""

    frequency_hz: float
    quantity: str
    value: float


@dataclass(frozen=True, slots=True)
class Term:
    """One level against one row: quantity, value and limit are those that were compared."""

    frequency_hz: float
    given: Level
    quantity: str
    value: float
    limit: float
    exposure_ratio: float
    clause: str
    verified: bool
    note: str


@dataclass(frozen=True, slots=True)
class Total:
    """A sum over the levels. averaging_s: None where it differs between the terms."""

    scope: str
    averaging_s: float | None
    exposure_ratio: float
    terms: tuple[Term, ...]
    verified: bool
    notes: tuple[str, ...]


def totals(limit_set: LimitSet, population: str, levels: Sequence[Level]) -> tuple[Total, ...]:
    """A total per scope that has a level for any of the frequencies.

    E and H count squared, S as it is; the sum over stimulation levels (instantaneous) is linear.
    E and H given for one frequency count as one: the larger of the two, so that the total is
    never below that of E alone or of H alone. LimitError where the set
    says nothing at a frequency. Sums after ICNIRP 2020 and 47 CFR 1.1310; the linear sum from
    memory.
    """
    for level in levels:
        if not _rows(limit_set, population, None, level.frequency_hz):
            raise LimitError(
                f"{limit_set.id}: no level for {population} at"
                f" {frequency_text(level.frequency_hz)}; {span_text(limit_set)}"
            )
    found = []
    for scope in SCOPES:
        if scope == "brief":
            continue
        terms = [_term(limit_set, population, scope, level) for level in levels]
        held = tuple(term for term in terms if term is not None)
        if held:
            found.append(_total(limit_set, population, scope, levels, held))
    return tuple(found)


def _total(
    limit_set: LimitSet,
    population: str,
    scope: str,
    levels: Sequence[Level],
    terms: tuple[Term, ...],
) -> Total:
    averagings = {
        row.averaging_at(term.frequency_hz)
        for term in terms
        for row in _rows(limit_set, population, scope, term.frequency_hz)
        if row.quantity == term.quantity
    }
    notes = _notes(limit_set, scope, levels, terms)
    if len(averagings) > 1:
        notes.append("the averaging time differs between the terms; each mean must be over its own")
    return Total(
        scope=scope,
        averaging_s=averagings.pop() if len(averagings) == 1 else None,
        exposure_ratio=_sum(terms),
        terms=terms,
        verified=all(term.verified for term in terms) and not limit_set.missing,
        notes=tuple(notes),
    )


def _sum(terms: Sequence[Term]) -> float:
    """Per frequency the larger of what E or S and what H add up to; then over frequencies."""
    electric: dict[float, float] = {}
    magnetic: dict[float, float] = {}
    for term in terms:
        side = magnetic if term.given.quantity == "H" else electric
        side[term.frequency_hz] = side.get(term.frequency_hz, 0.0) + term.exposure_ratio
    frequencies = sorted(set(electric) | set(magnetic))
    return sum(max(electric.get(hz, 0.0), magnetic.get(hz, 0.0)) for hz in frequencies)


def _notes(
    limit_set: LimitSet, scope: str, levels: Sequence[Level], terms: Sequence[Term]
) -> list[str]:
    notes = []
    used = {id(term.given) for term in terms}
    left = [level for level in levels if id(level) not in used]
    if left and scope != "instantaneous":
        names = ", ".join(frequency_text(level.frequency_hz) for level in left)
        notes.append(f"a lower bound: {limit_set.id} holds no {scope} level at {names}")
    if scope == "instantaneous":
        notes.append(
            "stimulation: not averaged, the values must be the strongest rms of any moment"
        )
    given = {level.frequency_hz: set[str]() for level in levels}
    for level in levels:
        given[level.frequency_hz].add(level.quantity)
    if any(hz < H_NEEDED_BELOW_HZ and have < {"E", "H"} for hz, have in given.items()):
        notes.append("below 30 MHz E and H must both be known; one alone decides nothing")
    return notes


def _rows(
    limit_set: LimitSet, population: str, scope: str | None, frequency_hz: float
) -> list[LimitRow]:
    return [
        row
        for row in limit_set.rows
        if row.population == population
        and scope in (None, row.scope)
        and row.scope != "brief"
        and row.measure == "rms"
        and row.use in SUM_USES
        and row.quantity in ("E", "H", "S", "B")
        and row.covers(frequency_hz)
    ]


def _term(limit_set: LimitSet, population: str, scope: str, level: Level) -> Term | None:
    """The level against its own quantity's row, or against the other one as a plane wave."""
    rows = _rows(limit_set, population, scope, level.frequency_hz)
    for quantity in {"E": "ES", "S": "SE", "H": "H"}[level.quantity]:
        fitting = [row for row in rows if row.quantity == quantity]
        if fitting:
            row = min(fitting, key=lambda row: row.value(level.frequency_hz))
            return _against(row, scope, level)
    return None


def _against(row: LimitRow, scope: str, level: Level) -> Term:
    value, note = level.value, ""
    if row.quantity != level.quantity:
        to_s = row.quantity == "S"
        value = s_from_e(level.value) if to_s else e_from_s(level.value)
        note = f"{level.quantity} taken as {row.quantity} of a plane wave, Z0 {Z0_OHM:.2f} ohm"
    limit = row.value(level.frequency_hz)
    share = value / limit
    linear = row.quantity == "S" or scope == "instantaneous"
    return Term(
        frequency_hz=level.frequency_hz,
        given=level,
        quantity=row.quantity,
        value=value,
        limit=limit,
        exposure_ratio=share if linear else share * share,
        clause=row.clause,
        verified=row.verified,
        note=note,
    )
