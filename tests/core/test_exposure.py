"""Verdicts: every rule on both sides of its edge, one window at a time and many at once."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from monitor.core.distributions import factor
from monitor.core.exposure import Verdict, guard, reasons, scope_coefficients, verdicts
from monitor.core.flags import Flag

U = 1.0  # standard uncertainty, dB


def arguments(**changed: Any) -> dict[str, Any]:
    plain = {
        "ratio_low": 0.1,
        "ratio_mean": 0.1,
        "ratio_high": 0.1,
        "u_db": U,
        "k": 2.0,
        "valid_share": 1.0,
        "flags": 0,
        "verified": True,
        "field_region": "far",
        "outside_excluded": True,
    }
    return plain | changed


def verdict(**changed: Any) -> Verdict:
    return Verdict(int(verdicts(**arguments(**changed))[0]))


def at_db(db: float) -> float:
    return 10 ** (db / 10)


def level(db: float) -> dict[str, float]:
    return {"ratio_low": at_db(db), "ratio_mean": at_db(db), "ratio_high": at_db(db)}


def test_well_below_conforms_and_well_above_exceeds() -> None:
    assert verdict() is Verdict.CONFORMS
    assert verdict(**level(5)) is Verdict.EXCEEDS


@pytest.mark.parametrize(
    ("db", "expected"),
    [
        (-1.65, Verdict.CONFORMS),
        (-1.63, Verdict.UNDECIDED),
        (0.0, Verdict.UNDECIDED),
        (1.63, Verdict.UNDECIDED),
        (1.65, Verdict.EXCEEDS),
    ],
)
def test_guard_is_one_sided_1_64_standard_uncertainties(db: float, expected: Verdict) -> None:
    """One-sided 95 % of a normal distribution: z = 1.645 (JCGM 106 table 1, from memory)."""
    assert verdict(**level(db)) is expected


@pytest.mark.parametrize("degrees", [1.0, 2.0, 3.0, 5.0, 10.0, 30.0, 100.0])
def test_guard_grows_where_degrees_of_freedom_are_few(degrees: float) -> None:
    """A certificate's U from few readings: 1.64 u below the limit is then less than 95 % sure.
    Student's t, one-sided (GUM G.3.2), from scipy."""
    k = factor([("normal", 1.0, degrees)])
    needed = float(stats.t.ppf(0.95, degrees))
    assert guard(k) >= needed - (0.03 if degrees > 10 else 0.0)
    small = 0.1  # so that the cap does not decide
    assert verdict(**level(-0.98 * small * needed), u_db=small, k=k) is Verdict.UNDECIDED or (
        degrees > 10
    )
    assert verdict(**level(-1.02 * float(guard(k)) * small), u_db=small, k=k) is Verdict.CONFORMS


def test_what_adds_to_the_mean_adds_no_more_to_the_low_figure_than_its_part() -> None:
    """A sixth of the time is valid and reads 9 times the limit, 1.2 of it unsure."""
    thin = {"ratio_low": 1.5, "ratio_mean": 9.0, "ratio_high": 9.0, "u_db": 0.2, "added": 1.2}
    assert verdict(**thin, valid_share=1 / 6) is Verdict.UNDECIDED
    assert verdict(**thin, valid_share=1 / 6, seen_share=1 / 6) is Verdict.EXCEEDS
    said = reasons(**arguments(**thin, valid_share=1 / 6, seen_share=1 / 6))
    assert said == ["at least 1.15 of the limit, gaps counted as nothing"]


def test_gaps_as_zero_above_the_limit_exceeds_at_any_valid_share() -> None:
    assert verdict(**level(5), valid_share=0.01) is Verdict.EXCEEDS
    assert verdict(ratio_low=0.9, ratio_mean=40.0, ratio_high=40.0) is Verdict.UNDECIDED


@pytest.mark.parametrize(("share", "conforms"), [(0.75, True), (0.7499, False), (0.0, False)])
def test_conforms_needs_three_quarters_of_the_time(share: float, conforms: bool) -> None:
    assert (verdict(valid_share=share) is Verdict.CONFORMS) == conforms


def test_conforms_needs_the_gaps_at_maximum_below() -> None:
    assert verdict(ratio_high=0.9) is Verdict.UNDECIDED
    assert verdict(ratio_high=0.6) is Verdict.CONFORMS


@pytest.mark.parametrize(
    ("u", "k", "conforms"), [(2.0, 2.0, True), (2.01, 2.0, False), (2.2, 1.8, True)]
)
def test_cap_holds_for_the_expanded_uncertainty(u: float, k: float, conforms: bool) -> None:
    assert (verdict(**level(-20), u_db=u, k=k) is Verdict.CONFORMS) == conforms


