"""Totals over frequencies: worked sums, and the laws that any sum has to keep."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor import limitsets
from monitor.core.errors import LimitError
from monitor.core.quantities import s_from_e
from monitor.core.total import Level, Total, totals

PLACE = [(98e6, 5.0), (600e6, 3.0), (800e6, 2.0), (1.8e9, 4.0), (3.5e9, 6.0)]
"""Signals of the worked sums: frequency, V/m; far field."""


def by_scope(
    set_id: str, levels: list[Level], population: str = "general_public"
) -> dict[str, Total]:
    return {t.scope: t for t in totals(limitsets.load(set_id), population, levels)}


@pytest.mark.parametrize(
    ("set_id", "quantity", "expected"),
    [
        ("icnirp-2020", "E", 0.05742),
        ("eu-1999-519", "E", 0.05684),
        ("fcc-1.1310", "S", 0.05495),
        ("safety-code-6-2015", "S", 0.09060),
    ],
)
def test_worked_sum(set_id: str, quantity: str, expected: float) -> None:
    """Sums worked out apart from the product, from the published formulas, to four digits."""
    levels = [Level(hz, quantity, e if quantity == "E" else s_from_e(e)) for hz, e in PLACE]
    total = by_scope(set_id, levels)["whole_body"]
    assert total.exposure_ratio == pytest.approx(expected, abs=6e-6)


def test_terms_of_the_worked_sum() -> None:
    total = by_scope("icnirp-2020", [Level(hz, "E", e) for hz, e in PLACE])["whole_body"]
    parts = [term.exposure_ratio for term in total.terms]
    assert parts == pytest.approx([0.03258, 0.007934, 0.002645, 0.004702, 0.009556], rel=5e-4)
    assert [term.quantity for term in total.terms] == ["E", "E", "E", "E", "S"]
    assert "plane wave" in total.terms[-1].note


@pytest.mark.parametrize(
    ("hz", "e", "stimulation", "thermal"),
    [(0.576e6, 60.0, 0.6897, 0.2740), (6.03e6, 40.0, 0.4598, 1.275)],
)
def test_stimulation_is_linear_and_apart(
    hz: float, e: float, stimulation: float, thermal: float
) -> None:
    """1999/519/EC: 60 V/m at 576 kHz and 40 V/m at 6.03 MHz, two results each, never added."""
    found = by_scope("eu-1999-519", [Level(hz, "E", e)])
    assert found["instantaneous"].exposure_ratio == pytest.approx(stimulation, rel=5e-4)
    assert found["whole_body"].exposure_ratio == pytest.approx(thermal, rel=5e-4)
    assert any("E and H" in note for note in found["whole_body"].notes)


def test_icnirp_2020_averages_each_scope_over_its_own_time() -> None:
    found = by_scope("icnirp-2020", [Level(900e6, "E", 41.25)])
    assert {scope: total.averaging_s for scope, total in found.items()} == {
        "whole_body": 1800,
        "local": 360,
    }
    assert found["whole_body"].exposure_ratio == pytest.approx(1.0)
    assert found["whole_body"].verified


def test_s_without_an_s_row_is_taken_as_the_e_of_a_plane_wave() -> None:
    found = by_scope("eu-2013-35", [Level(100e6, "S", s_from_e(61.0))], "occupational")
    (term,) = found["whole_body"].terms
    assert (term.quantity, term.exposure_ratio) == ("E", pytest.approx(1.0))
    assert "plane wave" in term.note


def test_e_and_h_at_one_frequency_count_once_and_the_larger() -> None:
    e, h = Level(100e6, "E", 27.7 / 2), Level(100e6, "H", 0.073)
    both = by_scope("icnirp-2020", [e, h])["whole_body"]
    assert both.exposure_ratio == pytest.approx(1.0)
    assert len(both.terms) == 2


def test_a_scope_without_a_level_at_a_frequency_says_lower_bound() -> None:
    levels = [Level(900e6, "E", 1.0), Level(5e9, "E", 1.0)]
    local = by_scope("ieee-c95.1-2019", levels)["local"]
    assert any("lower bound" in note and "900 MHz" in note for note in local.notes)
    assert not local.verified


def test_averaging_times_that_differ_are_said() -> None:
    levels = [Level(9e9, "S", 1.0), Level(20e9, "S", 1.0)]
    total = by_scope("icnirp-1998", levels)["whole_body"]
    assert total.averaging_s is None
    assert any("averaging time differs" in note for note in total.notes)


@pytest.mark.parametrize("hz", [9e3, 400e9])
def test_outside_the_set_is_an_error(hz: float) -> None:
    with pytest.raises(LimitError, match="the set covers 100 kHz to 300 GHz"):
        totals(limitsets.load("icnirp-2020"), "general_public", [Level(hz, "E", 1.0)])


levels_of_e = st.lists(
    st.tuples(st.floats(30e6, 3e11), st.floats(0.0, 1e3)), min_size=1, max_size=6
)


@given(levels_of_e, st.sampled_from(["icnirp-2020", "icnirp-1998", "eu-1999-519"]))
def test_doubled_field_is_four_times_the_ratio(
    given_levels: list[tuple[float, float]], set_id: str
) -> None:
    once = by_scope(set_id, [Level(hz, "E", e) for hz, e in given_levels])["whole_body"]
    twice = by_scope(set_id, [Level(hz, "E", 2 * e) for hz, e in given_levels])["whole_body"]
    assert twice.exposure_ratio == pytest.approx(4 * once.exposure_ratio, abs=1e-300)


@given(levels_of_e)
def test_the_total_is_the_sum_of_its_terms_and_no_order_matters(
    given_levels: list[tuple[float, float]],
) -> None:
    levels = [Level(hz, "E", e) for hz, e in given_levels]
    one = by_scope("icnirp-2020", levels)["whole_body"]
    other = by_scope("icnirp-2020", levels[::-1])["whole_body"]
    parts = sum(term.exposure_ratio for term in one.terms)
    assert one.exposure_ratio == pytest.approx(parts, rel=1e-12)
    assert other.exposure_ratio == pytest.approx(one.exposure_ratio, rel=1e-12)
