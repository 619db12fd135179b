"""The recess: its ledge is the limit, and heights are proportional."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dashboard import picture
from dashboard.picture import FLOOR_Y, HEAD_Y, LABEL_STEP, LEDGE_Y


def _exposure(mean: float | None, low: float | None = None, high: float | None = None) -> dict:
    return {
        "ratio_mean": mean,
        "ratio_low": mean if low is None else low,
        "ratio_high": mean if high is None else high,
    }


def test_the_ledge_is_the_limit_and_the_floor_is_nothing() -> None:
    assert picture.y_of(1.0) == LEDGE_Y
    assert picture.y_of(0.0) == FLOOR_Y
    assert picture.y_of(picture.TOP_RATIO) == HEAD_Y


@given(st.floats(0, 1))
def test_height_is_proportional_to_the_ratio(ratio: float) -> None:
    drawn = picture.draw(_exposure(ratio), filled=True)
    assert drawn.level_y == pytest.approx(FLOOR_Y - ratio * (FLOOR_Y - LEDGE_Y), abs=0.006)


def test_above_the_ledge_and_beyond_the_lintel() -> None:
    over = picture.draw(_exposure(1.2), filled=False)
    assert over.over
    assert not over.beyond
    assert over.level_y is not None
    assert HEAD_Y < over.level_y < LEDGE_Y
    beyond = picture.draw(_exposure(3.0), filled=False)
    assert beyond.beyond
    assert beyond.level_y == HEAD_Y


def test_a_level_at_the_limit_is_not_over() -> None:
    assert not picture.draw(_exposure(1.0), filled=True).over


@pytest.mark.parametrize("exposure", [None, _exposure(None), _exposure(float("nan"))])
def test_without_a_figure_the_recess_is_boarded_up(exposure: dict | None) -> None:
    drawn = picture.draw(exposure, filled=True)
    assert drawn.shut
    assert drawn.level_y is None
    assert drawn.left_ratio is None


def test_the_bracket_holds_gaps_and_uncertainty() -> None:
    low, high = picture.interval(0.2, 0.4, 3.0103)
    assert (low, high) == (pytest.approx(0.1, rel=1e-4), pytest.approx(0.8, rel=1e-4))
    drawn = picture.draw(_exposure(0.3, 0.2, 0.4), filled=False, u_db=3.0103)
    assert drawn.band == (
        pytest.approx(picture.y_of(0.8), abs=0.05), pytest.approx(picture.y_of(0.1), abs=0.05),
    )  # fmt: skip


def test_what_is_left_counts_gaps_at_their_maximum() -> None:
    drawn = picture.draw(_exposure(0.3, 0.2, 0.45), filled=True)
    assert drawn.left_ratio == pytest.approx(0.55)
    assert picture.draw(_exposure(1.3), filled=True).left_ratio == 0.0


def test_notches_stand_at_their_level_and_keep_their_labels_apart() -> None:
    levels = [{"ratio": r, "name": f"level {r}"} for r in (0.5, 0.48, 0.46, 0.99, 1.0, 1.2)]
    found = picture.notches([*levels, {"ratio": 0.5, "name": "another"}])
    assert [notch.ratio for notch in found] == [0.99, 0.5, 0.48, 0.46]
    assert all(notch.y == picture.y_of(notch.ratio) for notch in found)
    assert found[1].names == ("level 0.5", "another")
    tops = [LEDGE_Y + picture.LEDGE_THICK, *(notch.label_y for notch in found)]
    assert all(b - a >= LABEL_STEP for a, b in zip(tops, tops[1:]))


@given(st.floats(0, 4))
def test_words_about_the_level_stay_in_the_recess_and_off_the_ledge(ratio: float) -> None:
    drawn = picture.draw(_exposure(ratio), filled=True)
    assert HEAD_Y + 10 <= drawn.label_y <= FLOOR_Y
    assert not LEDGE_Y < drawn.label_y < LEDGE_Y + 14
