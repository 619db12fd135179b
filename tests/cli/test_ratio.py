"""fieldsill ratio: keys, sums, and mistakes."""

from __future__ import annotations

import pytest

from tests.cli.command import run

PUBLIC = ["ratio", "--set", "icnirp-2020", "--population", "general_public"]


def test_keys_and_sum(capsys: pytest.CaptureFixture[str]) -> None:
    """(3.2 / 41.25)^2 + 0.05 / 9, ICNIRP 2020 Table 5, general public."""
    found = run(capsys, [*PUBLIC, "--at", "900MHz=3.2V/m", "--at", "1.8GHz=0.05W/m2", "--json"])
    totals = {total["scope"]: total for total in found.document["totals"]}
    whole = totals["whole_body"]
    assert found.code == 0
    assert whole["averaging_s"] == 1800
    assert whole["exposure_ratio"] == pytest.approx((3.2 / 41.25) ** 2 + 0.05 / 9)
    e, s = whole["terms"]
    assert (e["frequency_hz"], e["quantity"], e["value"]) == (9e8, "E", 3.2)
    assert e["limit"] == pytest.approx(41.25)
    assert (s["quantity"], s["limit"]) == ("S", pytest.approx(9.0))
    assert s["exposure_ratio"] == pytest.approx(0.05 / 9)
    assert totals["local"]["averaging_s"] == 360


def test_above_a_limit_is_an_answer_and_not_a_failure(capsys: pytest.CaptureFixture[str]) -> None:
    found = run(capsys, [*PUBLIC, "--at", "900MHz=100"])
    assert found.code == 0
    assert "(sum above 1, without uncertainty)" in found.out


def test_bare_numbers_are_hz_and_v_per_m(capsys: pytest.CaptureFixture[str]) -> None:
    bare = run(capsys, [*PUBLIC, "--at", "9e8=3.2", "--json"]).document
    assert bare == run(capsys, [*PUBLIC, "--at", "900MHz=3.2V/m", "--json"]).document


@pytest.mark.parametrize(
    ("text", "same"),
    [("3200mV/m", "3.2V/m"), ("1mW/cm2", "10W/m2"), ("10uW/cm2", "0.1W/m2"), ("5mA/m", "0.005A/m")],
)
def test_units(capsys: pytest.CaptureFixture[str], text: str, same: str) -> None:
    one, other = (
        run(capsys, [*PUBLIC, "--at", f"1GHz={level}", "--json"]).document["totals"][0]
        for level in (text, same)
    )
    assert one["exposure_ratio"] == pytest.approx(other["exposure_ratio"])
    assert one["exposure_ratio"] > 0


def test_for_people(capsys: pytest.CaptureFixture[str]) -> None:
    out = run(capsys, [*PUBLIC, "--at", "3.5GHz=6V/m"]).out
    assert "whole-body, mean over 30 min: total exposure ratio 0.009556" in out
    assert "(sum below 1, without uncertainty)" in out
    assert "3.5 GHz: S 0.09556 W/m2 against 10 W/m2 (Table 5): 0.009556" in out
    assert "E taken as S of a plane wave" in out
    assert "local codes" in out


@pytest.mark.parametrize(
    ("at", "words"),
    [
        (["10MHz=20V/m"], "(cannot be decided (E alone))"),
        (["10MHz=200V/m"], "(sum above 1; cannot be decided (E alone))"),
        (["10MHz=5mA/m"], "(cannot be decided (H alone))"),
        (["10MHz=20V/m", "900MHz=3V/m"], "(cannot be decided (E alone))"),
        (["10MHz=20V/m", "10MHz=5mA/m"], "(sum below 1, without uncertainty)"),
        (["30MHz=3V/m"], "(sum below 1, without uncertainty)"),
    ],
)
def test_below_30_mhz_one_field_alone_decides_nothing(
    capsys: pytest.CaptureFixture[str], at: list[str], words: str
) -> None:
    """ICNIRP 2020, notes to the reference levels."""
    levels = [part for level in at for part in ("--at", level)]
    out = run(capsys, [*PUBLIC, *levels]).out
    assert words in out.split("whole-body")[1].splitlines()[0]
    assert "below the limit" not in out
    said = run(capsys, [*PUBLIC, *levels, "--json"]).document["cannot_be_decided"]
    assert said == ("E alone" if "E alone" in words else "H alone" if "H alone" in words else None)


def test_a_sum_that_lacks_a_level_is_one_of_a_part(capsys: pytest.CaptureFixture[str]) -> None:
    """The set holds local levels above 6 GHz only; at 5 MHz it has some that are not averaged."""
    arguments = ["ratio", "--set", "ieee-c95.1-2019", "--population", "general_public"]
    levels = ["900MHz=3V/m", "200GHz=0.1W/m2"]
    out = run(capsys, [*arguments, *(part for level in levels for part in ("--at", level))]).out
    whole, local = (line for line in out.splitlines() if "total exposure ratio" in line)
    assert "(sum below 1, without uncertainty)" in whole
    assert "(sum of a part below 1, without uncertainty)" in local


def test_figures_from_memory_say_so(capsys: pytest.CaptureFixture[str]) -> None:
    arguments = ["ratio", "--set", "icnirp-2020", "--population", "occupational"]
    out = run(capsys, [*arguments, "--at", "900MHz=1"]).out
    assert "figures from memory" in out


@pytest.mark.parametrize(
    ("at", "says"),
    [
        ("900MHz=-3V/m", "0 or above"),
        ("900MHz=nanV/m", "not a number"),
        ("900MHz=1e999V/m", "finite"),
        ("900MHz=1e200V/m", "'1e200V/m': no level is above 1e+09 V/m"),
        ("900MHz=1e16W/m2", "no level is above"),
        ("900MHz=1e7A/m", "no level is above"),
        ("900MHz=3parsec", "'parsec' is not known"),
        ("900MHz=3MHz", "'MHz' is not known"),
        ("900MHz", "FREQUENCY=LEVEL"),
        ("900MHz=", "not a number"),
        ("=3V/m", "not a number"),
        ("0Hz=3V/m", "not a frequency"),
        ("9kHz=3V/m", "the set covers 100 kHz to 300 GHz"),
    ],
)
def test_mistakes_are_one_line(capsys: pytest.CaptureFixture[str], at: str, says: str) -> None:
    found = run(capsys, [*PUBLIC, "--at", at])
    assert found.code == 2
    assert found.out == ""
    assert says in found.one_line
