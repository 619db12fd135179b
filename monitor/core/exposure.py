"""Exposure ratios and what may be said of them: exceeds, conforms, or cannot be decided."""

from __future__ import annotations

import math
from enum import IntEnum

import numpy as np
from numpy.typing import ArrayLike, NDArray

from monitor.core.flags import LOWER_BOUND, UPPER_BOUND, Flag, words
from monitor.core.interval import reported, total_db

Real = NDArray[np.float64]

GUARD = 1.64
"""One-sided 95 % quantile of a normal distribution (1.645, cut to the two digits in use)."""
GUARD_K = 2.0
"""Two-sided coverage factor up to which GUARD holds; a larger one tells of few degrees of freedom,
and the guard grows with it: at least Student's one-sided 95 % up to 10 of them, above them 0.03 u
less at most (tests; our choice)."""
CAP_DB = 4.0
"""Largest expanded uncertainty with which anything may conform (common practice, no source)."""
LEAST_VALID_SHARE = 0.75
E_ALONE_FROM_HZ = 30e6
"""Below it E and H must both be known (ICNIRP 2020, notes to the reference levels)."""
FIELD_REGIONS = ("far", "radiating_near", "reactive_near", "undeclared")

OUTSIDE_BUDGET = (
    Flag.OUT_OF_TEMPERATURE | Flag.CALIBRATION_OVERDUE | Flag.OUT_OF_BAND | Flag.SUPPLY_OUT_OF_RANGE
    | Flag.TEMPERATURE_UNKNOWN | Flag.CLOCK_UNSYNCHRONISED | Flag.INVENTED_CALIBRATION
    | Flag.ELEMENT_CHANGED | Flag.ASSUMED_TERMS
)  # fmt: skip
"""Conditions that the stated uncertainty does not cover. A clock that nothing has set cannot tell
whether the calibration is in date."""


class Verdict(IntEnum):
    """What a window says about a scope; the record keeps the number."""

    UNDECIDED = 0
    CONFORMS = 1
    EXCEEDS = 2


def scope_coefficients(k: Real, ratio_per_e2: Real) -> float:
    """Exposure ratio per watt at the port of a channel that cannot tell frequencies apart.

    k: E squared per watt, V2/m2/W, float64 (m,). ratio_per_e2: 1/(V2/m2), (m,), on the same
    frequencies. The largest product over the band: both vary, and the signal may sit anywhere.
    """
    return float(np.max(np.asarray(k, np.float64) * np.asarray(ratio_per_e2, np.float64)))


def least_coefficient(k: Real, ratio_per_e2: Real) -> float:
    """The smallest product over the band: what a signal of that power causes at the least."""
    return float(np.min(np.asarray(k, np.float64) * np.asarray(ratio_per_e2, np.float64)))


def verdicts(
    ratio_low: ArrayLike,
    ratio_mean: ArrayLike,
    ratio_high: ArrayLike,
    u_db: ArrayLike,
    k: ArrayLike,
    valid_share: ArrayLike,
    flags: ArrayLike,
    *,
    verified: bool,
    field_region: str,
    outside_excluded: bool,
    cap_db: float = CAP_DB,
    lowest_hz: float = math.inf,
    added: ArrayLike = 0.0,
    seen_share: ArrayLike = 1.0,
) -> NDArray[np.int8]:
    """Verdict of every window, int8 (n,).

    ratio_low, ratio_mean, ratio_high: exposure ratio with gaps as zero, of the valid part, with
    gaps at the period's maximum. u_db: STANDARD uncertainty of the ratio in dB (10 log), that is
    the expanded one divided by its coverage factor k; cap_db holds for k * u. flags: Flag bits.
    field_region: only in the far field does E alone show conformity (ICNIRP 2020, notes to the
    reference levels). outside_excluded: see Station. lowest_hz: lower end of what the channels
    receive, where E alone is measured. added: standard uncertainty of what adds to the mean ratio.
    seen_share: the largest valid share of any channel; with gaps as zero no more than that part of
    the mean, and of what adds to it, is in ratio_low. Decisions are taken in dB with a one-sided
    95 % guard(k) u, by interval() where something adds. Below the detection limit ratio_high is a
    bound already. An exceedance
    stands at any valid share and with any U, for the guard counts it; what forbids "conforms" is
    listed in reasons().
    """
    factor, bits = np.asarray(k, np.float64), np.asarray(flags, np.int64)
    u, adds = np.asarray(u_db, np.float64), np.asarray(added, np.float64)
    share = np.asarray(valid_share, np.float64)
    bounded = (bits & int(UPPER_BOUND)) != 0
    least, most = _guarded(ratio_low, ratio_high, u, factor, adds, bits, seen_share)
    exceeds = (least > 1.0) & ~bounded
    conforms = (
        (most < 1.0)
        & (_capped_db(factor * u, ratio_mean, factor * adds, bits) <= cap_db)
        & (share >= LEAST_VALID_SHARE)
        & ((bits & int(LOWER_BOUND | OUTSIDE_BUDGET)) == 0)
        & np.isfinite(np.asarray(ratio_mean, np.float64))
        & ~np.isnan(np.asarray(ratio_low, np.float64))
    )
    if not (verified and outside_excluded and field_region == "far"):
        conforms = np.zeros_like(conforms)
    if not _e_alone_decides(field_region, lowest_hz):
        exceeds, conforms = np.zeros_like(exceeds), np.zeros_like(conforms)
    found = np.where(exceeds, Verdict.EXCEEDS, np.where(conforms, Verdict.CONFORMS, 0))
    return np.atleast_1d(found).astype(np.int8)


def guard(k: ArrayLike) -> Real:
    """One-sided 95 % guard (n,), in standard uncertainties, where k is the two-sided factor."""
    return GUARD * np.maximum(np.asarray(k, np.float64) / GUARD_K, 1.0)