def test_cap_may_be_chosen() -> None:
    assert verdict(**level(-20), u_db=2.5, cap_db=5.0) is Verdict.CONFORMS
    assert verdict(**level(-20), u_db=1.0, cap_db=1.5) is Verdict.UNDECIDED


def test_a_large_uncertainty_does_not_hide_an_exceedance() -> None:
    assert verdict(**level(20), u_db=5.0) is Verdict.EXCEEDS


@pytest.mark.parametrize(
    "flag", [Flag.ABOVE_RANGE, Flag.CLIPPED, Flag.LOG_AVERAGED, Flag.COMPONENT_ONLY]
)
def test_a_lower_bound_may_exceed_but_never_conform(flag: Flag) -> None:
    assert verdict(flags=int(flag)) is Verdict.UNDECIDED
    assert verdict(**level(5), flags=int(flag)) is Verdict.EXCEEDS


def test_an_upper_bound_may_conform_but_never_exceed() -> None:
    assert verdict(flags=int(Flag.BELOW_RANGE)) is Verdict.CONFORMS
    assert verdict(**level(5), flags=int(Flag.BELOW_RANGE)) is Verdict.UNDECIDED


@pytest.mark.parametrize(
    "flag",
    [
        Flag.OUT_OF_TEMPERATURE,
        Flag.CALIBRATION_OVERDUE,
        Flag.OUT_OF_BAND,
        Flag.SUPPLY_OUT_OF_RANGE,
    ],
)
def test_what_the_budget_does_not_cover_never_conforms(flag: Flag) -> None:
    assert verdict(flags=int(flag)) is Verdict.UNDECIDED
    assert verdict(**level(5), flags=int(flag)) is Verdict.EXCEEDS


@pytest.mark.parametrize("flag", [Flag.SIMULATED, Flag.GAP])
def test_flags_that_decide_nothing(flag: Flag) -> None:
    assert verdict(flags=int(flag)) is Verdict.CONFORMS
    assert verdict(**level(5), flags=int(flag)) is Verdict.EXCEEDS


def test_signals_outside_the_band_must_be_excluded() -> None:
    assert verdict(outside_excluded=False) is Verdict.UNDECIDED
    assert verdict(**level(5), outside_excluded=False) is Verdict.EXCEEDS


def test_a_limit_from_memory_never_conforms() -> None:
    assert verdict(verified=False) is Verdict.UNDECIDED
    assert verdict(**level(5), verified=False) is Verdict.EXCEEDS


@pytest.mark.parametrize(
    ("region", "low", "high"),
    [
        ("far", Verdict.CONFORMS, Verdict.EXCEEDS),
        ("radiating_near", Verdict.UNDECIDED, Verdict.EXCEEDS),
        ("undeclared", Verdict.UNDECIDED, Verdict.EXCEEDS),
        ("reactive_near", Verdict.UNDECIDED, Verdict.UNDECIDED),
    ],
)
def test_field_region(region: str, low: Verdict, high: Verdict) -> None:
    assert verdict(field_region=region) is low
    assert verdict(**level(5), field_region=region) is high


def test_below_30_mhz_e_alone_decides_nothing() -> None:
    """ICNIRP 2020, notes to the reference levels: there both E and H must comply."""
    assert verdict(lowest_hz=29.9e6) is Verdict.UNDECIDED
    assert verdict(**level(5), lowest_hz=29.9e6) is Verdict.UNDECIDED
    assert verdict(lowest_hz=30e6) is Verdict.CONFORMS


@pytest.mark.parametrize("name", ["ratio_low", "ratio_mean", "ratio_high", "u_db", "valid_share"])
def test_a_figure_that_is_not_there_never_conforms(name: str) -> None:
    assert verdict(**{name: math.nan}) is not Verdict.CONFORMS


def test_no_field_at_all_conforms() -> None:
    assert verdict(ratio_low=0.0, ratio_mean=0.0, ratio_high=0.0) is Verdict.CONFORMS


figure = st.one_of(st.floats(0, 100), st.just(math.nan))
window = st.tuples(
    figure, figure, figure, st.floats(0, 6), st.floats(1, 3), st.floats(0, 1), st.integers(0, 8191)
)


@given(
    st.lists(window, min_size=1, max_size=20),
    st.booleans(),
    st.sampled_from(["far", "radiating_near", "reactive_near", "undeclared"]),
)
def test_many_windows_at_once_are_judged_like_each_alone(
    windows: list[tuple[float, ...]], verified: bool, region: str
) -> None:
    columns = [np.array(column) for column in zip(*windows)]
    site = {"verified": verified, "field_region": region, "outside_excluded": True}
    together = verdicts(*columns, **site)
    assert together.dtype == np.int8
    for index, one in enumerate(windows):
        assert together[index] == verdicts(*one, **site)[0]


