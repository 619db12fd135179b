"""Limit rows: spot values of the published formulas, edges, and what they mean for E."""

from __future__ import annotations

import csv
import math
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor import limitsets
from monitor.core.errors import LimitError
from monitor.core.limits import LimitRow, LimitSet, Scope, ratio_per_e2, rows_at, scopes
from monitor.core.quantities import Z0_OHM, frequency_hz

SPOTS = Path(__file__).with_name("limit_spots.csv")
"""From memory or read, as marked; values computed apart from the product to four digits."""
MEASURES = {"E_peak": "peak", "E_pulse_peak": "peak", "S_pulse_avg": "pulse_mean"}


def spots() -> list[dict[str, str]]:
    lines = SPOTS.read_text(encoding="utf-8").splitlines()
    return list(csv.DictReader(line for line in lines if not line.startswith("#")))


def matching(spot: dict[str, str]) -> list[LimitRow]:
    name = spot["quantity"]
    area = float(name[2]) if name.endswith("cm2") else None
    return [
        row
        for row in rows_at(limitsets.load(spot["set"]), frequency_hz(spot["frequency"]))
        if (row.population, row.scope) == (spot["population"], spot["scope"])
        and (row.quantity, row.unit) == (name[0], spot["unit"])
        and row.measure == MEASURES.get(name, "rms")
        and (area is None or row.area_cm2 == area)
    ]


@pytest.mark.parametrize("spot", spots(), ids=lambda spot: " ".join(spot.values()))
def test_spot_value(spot: dict[str, str]) -> None:
    hz = frequency_hz(spot["frequency"])
    duration_s = float(spot["duration_s"]) if spot["duration_s"] else None
    expected = float(spot["value"])
    row = min(matching(spot), key=lambda row: row.area_cm2 or 0)
    assert row.value(hz, duration_s) == pytest.approx(expected, rel=5e-4)
    assert row.verified == (spot["mark"] == "yes")
    if spot["averaging"].endswith("min"):
        minutes = float(spot["averaging"].removesuffix(" min"))
        assert row.averaging_at(hz) == pytest.approx(60 * minutes, rel=5e-4)


@pytest.mark.parametrize(
    ("f", "e_v_per_m", "h_a_per_m"),
    [("153kHz", 87, 4.77), ("576kHz", 87, 1.27), ("6.03MHz", 35.4, 0.12), ("97.8MHz", 28, 0.073)],
)
def test_figures_that_an_authority_prints(f: str, e_v_per_m: float, h_a_per_m: float) -> None:
    """LUBW page on limit values (26. BImSchV, same figures as 1999/519/EC), read."""
    rows = rows_at(limitsets.load("eu-1999-519"), frequency_hz(f))
    value = {row.quantity: row.value(frequency_hz(f)) for row in rows if row.scope == "whole_body"}
    assert value["E"] == pytest.approx(e_v_per_m, abs=0.05)
    assert value["H"] == pytest.approx(h_a_per_m, abs=0.005)


def test_general_population_limit_at_850_mhz() -> None:
    """47 CFR 1.1310 Table 1(B) as printed: 0.57 mW/cm2 (example E16)."""
    (row,) = rows_at(limitsets.load("fcc-1.1310"), 850e6, "general_public")
    assert row.value(850e6) / 10 == pytest.approx(0.57, abs=0.005)
    assert row.averaging_at(850e6) == 1800


def test_level_that_a_paper_quotes_at_1_ghz() -> None:
    """Mazar 2016: 2.94 W/m2 at 1000 MHz for the uncontrolled environment, read."""
    rows = rows_at(limitsets.load("safety-code-6-2015"), 1e9, "general_public")
    (s,) = [row.value(1e9) for row in rows if row.quantity == "S"]
    assert s == pytest.approx(2.94, abs=0.005)


def test_brief_rule_ends_at_the_six_minute_level() -> None:
    """ICNIRP 2020 Table 7 at 360 s is Table 6 times 360 s: 40 W/m2, 14.4 kJ/m2 (from memory)."""
    rows = rows_at(limitsets.load("icnirp-2020"), 3.5e9, "general_public")
    (energy,) = [row.value(3.5e9, 360.0) for row in rows if row.scope == "brief"]
    (s,) = [row.value(3.5e9) for row in rows if row.scope == "local"]
    assert energy == pytest.approx(s * 360 / 1000) == pytest.approx(14.4)


@pytest.mark.parametrize("duration_s", [None, 0.0, -1.0, 361.0, math.nan])
def test_brief_rule_needs_a_duration_within_its_span(duration_s: float | None) -> None:
    rows = rows_at(limitsets.load("icnirp-2020"), 3.5e9, "general_public")
    (row,) = [row for row in rows if row.scope == "brief"]
    with pytest.raises(LimitError, match="duration"):
        row.value(3.5e9, duration_s)


@pytest.mark.parametrize(
    ("e", "h", "s_mw_per_cm2", "tol"), [(614, 1.63, 100, 0.7), (61.4, 0.163, 1.0, 0.007)]
)
def test_plane_wave_columns_agree_only_roughly(
    e: float, h: float, s_mw_per_cm2: float, tol: float
) -> None:
    """47 CFR 1.1310 Table 1 (examples B13 to B16): why each quantity has its own column."""
    rows = limitsets.load("fcc-1.1310").rows
    assert any(row.a == e and row.quantity == "E" for row in rows)
    assert any(row.a == h and row.quantity == "H" for row in rows)
    assert e * e / 377 / 10 == pytest.approx(s_mw_per_cm2, abs=tol)
    assert h * h * 377 / 10 == pytest.approx(s_mw_per_cm2, abs=tol)


