"""Limit sets as data: what a published table allows at a frequency, and what that means for E."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.core.errors import LimitError
from monitor.core.quantities import Z0_OHM

Real = NDArray[np.float64]

POPULATIONS = ("general_public", "occupational")
SCOPES = ("whole_body", "local", "brief", "instantaneous")
UNITS = {"E": "V/m", "H": "A/m", "S": "W/m2", "U": "kJ/m2", "B": "uT", "I": "mA"}
MEASURES = ("rms", "peak", "pulse_mean")
USES = ("both", "level", "sum", "reference")

BRIEF_S = 360.0
"""The time that the brief rules of the published tables count in: t / 360 s."""


@dataclass(frozen=True, slots=True)
class LimitRow:
    """One figure of a published table: value(f) = a * (f / f_unit_hz) ** b, in unit.

    f_low_hz, f_high_hz: both ends included. averaging_s: at f_unit_hz, times
    (f / f_unit_hz) ** averaging_b; 0 = no averaging, None = over the pulse or as brief says.
    brief: (c0, c1, c2) of the factor c0 * (c1 + c2 * sqrt(t / 360 s)) for an exposure of t seconds.
    measure: what is compared, rms or peak or the mean over a pulse. use: "level" for one frequency
    alone, "sum" as divisor of a sum over frequencies, "both", or "reference" for a figure that
    stands beside the deciding one (a smaller area, a conversion printed for orientation).
    verified: read in a retrieved text, not from memory.
    """

    population: str
    scope: str
    f_low_hz: float
    f_high_hz: float
    quantity: str
    unit: str
    a: float
    b: float
    f_unit_hz: float
    averaging_s: float | None
    clause: str
    verified: bool
    averaging_b: float = 0.0
    brief: tuple[float, float, float] | None = None
    measure: str = "rms"
    area_cm2: float | None = None
    use: str = "both"
    note: str = ""

    def covers(self, frequency_hz: float) -> bool:
        """Whether the row speaks about that frequency, ends included."""
        return self.f_low_hz <= frequency_hz <= self.f_high_hz

    def value(self, frequency_hz: float, duration_s: float | None = None) -> float:
        """The figure in unit; rows of a brief rule need the duration, 0 < t <= 360 s."""
        value = self.a * float((frequency_hz / self.f_unit_hz) ** self.b)
        if self.brief is None:
            return value
        if duration_s is None or not 0.0 < duration_s <= BRIEF_S:
            raise LimitError(f"{self.clause}: give a duration above 0 and up to {BRIEF_S:g} s")
        c0, c1, c2 = self.brief
        return value * c0 * (c1 + c2 * math.sqrt(duration_s / BRIEF_S))

    def averaging_at(self, frequency_hz: float) -> float | None:
        """Averaging time in seconds at that frequency; None where the row has none of its own."""
        if self.averaging_s is None:
            return None
        return self.averaging_s * float((frequency_hz / self.f_unit_hz) ** self.averaging_b)

    @property
    def formula(self) -> str:
        """The figure as text, frequency in MHz or GHz."""
        unit = {1e9: "f_GHz", 1e6: "f_MHz"}.get(self.f_unit_hz, f"(f / {self.f_unit_hz:g} Hz)")
        text = f"{self.a:.6g}"
        if self.b != 0.0:
            text += f" * {unit}" if self.b == 1.0 else f" * {unit}^{self.b:g}"
        if self.brief is not None:
            c0, c1, c2 = self.brief
            text += f" * {c0:g} * ({c1:g} + {c2:g} * sqrt(t_s / 360))"
        return text


@dataclass(frozen=True, slots=True)
class LimitSet:
    """A published document's figures. population_words: what it calls our two populations.

    missing: what the document has and these rows lack; while there is any, no scope of the set
    counts as verified.
    """

    id: str
    edition: str
    title: str
    source: str
    rows: tuple[LimitRow, ...]
    population_words: tuple[tuple[str, str], ...] = ()
    missing: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Scope:
    """What one verdict is about: a population, a scope and an averaging time of one set."""

    set_id: str
    edition: str
    population: str
    scope: str
    averaging_s: float
    verified: bool
    clause: str


def _decides_for_e(row: LimitRow) -> bool:
    """Whether a field strength over a fixed averaging time can be held against the row."""
    return (
        row.use in ("both", "level")
        and row.quantity in ("E", "S")
        and row.measure == "rms"
        and row.scope in ("whole_body", "local")
        and row.averaging_b == 0.0
        and row.averaging_s is not None
        and row.averaging_s > 0.0
    )


def scopes(
    limit_set: LimitSet, low_hz: float = 0.0, high_hz: float = math.inf
) -> tuple[Scope, ...]:
    """The scopes that a field-strength monitor can judge, from rows that touch [low, high] Hz.

    A scope counts as verified when every one of those rows is and the set lacks nothing.
    """
    groups: dict[tuple[str, str, float], list[LimitRow]] = {}
    for row in limit_set.rows:
        if _decides_for_e(row) and row.f_low_hz <= high_hz and row.f_high_hz >= low_hz:
            assert row.averaging_s is not None
            groups.setdefault((row.population, row.scope, row.averaging_s), []).append(row)
    found = []
    for population, scope, averaging_s in sorted(groups, key=_scope_order):
        rows = groups[population, scope, averaging_s]
        found.append(
            Scope(
                set_id=limit_set.id,
                edition=limit_set.edition,
                population=population,
                scope=scope,
                averaging_s=averaging_s,
                verified=all(row.verified for row in rows) and not limit_set.missing,
                clause="; ".join(dict.fromkeys(row.clause for row in rows)),
            )
        )
    return tuple(found)


def _scope_order(key: tuple[str, str, float]) -> tuple[int, int, float]:
    population, scope, averaging_s = key
    return POPULATIONS.index(population), SCOPES.index(scope), averaging_s


def ratio_per_e2(limit_set: LimitSet, scope: Scope, frequencies_hz: Real) -> Real:
    """Exposure ratio per E squared, 1/(V2/m2), float64 (m,), at each of frequencies_hz (m,).

    The larger of what the E row and the S row ask (S = E2 / Z0, plane wave), and where two rows
    meet the stricter. LimitError where the set has no row for a frequency.
    """
    rows = [
        row
        for row in limit_set.rows
        if _decides_for_e(row)
        and (row.population, row.scope, row.averaging_s)
        == (scope.population, scope.scope, scope.averaging_s)
    ]
    frequencies = np.atleast_1d(np.asarray(frequencies_hz, np.float64))
    worst = np.zeros(frequencies.shape)
    for row in rows:
        inside = (frequencies >= row.f_low_hz) & (frequencies <= row.f_high_hz)
        value = row.a * (frequencies[inside] / row.f_unit_hz) ** row.b
        per_e2 = 1.0 / value**2 if row.quantity == "E" else 1.0 / (value * Z0_OHM)
        worst[inside] = np.maximum(worst[inside], per_e2)
    if not np.all(worst > 0.0):
        bad_hz = float(frequencies[~(worst > 0.0)][0])
        raise LimitError(
            f"{limit_set.id}: no {scope.scope} level for {scope.population} over"
            f" {scope.averaging_s:g} s at {bad_hz:g} Hz; {span_text(limit_set)}"
        )
    return worst


def rows_at(
    limit_set: LimitSet,
    frequency_hz: float,
    population: str | None = None,
    uses: Sequence[str] = ("both", "level", "reference"),
) -> tuple[LimitRow, ...]:
    """The rows of those uses for a frequency; where two of a kind meet, the stricter one alone."""
    best: dict[tuple[object, ...], LimitRow] = {}
    for row in limit_set.rows:
        if not row.covers(frequency_hz) or population not in (None, row.population):
            continue
        if row.use not in uses:
            continue
        kind = (row.population, row.scope, row.quantity, row.measure, row.area_cm2, row.note)
        other = best.get(kind)
        if other is None or _strictness(row, frequency_hz) < _strictness(other, frequency_hz):
            best[kind] = row
    return tuple(best.values())


def _strictness(row: LimitRow, frequency_hz: float) -> float:
    return row.value(frequency_hz, BRIEF_S if row.brief else None)


def span_text(limit_set: LimitSet) -> str:
    """From where to where the set speaks at all, as words."""
    low = min(row.f_low_hz for row in limit_set.rows)
    high = max(row.f_high_hz for row in limit_set.rows)
    return f"the set covers {frequency_text(low)} to {frequency_text(high)}"


def frequency_text(frequency_hz: float) -> str:
    """A frequency for people."""
    for scale, unit in ((1e9, "GHz"), (1e6, "MHz"), (1e3, "kHz")):
        if frequency_hz >= scale:
            return f"{frequency_hz / scale:.6g} {unit}"
    return f"{frequency_hz:.6g} Hz"