@given(st.floats(0, 100), *[st.floats(0, high) for high in (6, 1)], st.integers(0, 8191))
def test_reasons_name_an_obstacle_whenever_the_figures_alone_would_decide(
    ratio: float, u_db: float, share: float, flags: int
) -> None:
    one = arguments(
        ratio_low=ratio, ratio_mean=ratio, ratio_high=ratio, u_db=u_db, valid_share=share,
        flags=flags,
    )  # fmt: skip
    said = reasons(**one)
    assert all(line and "\n" not in line for line in said)
    clear = not at_db(-1.64 * u_db) <= ratio <= at_db(1.64 * u_db)
    if verdicts(**one)[0] == Verdict.UNDECIDED and clear:
        assert len(said) > 1


@pytest.mark.parametrize(
    ("flags", "said"),
    [
        (Flag.ABOVE_RANGE, "at least 0.4 of the limit; how much more is not known"),
        (Flag.COMPONENT_ONLY, "at least 0.4 of the limit; how much more is not known"),
        (Flag.BELOW_RANGE, "below 1.2 of the limit"),
        (
            Flag.BELOW_RANGE | Flag.COMPONENT_ONLY,
            "what is seen is below 1.2 of the limit, the whole field is not known",
        ),
    ],
)
def test_a_bound_is_no_interval(flags: Flag, said: str) -> None:
    """A lower bound has no upper end to state, and the other way about (our choice of words)."""
    one = arguments(ratio_low=0.4, ratio_mean=0.5, ratio_high=1.2, u_db=0.0, flags=int(flags))
    assert reasons(**one)[0] == said


@pytest.mark.parametrize(
    ("changed", "word"),
    [
        ({"verified": False}, "from memory"),
        ({"field_region": "undeclared"}, "not declared"),
        ({"field_region": "reactive_near"}, "reactive near field"),
        ({"field_region": "radiating_near"}, "radiating near field"),
        ({"outside_excluded": False}, "signals outside the band"),
        ({"lowest_hz": 3e6}, "below 30 MHz"),
        ({"valid_share": 0.5}, "valid for 50%"),
        ({"valid_share": math.nan}, "unknown part"),
        ({"u_db": 3.0}, "cap of 4 dB"),
        ({"flags": int(Flag.CLIPPED)}, "lower bound: converter clipped"),
        ({"flags": int(Flag.CALIBRATION_OVERDUE)}, "calibration overdue"),
        ({**level(5), "flags": int(Flag.BELOW_RANGE)}, "upper bound"),
        ({"ratio_mean": math.nan}, "no valid part"),
        ({**level(5)}, "at least 2.17 of the limit"),  # 10^((5 - 1.64) / 10)
        ({}, "at most 0.146 of the limit"),  # 0.1 * 10^0.164
        ({**level(0)}, "0.685 to 1.46 of the limit; the limit lies between"),
    ],
)
def test_reasons_in_plain_words(changed: dict[str, Any], word: str) -> None:
    assert any(word in line for line in reasons(**arguments(**changed)))


def test_nothing_forbids_what_was_decided() -> None:
    assert len(reasons(**arguments())) == 1
    assert len(reasons(**arguments(**level(5)))) == 1


def test_a_broad_channel_takes_the_worst_frequency_of_its_band() -> None:
    k = np.array([10.0, 40.0, 20.0])
    per_e2 = np.array([3.0, 1.0, 2.5])
    assert scope_coefficients(k, per_e2) == 50.0  # neither the largest k nor the strictest limit


@given(st.lists(st.tuples(st.floats(1e-6, 1e6), st.floats(1e-6, 1e6)), min_size=1, max_size=9))
def test_the_coefficient_covers_every_frequency(pairs: list[tuple[float, float]]) -> None:
    k, per_e2 = (np.array(column) for column in zip(*pairs))
    worst = scope_coefficients(k, per_e2)
    assert all(worst >= a * b for a, b in pairs)
    assert any(worst == a * b for a, b in pairs)


def test_invented_calibration_figures_never_conform() -> None:
    assert verdict(flags=int(Flag.INVENTED_CALIBRATION)) is Verdict.UNDECIDED
    said = reasons(**arguments(flags=int(Flag.INVENTED_CALIBRATION)))
    assert "the stated uncertainty does not cover this: calibration figures are invented" in said