def test_edge_takes_the_stricter_neighbour() -> None:
    """ICNIRP 1998 public: E steps from 28 to 27.5 V/m at 400 MHz, from 27.51 to 28 at 10 MHz."""
    held = limitsets.load("icnirp-1998")
    at = {
        hz: [r.value(hz) for r in rows_at(held, hz, "general_public") if _whole_body_e(r)]
        for hz in (10e6, 400e6)
    }
    assert at[400e6] == [pytest.approx(27.5)]
    assert at[10e6] == [pytest.approx(87 / math.sqrt(10))]


def _whole_body_e(row: LimitRow) -> bool:
    return row.scope == "whole_body" and row.quantity == "E" and row.measure == "rms"


@pytest.mark.parametrize("hz", [99_999.0, 100e3 - 1, 301e9, 1.0])
def test_outside_the_table_there_is_no_row(hz: float) -> None:
    assert rows_at(limitsets.load("icnirp-2020"), hz) == ()


def scope_of(set_id: str, population: str, scope: str) -> tuple[LimitSet, Scope]:
    held = limitsets.load(set_id)
    (found,) = [s for s in scopes(held) if (s.population, s.scope) == (population, scope)]
    return held, found


def test_icnirp_2020_has_both_scopes_for_both_populations() -> None:
    """Averaging 30 min whole body, 6 min local; the whole-body rows for workers from memory."""
    held = limitsets.load("icnirp-2020")
    found = {(s.population, s.scope): (s.averaging_s, s.verified) for s in scopes(held)}
    assert found == {
        ("general_public", "whole_body"): (1800, True),
        ("general_public", "local"): (360, True),
        ("occupational", "whole_body"): (1800, False),
        ("occupational", "local"): (360, True),
    }


def test_fcc_averages_workers_over_six_and_others_over_thirty_minutes() -> None:
    found = {s.population: s.averaging_s for s in scopes(limitsets.load("fcc-1.1310"))}
    assert found == {"general_public": 1800, "occupational": 360}


def test_memory_or_a_missing_part_never_counts_as_verified() -> None:
    for set_id in limitsets.available():
        held = limitsets.load(set_id)
        for scope in scopes(held):
            rows = [
                r
                for r in held.rows
                if (r.population, r.scope) == (scope.population, scope.scope)
                and r.quantity in "ES"
                and r.use in ("both", "level")
                and r.averaging_s == scope.averaging_s
                and r.averaging_b == 0
            ]
            assert scope.verified == (all(r.verified for r in rows) and not held.missing)


def test_scopes_of_a_band_ask_only_the_rows_of_that_band() -> None:
    """ICNIRP 1998 occupational S at 2 to 10 GHz was read, E there is from memory."""
    held = limitsets.load("icnirp-1998")
    public = [s for s in scopes(held, 11e9, 12e9) if s.population == "general_public"]
    assert public == []  # the averaging time depends on the frequency there
    assert len(scopes(held, 100e6, 200e6)) == 2


def test_ratio_takes_the_larger_of_the_e_and_the_s_row() -> None:
    held, scope = scope_of("icnirp-2020", "general_public", "whole_body")
    hz = np.array([100e6, 900e6, 3.5e9])
    by_e = [1 / 27.7**2, 1 / 41.25**2, 0]
    by_s = [1 / (2 * Z0_OHM), 1 / (4.5 * Z0_OHM), 1 / (10 * Z0_OHM)]
    assert ratio_per_e2(held, scope, hz) == pytest.approx(np.maximum(by_e, by_s), rel=1e-12)


def test_ratio_leaves_figures_for_orientation_aside() -> None:
    """47 CFR 1.1310 below 30 MHz: S is printed in brackets, E decides."""
    held, scope = scope_of("fcc-1.1310", "general_public", "whole_body")
    assert ratio_per_e2(held, scope, np.array([10e6]))[0] == pytest.approx((10 / 824) ** 2)


def test_ratio_at_an_edge_takes_the_stricter_row() -> None:
    held, scope = scope_of("fcc-1.1310", "general_public", "whole_body")
    at, below, above = ratio_per_e2(held, scope, np.array([300e6, 299.99e6, 300.01e6]))
    assert at == pytest.approx(max(below, above), rel=1e-3)
    assert at >= max(below, above) * (1 - 1e-9)


@pytest.mark.parametrize("hz", [1e3, 299e3, 101e9])
def test_ratio_outside_the_table_is_an_error(hz: float) -> None:
    held, scope = scope_of("fcc-1.1310", "general_public", "whole_body")
    with pytest.raises(LimitError, match="fcc-1.1310: no whole_body level"):
        ratio_per_e2(held, scope, np.array([1e9, hz]))


@given(st.sampled_from(limitsets.available()), st.floats(1e5, 3e11))
def test_every_row_found_covers_and_is_the_strictest_of_its_kind(set_id: str, hz: float) -> None:
    held = limitsets.load(set_id)
    for row in rows_at(held, hz):
        assert row.covers(hz)
        rivals = [
            r
            for r in held.rows
            if r.covers(hz)
            and (r.population, r.scope, r.quantity, r.measure, r.area_cm2, r.note)
            == (row.population, row.scope, row.quantity, row.measure, row.area_cm2, row.note)
            and r.use != "sum"
        ]
        t = 100.0 if row.brief else None
        assert row.value(hz, t) <= min(r.value(hz, t) for r in rivals) * (1 + 1e-12)


@given(st.floats(1e5, 3e11))
def test_icnirp_2020_whole_body_public_never_has_a_hole(hz: float) -> None:
    held, scope = scope_of("icnirp-2020", "general_public", "whole_body")
    assert ratio_per_e2(held, scope, np.array([hz]))[0] > 0
