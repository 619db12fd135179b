"""Alert levels with raise and return levels and delays: a state machine with no clock."""

from __future__ import annotations

from dataclasses import dataclass


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
