"""The page claims no more than is known: bounds, shares, verdicts and what is left."""

from __future__ import annotations

import html
import re
from pathlib import Path
from typing import Any

import pytest

from dashboard import bounds, told, words
from dashboard.bounds import Kind
from monitor import limitsets
from monitor.core.flags import LOWER_BOUND
from monitor.core.flags import words as flag_words
from monitor.record.types import EventRow
from tests.dashboard.fakes import client_over, controlled, dead_axis, edited, snapshot

LOWER = flag_words(int(LOWER_BOUND))
BELOW_RANGE = "below the detection limit"
TWICE_DB = 3.0103


def _markup(now: dict[str, Any], folder: Path) -> str:
    return html.unescape(client_over(now, folder).get("/").text)


def _page(now: dict[str, Any], folder: Path) -> str:
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", _markup(now, folder)))


def _heading(now: dict[str, Any], folder: Path) -> str:
    return _page(now, folder).split("Alarms")[0]


def _ratio(now: dict[str, Any]) -> bounds.Ratio:
    return bounds.ratio(now["exposures"][0], now["fields"], now["flags"])


def test_the_interval_is_that_of_the_ratio_and_not_of_the_field(tmp_path: Path) -> None:
    now = edited(snapshot(0.3), ratio_low=0.2, ratio_high=0.4, u_db=TWICE_DB, f_u_db=9.0)
    assert _ratio(now).bottom == pytest.approx(0.1, rel=1e-4)
    assert _ratio(now).top == pytest.approx(0.8, rel=1e-4)
    assert "between 0.099 and 0.81, by gaps and expanded uncertainty" in _page(now, tmp_path)


def test_without_an_uncertainty_of_the_ratio_none_is_borrowed(tmp_path: Path) -> None:
    now = edited(snapshot(0.3), ratio_low=0.2, ratio_high=0.4, u_db=None, f_u_db=9.0)
    said = "between 0.20 and 0.40, by gaps alone; the uncertainty is not stated"
    assert said in _page(now, tmp_path)


def _conforming(**changes: Any) -> dict[str, Any]:
    return edited(controlled(0.2), **{
        "ratio_low": 0.15, "ratio_mean": 0.2, "ratio_high": 0.25, "u_db": TWICE_DB,
        "verdict": "conforms", "verified": True, **changes,
    })  # fmt: skip


def test_left_is_what_the_upper_end_leaves_rounded_down(tmp_path: Path) -> None:
    page = _page(_conforming(), tmp_path)
    assert "left 0.49" in page
    assert "0.49 of the limit is left" in page
    assert "Nothing of the limit is left" in _page(_conforming(ratio_high=0.6), tmp_path)


@pytest.mark.parametrize(
    ("changes", "why"),
    [
        (
            {"verdict": "undecided", "reasons": ["figures", "calibration overdue"]},
            "calibration overdue",
        ),
        ({"f_flags": ["converter clipped"]}, "the figure is a lower bound: converter clipped"),
        ({"u_db": None}, "the uncertainty is not stated"),
        (
            {"verdict": "undecided", "reasons": [], "ratio_high": 0.9},
            "the interval holds the limit",
        ),
    ],
)
def test_nothing_is_left_where_something_forbids_it(
    changes: dict[str, Any], why: str, tmp_path: Path
) -> None:
    markup = _markup(_conforming(**changes), tmp_path)
    page = re.sub(r"<[^>]+>", " ", markup)
    assert re.search(rf"What is left cannot be said: {why}", page)
    assert "left 0" not in page
    assert "of the limit is left" not in page
    assert "not known" in page
    assert re.search(r'fill="url\(#hatch\)" x="70" y="148', markup)


def test_above_the_limit_only_where_it_is_exceeded(tmp_path: Path) -> None:
    assert "Above the limit at the monitor's antenna: 1.8 of it" in _heading(
        snapshot(1.8), tmp_path
    )
    heading = _heading(snapshot(1.2), tmp_path)
    assert "Above the limit" not in heading
    assert "At or above the limit at the monitor's antenna: 1.2 of it; cannot be decided" in heading
    assert "the interval holds the limit" in heading


