"""Which average and which limit a request for the history means, given what the record holds."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

from dashboard.models import OWN_POPULATION, RecordLike
from dashboard.wish import AVERAGES, Wish
from monitor.core.errors import ConfigError
from monitor.core.limits import Scope
from monitor.record.types import Latest, LatestExposure


def settled(wish: Wish, args: Mapping[str, str], record: RecordLike, occupancy: str) -> Wish:
    """The wish with its limit by number and the average that belongs to it.

    Where no limit is asked for it is the largest that applies here, as on the page of the present.
    ConfigError where there is no such limit.
    """
    scopes = dict(record.scopes())
    index = named(wish, args, scopes)
    own = OWN_POPULATION.get(occupancy)
    averages = (wish.averaging_s,) if args.get("averaging") else AVERAGES
    if index is None or index not in scopes:
        index = _largest(record.latest(), averages, own)
    if index is None:
        index = _first(scopes, wish.averaging_s, own)
    if index is None:
        return replace(wish, scope=None)
    averaging_s = int(scopes[index].averaging_s)
    if averaging_s in averages:
        return replace(wish, scope=index, averaging_s=averaging_s)
    return replace(wish, scope=_first(scopes, wish.averaging_s, own))


def named(wish: Wish, args: Mapping[str, str], scopes: Mapping[int, Scope]) -> int | None:
    """The number of the limit that is asked for, None where none is; ConfigError where it is none.

    limit: a limit written as 'set population scope seconds'.
    """
    if wish.scope is not None and scopes and wish.scope not in scopes:
        raise ConfigError(f"scope: there is no limit number {wish.scope}; follow a link instead")
    text = args.get("limit")
    if wish.scope is not None or not text:
        return wish.scope
    if not scopes:
        return None
    for index, s in scopes.items():
        if text == f"{s.set_id} {s.population} {s.scope} {s.averaging_s:g}":
            return index
    raise ConfigError(f"limit: {text[:80]!r} is none that the record judges; follow a link instead")


def _largest(latest: Latest | None, averages: tuple[int, ...], own: str | None) -> int | None:
    """The largest ratio of the population of the place at the end of the record."""
    fitting = [
        one
        for one in (() if latest is None else latest.exposures)
        if int(one.scope.averaging_s) in averages and math.isfinite(_rank(one))
    ]
    candidates = [one for one in fitting if one.scope.population == own] or fitting
    most = max(candidates, key=_rank, default=None)
    return None if most is None else most.index


def _rank(one: LatestExposure) -> float:
    return one.ratio_mean if math.isfinite(one.ratio_mean) else one.ratio_low


def _first(scopes: Mapping[int, Scope], averaging_s: int, own: str | None) -> int | None:
    fitting = [i for i, s in scopes.items() if int(s.averaging_s) == averaging_s]
    return min(fitting, key=lambda i: (scopes[i].population != own, i), default=None)
