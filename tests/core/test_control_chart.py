"""Shewhart chart of individuals: the constant, an example by hand, and what holds for any figures.

ISO 7870-2 (from memory): centre at the mean, sigma as mean moving range over d2, lines at 2 and 3
sigma. The baseline of eight checks and the floor of sigma are our choice.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.core.control_chart import BASELINE, D2, State, chart

HAND = [0.10, 0.30, 0.20, 0.40, 0.20, 0.00, 0.20, 0.20]
"""Worked by hand: sum 1.60, mean 0.20; moving ranges 0.2 0.1 0.2 0.2 0.2 0.2 0.0, sum 1.1, mean
0.157143; sigma = 0.157143 / 1.128379 = 0.139264."""


def test_the_constant_is_the_mean_range_of_two_normal_draws() -> None:
    assert pytest.approx(2 / math.sqrt(math.pi), rel=1e-15) == D2
    assert round(D2, 3) == 1.128  # as the tables of control charts print it (from memory)
    draws = np.random.default_rng(7870).normal(size=(400_000, 2))
    ranges = np.abs(draws[:, 0] - draws[:, 1])
    assert ranges.mean() == pytest.approx(D2, abs=4 * ranges.std() / math.sqrt(len(ranges)))


def test_an_example_worked_by_hand() -> None:
    found = chart(HAND, 0.0)
    assert found.lines is not None
    assert found.lines.centre == pytest.approx(0.20, abs=1e-12)
    assert found.lines.sigma == pytest.approx(0.139264, abs=5e-7)
    assert found.lines.warning == pytest.approx((-0.078528, 0.478528), abs=2e-6)
    assert found.lines.action == pytest.approx((-0.217792, 0.617792), abs=2e-6)
    assert set(found.states) == {State.WITHIN}


@pytest.mark.parametrize(
    ("value", "state"),
    [
        (0.47, State.WITHIN), (0.48, State.WARNING), (-0.08, State.WARNING),
        (0.61, State.WARNING), (0.62, State.ACTION), (-0.22, State.ACTION),
    ],
)  # fmt: skip
def test_a_later_check_is_held_against_the_baseline(value: float, state: State) -> None:
    assert chart([*HAND, value], 0.0).states[-1] is state


def test_before_eight_checks_there_are_no_lines() -> None:
    assert BASELINE == 8
    found = chart([*HAND[:6], 99.0], 0.0)
    assert found.lines is None
    assert set(found.states) == {State.NO_LINES}
    assert chart([], 0.1).states == ()


def test_a_lucky_baseline_is_held_up_by_the_floor() -> None:
    lucky = [0.1] * 8 + [0.2]
    assert chart(lucky, 0.0).states[-1] is State.ACTION
    found = chart(lucky, 0.05)
    assert found.lines is not None
    assert (found.lines.sigma, found.lines.floored) == (0.05, True)
    assert found.states[-1] is State.WITHIN
    assert not chart(HAND, 0.05).lines.floored  # type: ignore[union-attr]


figures = st.lists(st.floats(-30, 30), min_size=8, max_size=30)


@given(figures, st.floats(0, 3), st.floats(-20, 20))
def test_a_shift_of_all_moves_the_lines_with_it(
    values: list[float], floor_db: float, by: float
) -> None:
    one, two = chart(values, floor_db).lines, chart([v + by for v in values], floor_db).lines
    assert one is not None
    assert two is not None
    assert two.centre - one.centre == pytest.approx(by, abs=1e-9)
    assert two.sigma == pytest.approx(one.sigma, abs=1e-9)


@given(figures, st.floats(0, 3))
def test_the_lines_lie_in_order_and_what_follows_does_not_move_them(
    values: list[float], floor_db: float
) -> None:
    found = chart(values, floor_db)
    assert found.lines is not None
    assert found.lines.sigma >= floor_db
    low, high = found.lines.action
    assert low <= found.lines.warning[0] <= found.lines.centre
    assert found.lines.centre <= found.lines.warning[1] <= high
    assert chart(values[:8], floor_db).lines == found.lines
    beyond = [not low <= value <= high for value in values]
    assert [state is State.ACTION for state in found.states] == beyond


def test_of_an_unchanged_instrument_few_checks_call_for_action() -> None:
    """Beyond 3 sigma lie 0.27 % of normal draws; eight checks estimate sigma poorly, so more."""
    rng = np.random.default_rng(3)
    actions = [chart(rng.normal(0, 0.1, 9), 0.1).states[-1] is State.ACTION for _ in range(4000)]
    assert 0.0005 < np.mean(actions) < 0.012