def test_little_valid_data_is_said_before_its_figure(tmp_path: Path) -> None:
    now = edited(snapshot(1.4), ratio_low=0.0039, verdict="undecided", f_valid_share=5.5 / 1800)
    heading = _heading(now, tmp_path)
    assert "Only 5 s of 30 min are valid; at least 0.0024 of the limit" in heading
    assert "bove the limit" not in heading
    assert "1.4 in the 5 s of 30 min that are valid" in _page(now, tmp_path)


def test_the_share_is_that_of_the_same_averaging_time(tmp_path: Path) -> None:
    now = edited(snapshot(1.4), verdict="undecided", ratio_low=0.014)
    now["fields"][0]["valid_share"] = 0.01
    assert "At or above the limit" in _heading(now, tmp_path)
    now["fields"][1]["valid_share"] = 0.01
    assert "Only 18 s of 30 min are valid" in _heading(now, tmp_path)


def test_a_dead_axis_hides_no_excess(tmp_path: Path) -> None:
    page = _page(dead_axis(), tmp_path)
    heading = page.split("Alarms")[0]
    assert "Above the limit at the monitor's antenna: at least 27 of it" in heading
    assert "at least 27 of the limit exceeds" in page
    assert "level at least 27 ↑" in page
    assert "at least 200 V/m" in page
    assert "200 V/m; highest not known" in page
    assert "no figure V/m" not in page
    assert 'fill="url(#cross)"' in _markup(dead_axis(), tmp_path)
    undecided = _page(dead_axis(0.3, "undecided"), tmp_path)
    assert "At least 0.3" in undecided
    assert "a lower bound: it cannot be said to be below the alert levels" in undecided
    assert "no moment is valid on every channel" in undecided


def test_the_drawn_limit_is_the_worst_known_with_or_without_a_mean(tmp_path: Path) -> None:
    now = snapshot(0.4)
    now["exposures"][4].update(ratio_low=27.0, ratio_mean=None, ratio_high=None, verdict="exceeds")
    assert "47 CFR 1.1310, general public, whole body, 30 min The ledge" in _page(now, tmp_path)


def test_an_end_at_nothing_is_left_out() -> None:
    now = edited(snapshot(0.3), ratio_low=0.0, ratio_high=0.4, u_db=TWICE_DB)
    assert told.interval(_ratio(now)) == "not above 0.81, by gaps and expanded uncertainty"


def test_a_verdict_stands_without_a_figure_below_the_limit(tmp_path: Path) -> None:
    """1.2 less 1.64 u of 0.45 dB is above 1, less U of 0.9 dB below: the verdict is one-sided."""
    heading = _heading(edited(dead_axis(1.2), u_db=0.9), tmp_path)
    assert "Above the limit at the monitor's antenna" in heading
    assert "at least" not in heading


@pytest.mark.parametrize("flag", LOWER)
@pytest.mark.parametrize("place", ["snapshot", "field"])
def test_a_lower_bound_is_never_below_a_level(flag: str, place: str, tmp_path: Path) -> None:
    now = snapshot(0.31, flags=[flag])
    if place == "field":
        now = edited(snapshot(0.31), f_flags=[flag])
    page = _page(now, tmp_path)
    heading = page.split("Alarms")[0]
    assert "Below" not in heading
    assert "At least 0.19 of the limit" in heading  # 0.31 * 0.98 / 10^(2.0 / 10), U counted
    assert "a lower bound: it cannot be said to be below the alert levels" in heading
    assert "how much more is not known" in page
    assert "at least 16 V/m" in page  # 22.05 / 10^(2.6 / 20), U counted
    assert "U is counted in the bound" in page
    assert "not below" not in page
    assert "22 V/m; highest not known" in page
    assert "The line is what is known at the least" in page


def test_a_lower_bound_without_levels_is_not_below_the_limit(tmp_path: Path) -> None:
    heading = _heading(snapshot(0.31, flags=[LOWER[0]], levels=[]), tmp_path)
    assert "it cannot be said to be below the limit" in heading


