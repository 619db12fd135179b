"""The recess: its ledge is the limit, and heights are proportional."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dashboard import picture
from dashboard.bounds import Ratio, Window
from dashboard.picture import FLOOR_Y, HEAD_Y, LABEL_STEP, LEDGE_Y

U_DB = 3.0103
"""A factor of two."""


def _ratio(
    mean: float | None, low: float | None = None, high: float | None = None, *,
    u_db: float | None = 0.0, verdict: str = "undecided", share: float = 1.0,
    lower: tuple[str, ...] = (), upper: tuple[str, ...] = (),
) -> Ratio:  # fmt: skip
    low, high = mean if low is None else low, mean if high is None else high
    return Ratio(low, mean, high, u_db, verdict, Window(1800, share, lower, upper))


def test_the_ledge_is_the_limit_and_the_floor_is_nothing() -> None:
    assert picture.y_of(1.0) == LEDGE_Y
    assert picture.y_of(0.0) == FLOOR_Y
    assert picture.y_of(picture.TOP_RATIO) == HEAD_Y


@given(st.floats(0, 1))
def test_height_is_proportional_to_the_ratio(ratio: float) -> None:
    drawn = picture.draw(_ratio(ratio), filled=True)
    assert drawn.level_y == pytest.approx(FLOOR_Y - ratio * (FLOOR_Y - LEDGE_Y), abs=0.006)


def test_above_the_ledge_and_beyond_the_lintel() -> None:
    over = picture.draw(_ratio(1.2, verdict="exceeds"), filled=False)
    assert over.over
    assert not over.beyond
    assert over.level_y is not None
    assert HEAD_Y < over.level_y < LEDGE_Y
    beyond = picture.draw(_ratio(3.0, verdict="exceeds"), filled=False)
    assert beyond.beyond
    assert beyond.level_y == HEAD_Y


def test_over_only_where_the_limit_is_known_to_be_exceeded() -> None:
    assert not picture.draw(_ratio(1.0), filled=True).over
    open_ = picture.draw(_ratio(1.2), filled=True)
    assert not open_.over
    assert open_.unknown == (open_.level_y, LEDGE_Y)


@pytest.mark.parametrize("ratio", [None, _ratio(None), _ratio(None, 0.0)])
def test_without_a_figure_the_recess_is_boarded_up(ratio: Ratio | None) -> None:
    drawn = picture.draw(ratio, filled=True)
    assert drawn.shut
    assert drawn.level_y is None


def test_the_bracket_holds_gaps_and_the_uncertainty_of_the_ratio() -> None:
    drawn = picture.draw(_ratio(0.3, 0.2, 0.4, u_db=U_DB), filled=False)
    assert drawn.band == (
        pytest.approx(picture.y_of(0.8), abs=0.05), pytest.approx(picture.y_of(0.1), abs=0.05),
    )  # fmt: skip
    assert drawn.ends == (True, True)


def test_a_lower_bound_stands_at_what_is_sure_and_its_bracket_has_no_upper_end() -> None:
    drawn = picture.draw(_ratio(0.3, 0.2, 0.4, lower=("converter clipped",)), filled=False)
    assert drawn.level_y == picture.y_of(0.2)
    assert drawn.ends == (False, True)
    assert drawn.band is not None
    assert drawn.band[0] == HEAD_Y
    lone = picture.draw(Ratio(27.0, None, None, None, "exceeds", Window(1800, 0.0, (), ())),
                        filled=False)  # fmt: skip
    assert lone.over
    assert lone.beyond
    assert not lone.shut


def test_an_upper_bound_has_no_lower_end() -> None:
    drawn = picture.draw(_ratio(0.3, 0.2, 0.4, upper=("below the detection limit",)), filled=False)
    assert drawn.level_y == picture.y_of(0.4)
    assert drawn.ends == (True, False)


def test_free_space_begins_above_the_upper_end_and_only_where_it_conforms() -> None:
    figures = {"mean": 0.2, "low": 0.15, "high": 0.25, "u_db": U_DB}
    sure = picture.draw(_ratio(**figures, verdict="conforms"), filled=True)
    assert sure.unknown == (pytest.approx(picture.y_of(0.5), abs=0.05), sure.level_y)
    assert sure.space_y is not None
    assert LEDGE_Y < sure.space_y < sure.unknown[0]
    open_ = picture.draw(_ratio(**figures), filled=True)
    assert open_.unknown == (LEDGE_Y, open_.level_y)
    assert picture.draw(_ratio(**figures), filled=False).unknown is None


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
    drawn = picture.draw(_ratio(ratio), filled=True)
    assert HEAD_Y + 10 <= drawn.label_y <= FLOOR_Y
    assert not LEDGE_Y < drawn.label_y < LEDGE_Y + 14


@pytest.mark.parametrize("ratio", [0.02, 0.05, 0.2, 0.23, 0.25, 0.27, 0.5])
def test_no_label_of_a_level_stands_on_the_line(ratio: float) -> None:
    levels = [{"name": "a", "ratio": 0.25}, {"name": "b", "ratio": 0.02}]
    drawn = picture.draw(_ratio(ratio), filled=False, levels=levels)
    for notch in drawn.notches:
        top, bottom = notch.label_y - 13, notch.label_y + 4  # 14 px words: above and below
        assert drawn.level_y is not None
        assert not top < drawn.level_y < bottom, notch
