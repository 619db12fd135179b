"""Budgets of any unit against JCGM 100:2008, H.1, and laws that hold for every budget."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.core.budget import (
    Contribution,
    combined,
    effective_degrees,
    factors,
    independent,
    linear,
    table,
)
from monitor.core.distributions import factor
from monitor.core.errors import CalibrationError

THIRDS = np.full(3, 1.0 / 3.0)
STANDARD_NM = 50_000_623.0
"""Length of the standard of JCGM 100:2008, H.1, at 20 degC: 50.000 623 mm."""

DIFFERENCE = (
    Contribution("repeated observations", 5.8, "normal", degrees_of_freedom=24),
    Contribution("random effects of the comparator", 3.9, "normal", degrees_of_freedom=5),
    Contribution("systematic effects of the comparator", 6.7, "normal", degrees_of_freedom=8),
)
GAUGE = (
    Contribution("length of the standard", 75.0, "expanded", 3.0, degrees_of_freedom=18),
    *DIFFERENCE,
    Contribution("expansion of the standard, 1/K", 2e-6, "rectangular", sensitivity=0.0),
    Contribution("mean deviation from 20 degC, K", 0.2, "normal", sensitivity=0.0),
    Contribution("cyclic variation, K", 0.5, "u_shaped", sensitivity=0.0),
    Contribution(
        "difference of expansion, 1/K", 1e-6, "rectangular",
        degrees_of_freedom=50, sensitivity=-STANDARD_NM * -0.1,
    ),
    Contribution(
        "difference of temperature, K", 0.05, "rectangular",
        degrees_of_freedom=2, sensitivity=-STANDARD_NM * 11.5e-6,
    ),
)  # fmt: skip


def test_end_gauge_of_gum_h_1() -> None:
    """JCGM 100:2008, H.1, all nine lines: unrounded 31.664 nm, 16.752 (printed 32 and 16)."""
    found = linear(GAUGE)
    assert found.u == pytest.approx(31.664, abs=5e-4)
    assert found.degrees_of_freedom == pytest.approx(16.752, abs=5e-4)


def test_difference_of_gum_h_1_3_2() -> None:
    """u(d) = 9.7 nm with 25.6 degrees of freedom as printed; unrounded 9.682 and 25.447."""
    found = linear(DIFFERENCE)
    assert found.u == pytest.approx(9.682, abs=5e-4)
    assert found.degrees_of_freedom == pytest.approx(25.447, abs=5e-4)
    assert found.u == pytest.approx(9.7, abs=0.05)
    assert found.degrees_of_freedom == pytest.approx(25.6, abs=0.2)


def test_standard_uncertainties_of_gum_h_1_line_by_line() -> None:
    """JCGM 100:2008, table H.1: 25, 9.7 (three lines), 0, 0, 0, 2.9 and 16.6 nm."""
    u_nm = [round(row.u, 1) for row in table([GAUGE], np.ones(1))]
    assert u_nm == [25.0, 5.8, 3.9, 6.7, 0.0, 0.0, 0.0, 2.9, 16.6]


def test_99_percent_of_gum_h_1() -> None:
    """GUM H.1.6: t99(16) = 2.92 (NIST TN 1297, table B.1) times 32 nm is 93 nm."""
    degrees = math.floor(linear(GAUGE).degrees_of_freedom)
    k = factor([("normal", 1.0, degrees)], 0.99)
    assert k == pytest.approx(2.92, abs=0.005)
    assert k * round(linear(GAUGE).u) == pytest.approx(93, abs=0.5)


def test_three_components_of_gum_g_4_1() -> None:
    """JCGM 100:2008, G.4.1, from memory: 0.25, 0.57, 0.82 % with 9, 4, 14: 1.03 % with 19.0."""
    lines = [
        Contribution(f"X{i}", u, "normal", degrees_of_freedom=v)
        for i, (u, v) in enumerate([(0.25, 9), (0.57, 4), (0.82, 14)])
    ]
    found = linear(lines)
    assert found.u == pytest.approx(1.03, abs=0.005)
    assert found.degrees_of_freedom == pytest.approx(19.0, abs=0.05)


def test_ratio_of_two_lines_by_its_sensitivities() -> None:
    """SNL ENGR224: y = X1 / X2 * Yu, u(y) = 0.00494; sensitivities are the partial derivatives."""
    x1, x2, yu = 0.182, 0.1823, 0.6978
    lines = [
        Contribution("X1", 0.00093, "normal", degrees_of_freedom=9, sensitivity=yu / x2),
        Contribution("X2", 0.00058, "normal", degrees_of_freedom=19, sensitivity=-x1 * yu / x2**2),
        Contribution("Yu", 0.0026, "normal", degrees_of_freedom=19, sensitivity=x1 / x2),
    ]
    assert linear(lines).u == pytest.approx(0.00494, abs=1e-5)


def test_mismatch_of_two_reflections() -> None:
    """Service guide of a power meter: 0.0244 and 0.0244, U-shaped, 0.00042 of the voltage."""
    line = Contribution("mismatch", 0.0244 * 0.0244, "u_shaped")
    assert line.u == pytest.approx(0.00042, abs=5e-6)
    assert replace(line, sensitivity=2.0).u == pytest.approx(2 * line.u)  # of the power


def test_shared_lines_are_one_error_before_degrees_of_freedom_are_combined() -> None:
    """By hand: u = 1 with 4 and, of three times 0.6 apart, 0.6/root 3 with 3 x 9."""
    shared = Contribution("antenna", 1.0, "normal", shared=True, degrees_of_freedom=4)
    own = Contribution("detector", 0.6, "normal", degrees_of_freedom=9)
    found = combined([[shared, own]] * 3, THIRDS)
    u2 = 1.0 + 0.12
    assert found.u == pytest.approx(math.sqrt(u2))
    assert found.degrees_of_freedom == pytest.approx(u2**2 / (1 / 4 + 3 * 0.2**4 / 9))


def test_shared_errors_of_opposite_sign_cancel() -> None:
    """GUM 5.2.2, note 1: fully correlated effects add with their signs."""
    up = Contribution("temperature", 5.0, "rectangular", shared=True, sensitivity=0.02)
    found = combined([[up], [replace(up, sensitivity=-0.02)]], np.array([0.5, 0.5]))
    assert found.u == 0.0
    assert found.degrees_of_freedom == math.inf


def test_one_error_cannot_be_known_twice_differently() -> None:
    line = Contribution("cable", 1.0, "normal", shared=True, degrees_of_freedom=5)
    with pytest.raises(CalibrationError, match="with 5 and with 6 degrees of freedom"):
        independent([[line], [replace(line, degrees_of_freedom=6)]])


@pytest.mark.parametrize(
    ("more", "words"),
    [
        ({"degrees_of_freedom": 0.5}, "at least 1"),
        ({"degrees_of_freedom": math.nan}, "at least 1"),
        ({"sensitivity": math.inf}, "must be finite"),
    ],
)
def test_a_line_that_means_nothing_is_refused(more: dict[str, float], words: str) -> None:
    with pytest.raises(CalibrationError, match=words):
        Contribution("line", 1.0, "normal", **more)  # type: ignore[arg-type]


def test_table_of_three_axes() -> None:
    """Equal lines are one row; what is shared but differs has no single value."""
    shared = Contribution("antenna", 1.2, "expanded", 2.0, shared=True, kind="antenna")
    own = Contribution("mismatch", 0.3, "u_shaped", sensitivity=2.0, degrees_of_freedom=8)
    band = [Contribution("band", half, "rectangular", shared=True) for half in (0.5, 0.6, 0.7)]
    rows = table([[shared, own, line] for line in band], THIRDS)
    assert [(row.name, row.channels, row.shared) for row in rows] == [
        ("antenna", 3, True),
        ("mismatch", 3, False),
        ("band", 3, True),
    ]
    assert [row.u for row in rows] == pytest.approx(
        [0.6, 0.6 / math.sqrt(2) / math.sqrt(3), 0.6 / math.sqrt(3)]
    )
    assert (rows[0].k, rows[1].k, rows[1].sensitivity) == (2.0, None, 2.0)
    assert (rows[1].value, rows[2].value, rows[1].degrees_of_freedom) == (0.3, None, 8)


def test_bounds_are_unequal() -> None:
    """LadyBug, p. 42, and percent-to-dB: +0.084/-0.086 dB are +-1.95 % of a power."""
    assert factors(0.084).s_high == pytest.approx(1.0195, abs=1e-4)
    assert factors(0.086).s_low == pytest.approx(0.9805, abs=1.5e-4)
    assert factors(0.34).s_high == pytest.approx(1.081, abs=5e-4)  # HP 436A, fig. 3-11
    six = factors(6.0)
    assert (six.e_low, six.e_high) == pytest.approx((0.501, 1.995), abs=5e-4)
    assert six.s_high == pytest.approx(six.e_high**2)


lines = st.builds(
    Contribution,
    name=st.sampled_from("abcdefgh"),
    value=st.floats(0.01, 3.0),
    distribution=st.sampled_from(["normal", "rectangular", "triangular", "u_shaped", "expanded"]),
    k=st.floats(1.0, 3.0),
    degrees_of_freedom=st.one_of(st.just(math.inf), st.floats(1.0, 200.0)),
    sensitivity=st.floats(0.1, 10.0),
)
budgets = st.lists(st.lists(lines, min_size=1, max_size=5), min_size=3, max_size=3)


@settings(max_examples=60, deadline=None)
@given(budgets)
def test_shares_of_the_variance_add_up_to_one(budget: list[list[Contribution]]) -> None:
    rows = table(budget, THIRDS)
    assert sum(row.variance_share for row in rows) == pytest.approx(1.0, rel=1e-9)
    whole = combined(budget, THIRDS).u
    assert math.hypot(*(row.u for row in rows)) == pytest.approx(whole, rel=1e-9)


@settings(max_examples=100, deadline=None)
@given(budgets, st.floats(1e-9, 1e9))
def test_effective_degrees_lie_between_the_fewest_and_their_sum(
    budget: list[list[Contribution]], unit: float
) -> None:
    """GUM G.4.1, note: no more than the sum; and no unit changes them."""
    errors = [error.at(THIRDS) for error in independent(budget)]
    degrees = [v for _, _, v in errors]
    found = effective_degrees(errors)
    assert min(degrees) * (1 - 1e-9) <= found <= sum(degrees) * (1 + 1e-9)
    scaled = [(shape, u * unit, v) for shape, u, v in errors]
    assert effective_degrees(scaled) == pytest.approx(found, rel=1e-9)