def test_an_upper_bound_says_below(tmp_path: Path) -> None:
    now = edited(snapshot(0.002), f_flags=[BELOW_RANGE])
    page = _page(now, tmp_path)
    assert "Below the alert levels" in page.split("Alarms")[0]
    assert "below 0.0021 of the limit" in page
    assert "below 1.9 V/m" in page
    assert "lowest not known; 1.9 V/m" in page
    assert "between" not in page.split("Exposure ratios")[1].split("Instrument")[0]


def test_flags_either_way_leave_a_bound_neither_way(tmp_path: Path) -> None:
    now = edited(snapshot(0.31), f_flags=[BELOW_RANGE, LOWER[0]])
    heading = _heading(now, tmp_path)
    assert "What is seen stays below" in heading
    assert "neither an upper nor a lower bound: it cannot be said to be below" in heading
    assert _ratio(now).kind is Kind.OPEN
    label = told.level_label(_ratio(now), filled=False)
    assert label.startswith("seen: below 0.")
    assert len(label) <= 24  # what the recess of 260 has room for at 18 px


def test_reasons_in_plain_words() -> None:
    now = edited(snapshot(0.9), ratio_low=0.85, ratio_high=0.95, u_db=2.0)
    assert told.why(_ratio(now), ["0.6 to 1.4 of the limit; the limit lies between"]) == [
        "the interval holds the limit"
    ]


def test_what_is_not_judged_is_said_once(tmp_path: Path) -> None:
    assert _page(snapshot(), tmp_path).count("Not judged here: exposures shorter than") == 1


def test_what_is_not_judged_names_every_kind_in_the_limit_sets() -> None:
    """Source: the rows of the limit sets themselves."""
    found = set()
    for set_id in limitsets.available():
        for row in limitsets.load(set_id).rows:
            found |= {
                phrase
                for phrase, holds in {
                    "exposures shorter than the averaging time": row.scope == "brief",
                    "pulses and peaks": row.measure != "rms",
                    "nerve stimulation below 10 MHz": row.scope == "instantaneous",
                    "currents in limbs and on contact": row.quantity == "I",
                    "the magnetic field": row.quantity in ("H", "B"),
                    "averaging times that change with frequency": row.averaging_b != 0,
                }.items()
                if holds
            }
    assert len(found) == 6
    assert all(phrase in words.NOT_JUDGED for phrase in found)


def test_an_alarm_in_the_past_claims_what_was_sure_then() -> None:
    from dashboard.events import line

    body: dict[str, object] = {
        "raised": True, "exposure_ratio": 1.4, "ratio_low": 0.526, "ratio_mean": 1.4,
        "valid_share": 0.375,
    }  # fmt: skip
    said = line(EventRow(0, 1, 0, "alarm", "half", body)).text
    assert (
        said
        == "went over, at 0.52 of the limit, gaps as nothing; 37 % of the averaging time is valid"
    )
    enough = line(EventRow(0, 1, 0, "alarm", "half", {**body, "valid_share": 0.9})).text
    assert enough == "went over, at 1.4 of the limit"
    lone = {**body, "ratio_mean": None, "ratio_low": 27.0, "exposure_ratio": 27.0}
    assert (
        "at 27 of the limit, gaps as nothing" in line(EventRow(0, 1, 0, "alarm", "half", lone)).text
    )


@pytest.mark.parametrize(
    ("value", "down", "up"),
    [
        (0.3, "0.30", "0.30"), (0.319, "0.31", "0.32"), (27.0, "27", "27"),
        (0.9999, "0.999", "1.000"), (1.0001, "1.00", "1.01"),
        (123.4, "120", "130"), (3e-7, "0", "0.00001"), (0.0, "0", "0"),
    ],
)  # fmt: skip
def test_rounding_towards_what_is_sure(value: float, down: str, up: str) -> None:
    assert (words.rounded_down(value), words.rounded_up(value)) == (down, up)
