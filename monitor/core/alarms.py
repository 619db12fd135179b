"""Alert levels with raise and return levels and delays: a state machine with no clock."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from monitor.core.limits import Scope
from monitor.core.rows import Event

F = NDArray[np.float64]
I = NDArray[np.int64]  # noqa: E741

UNKNOWN = 2
ENOUGH_SHARE = 0.75
"""Valid share from which the mean of the valid part speaks for the window (design: verdicts)."""


@dataclass(frozen=True, slots=True)
class AlertRule:
    """A threshold on one scope's exposure ratio; all scopes of a kind where a field is empty.

    ratio: raised at or above; returns_at: below it the alarm returns; delays in seconds.
    """

    name: str
    set_id: str
    population: str
    scope: str
    ratio: float
    returns_at: float
    delay_s: float
    return_delay_s: float


@dataclass(frozen=True, slots=True)
class Watch:
    """One alert rule on one scope (its index in the station); key names it in events."""

    rule: AlertRule
    scope: int
    key: str


def watches(rules: Sequence[AlertRule], scopes: Sequence[Scope]) -> tuple[Watch, ...]:
    """Every rule on every scope that it means; the key tells them apart."""
    found = []
    for rule in rules:
        for index, scope in enumerate(scopes):
            wanted = (rule.set_id, rule.population, rule.scope)
            given = (scope.set_id, scope.population, scope.scope)
            if all(not want or want == have for want, have in zip(wanted, given)):
                key = f"{rule.name} | {scope.set_id} {scope.population} {scope.scope}"
                found.append(Watch(rule, index, f"{key} {scope.averaging_s:g} s"))
    return tuple(found)


@dataclass(frozen=True, slots=True)
class Side:
    """Where a watched figure stands. code: 1 at or above the level, -1 below the return level, 0
    between; since_ns: start of that; above: on which side it was last seen."""

    code: int = 0
    since_ns: int = 0
    above: bool = False
    raised: bool = False


def codes(
    ratio_low: F, ratio_mean: F, valid_share: F, at_least: NDArray[np.bool_], rule: AlertRule
) -> NDArray[np.int8]:
    """Code of each point (p,), UNKNOWN where too little is valid to tell.

    The mean of the valid part counts from a valid share of 0.75; gaps as zero count always.
    at_least: the window holds readings above the range: it may be over, never under.
    """
    enough = valid_share >= ENOUGH_SHARE
    over = (ratio_low >= rule.ratio) | (enough & (ratio_mean >= rule.ratio))
    under = enough & ~at_least & (ratio_mean < rule.returns_at)
    rest = np.where(enough & ~at_least & ~np.isnan(ratio_mean), 0, UNKNOWN)
    return np.where(over, 1, np.where(under, -1, rest)).astype(np.int8)


def known_codes(code: NDArray[np.int8], before: int) -> NDArray[np.int8]:
    """Unknown points resolved: they go on being over, but nothing returns while it is unknown.

    before: code of the last point of the call before.
    """
    unknown = code == UNKNOWN
    if not unknown.any():
        return code
    last = np.maximum.accumulate(np.where(unknown, -1, np.arange(code.size)))
    carried = np.where(last < 0, before, code[last])
    return np.where(unknown, np.where(carried == 1, 1, 0), code).astype(np.int8)


@dataclass(frozen=True, slots=True)
class Followed:
    """New side; positions of points where the level was crossed; changes (position, raised)."""

    side: Side
    crossed: list[int]
    changes: list[tuple[int, bool]]


def follow(side: Side, times_ns: I, code: NDArray[np.int8], rule: AlertRule) -> Followed:
    """Follow a ratio over points in time order; many small calls equal one large one."""
    crossed: list[int] = []
    changes: list[tuple[int, bool]] = []
    code = known_codes(code, side.code)
    starts = np.concatenate([[0], np.flatnonzero(code[1:] != code[:-1]) + 1])
    ends = np.concatenate([starts[1:], [code.size]])
    for start, end in zip(starts.tolist(), ends.tolist()):
        if start == end:
            continue
        now = int(code[start])
        since = side.since_ns if now == side.code else int(times_ns[start])
        above, raised = side.above, side.raised
        if now != 0 and above != (now > 0):
            above = now > 0
            crossed.append(start)
        if now != 0 and raised != (now > 0):
            delay_s = rule.delay_s if now > 0 else rule.return_delay_s
            at = start + int(np.searchsorted(times_ns[start:end], since + round(delay_s * 1e9)))
            if at < end:
                raised = now > 0
                changes.append((at, raised))
        side = Side(now, since, above, raised)
    return Followed(side, crossed, changes)


INSTRUMENT_TEXTS = {
    "silence": "no valid reading",
    "overload": "readings above the detector's range",
    "gaps": "less than three quarters of the last six minutes is measured",
    "record": "the record cannot be written",
    "receiver noise high": "the receiver's noise is above its calibration",
    "receiver noise low": "the receiver's noise is below its calibration",
    "receiver suspected": "a level does not move as the receiver's gain does",
    "signals vanished": "all signals that were always there are gone",
}
"""What the alarms about the monitor itself say, by key."""


@dataclass(frozen=True, slots=True)
class Alarm:
    """An alarm as people meet it; state words after IEC 62682 / ISA-18.2 (names from memory).

    level, ratio: as of the last change, None for an alarm that is not about a ratio.
    """

    key: str
    raised: bool = False
    confirmed: bool = True
    since_ns: int = 0
    level: float | None = None
    ratio: float | None = None
    muted_until_ns: int | None = None

    def state(self, now_ns: int) -> str:
        """normal, unacknowledged, acknowledged, returned_unacknowledged or shelved."""
        if self.muted_until_ns is not None and now_ns < self.muted_until_ns:
            return "shelved"
        if self.raised:
            return "acknowledged" if self.confirmed else "unacknowledged"
        return "normal" if self.confirmed else "returned_unacknowledged"


def after(alarm: Alarm, event: Event) -> Alarm:
    """The alarm after an event about it: raised or returned, confirmed, muted or no longer."""
    body = event.body
    if event.kind == "confirmed":
        return replace(alarm, confirmed=True)
    if event.kind == "muted":
        until = body.get("until_ns")
        return replace(alarm, muted_until_ns=until if isinstance(until, int) else None)
    raised = bool(body.get("raised"))
    return replace(
        alarm,
        raised=raised,
        confirmed=alarm.confirmed and not raised,
        since_ns=event.boot_ns,
        level=_figure(body.get("level")),
        ratio=_figure(body.get("exposure_ratio")),
    )


def _figure(value: object) -> float | None:
    return float(value) if isinstance(value, (int, float)) else None