def _guarded(
    low: ArrayLike, high: ArrayLike, u_db: ArrayLike, k: ArrayLike, added: ArrayLike,
    flags: ArrayLike, seen_share: ArrayLike,
) -> tuple[Real, Real]:  # fmt: skip
    """What the ratio is at the least and at the most, one-sided."""
    db, more = guard(k) * np.asarray(u_db), GUARD * np.asarray(added)
    least = reported(low, high, db, more * np.asarray(seen_share), flags).low
    return least, reported(low, high, db, more, flags).high


def reasons(
    ratio_low: float,
    ratio_mean: float,
    ratio_high: float,
    u_db: float,
    k: float,
    valid_share: float,
    flags: int,
    *,
    verified: bool,
    field_region: str,
    outside_excluded: bool,
    cap_db: float = CAP_DB,
    lowest_hz: float = math.inf,
    added: float = 0.0,
    seen_share: float = 1.0,
) -> list[str]:
    """Plain words for one window: the figures behind the verdict, then all that forbids one.

    Arguments as for verdicts(), scalars. The first entry always states what was compared.
    """
    verdict = verdicts(
        ratio_low, ratio_mean, ratio_high, u_db, k, valid_share, flags,
        verified=verified, field_region=field_region, outside_excluded=outside_excluded,
        cap_db=cap_db, lowest_hz=lowest_hz, added=added, seen_share=seen_share,
    )[0]  # fmt: skip
    ends = _guarded(ratio_low, ratio_high, u_db, k, added, flags, seen_share)
    least, most = (float(end) for end in ends)
    said = [_comparison(int(verdict), least, ratio_mean, most, flags)]
    said += _no_verdict(field_region, lowest_hz)
    if verdict == Verdict.EXCEEDS:
        return said
    if flags & UPPER_BOUND and most >= 1.0:
        said.append(_because(flags & int(UPPER_BOUND), "the figure is an upper bound"))
    said += _undeclared(field_region, outside_excluded, verified)
    expanded_db = float(_capped_db(k * u_db, ratio_mean, k * added, flags))
    return said + _weak(expanded_db, cap_db, valid_share, flags)


def _capped_db(expanded_db: ArrayLike, mean: ArrayLike, added: ArrayLike, flags: ArrayLike) -> Real:
    """What the cap holds for; of a bound below the detection limit the instrument's part alone."""
    bounded = (np.asarray(flags, np.int64) & int(UPPER_BOUND)) != 0
    return np.where(bounded, expanded_db, total_db(expanded_db, mean, added, flags))


def _undeclared(field_region: str, outside_excluded: bool, verified: bool) -> list[str]:
    """What the site and the limit set leave open."""
    said = []
    if field_region == "undeclared":
        said.append("the field region is not declared")
    if field_region == "radiating_near":
        said.append("in the radiating near field E alone does not show conformity")
    if not outside_excluded:
        said.append("signals outside the band are not excluded by a filter or a survey")
    if not verified:
        said.append("the limit is from memory, not confirmed against the published text")
    return said


def _weak(expanded_db: float, cap_db: float, valid_share: float, flags: int) -> list[str]:
    """What in the data forbids "conforms"."""
    said = []
    if not valid_share >= LEAST_VALID_SHARE:
        said.append(
            f"valid for {_percent(valid_share)} of the time; {LEAST_VALID_SHARE:.0%} is needed"
        )
    if not expanded_db <= cap_db:
        said.append(
            f"the expanded uncertainty of {_number(expanded_db)} dB is above the cap of"
            f" {cap_db:g} dB"
        )
    if flags & LOWER_BOUND:
        said.append(_because(flags & int(LOWER_BOUND), "the figure is a lower bound"))
    if flags & OUTSIDE_BUDGET:
        said.append(
            _because(flags & int(OUTSIDE_BUDGET), "the stated uncertainty does not cover this")
        )
    return said


def _e_alone_decides(field_region: str, lowest_hz: float) -> bool:
    return field_region != "reactive_near" and lowest_hz >= E_ALONE_FROM_HZ


def _no_verdict(field_region: str, lowest_hz: float) -> list[str]:
    said = []
    if field_region == "reactive_near":
        said.append("in the reactive near field E alone decides nothing")
    if lowest_hz < E_ALONE_FROM_HZ:
        said.append("below 30 MHz E alone decides nothing; H must be known as well")
    return said


def _comparison(verdict: int, least: float, mean: float, most: float, flags: int) -> str:
    """The interval, open where a flag leaves a side without a bound."""
    if verdict == Verdict.EXCEEDS:
        return f"at least {least:.3g} of the limit, gaps counted as nothing"
    if not math.isfinite(mean):
        return "no valid part in the averaging time"
    if verdict == Verdict.CONFORMS:
        return f"at most {most:.3g} of the limit, gaps counted at the highest reading"
    if flags & LOWER_BOUND and flags & UPPER_BOUND:
        return f"what is seen is below {_number(most)} of the limit, the whole field is not known"
    if flags & LOWER_BOUND:
        return f"at least {_number(least)} of the limit; how much more is not known"
    if flags & UPPER_BOUND:
        return f"below {_number(most)} of the limit"
    holds = "; the limit lies between" if least <= 1.0 <= most else ""
    return f"{_number(least)} to {_number(most)} of the limit{holds}"


def _because(bits: int, what: str) -> str:
    return f"{what}: {', '.join(words(bits))}"


def _number(value: float) -> str:
    return f"{value:.3g}" if math.isfinite(value) else "unknown"


def _percent(share: float) -> str:
    return f"{share:.0%}" if math.isfinite(share) else "an unknown part"
