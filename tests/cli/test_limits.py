"""fieldsill limits: keys, edges of the tables, and mistakes."""

from __future__ import annotations

import pytest

from tests.cli.command import run


def test_keys_and_figures_at_a_frequency(capsys: pytest.CaptureFixture[str]) -> None:
    """ICNIRP 2020 Table 5, general public, 400 to 2000 MHz: 1.375 sqrt(f) V/m, f / 200 W/m2."""
    found = run(
        capsys,
        ["limits", "--set", "icnirp-2020", "--population", "general_public",
         "--frequency", "900MHz", "--json"],
    )  # fmt: skip
    document = found.document
    assert found.code == 0
    assert document["frequency_hz"] == 9e8
    (e,) = [x for x in document["limits"] if (x["scope"], x["quantity"]) == ("whole_body", "E")]
    assert e["value"] == pytest.approx(41.25)
    assert (e["set"], e["edition"], e["population"]) == ("icnirp-2020", "2020", "general_public")
    assert (e["unit"], e["averaging_s"], e["clause"]) == ("V/m", 1800, "Table 5")
    assert e["verified"] is True
    scopes = {x["scope"] for x in document["limits"]}
    assert scopes == {"whole_body", "local", "brief"}
    assert {x["population"] for x in document["limits"]} == {"general_public"}


def test_brief_rows_have_a_value_for_a_duration(capsys: pytest.CaptureFixture[str]) -> None:
    """ICNIRP 2020 Table 7 at 3.5 GHz, 1 s, general public: 1.441 kJ/m2 (from memory)."""
    arguments = ["limits", "--set", "icnirp-2020", "--frequency", "3.5GHz", "--json"]
    for more, expected in (([], None), (["--duration", "1s"], pytest.approx(1.441, rel=5e-4))):
        rows = run(capsys, [*arguments, *more]).document["limits"]
        (u,) = [r for r in rows if (r["quantity"], r["population"]) == ("U", "general_public")]
        assert u["value"] == expected
        assert u["verified"] is False


@pytest.mark.parametrize("frequency", ["99kHz", "101GHz"])
def test_outside_the_table_is_an_empty_list_and_a_reason(
    capsys: pytest.CaptureFixture[str], frequency: str
) -> None:
    found = run(capsys, ["limits", "--set", "fcc-1.1310", "--frequency", frequency, "--json"])
    assert found.code == 0
    assert found.document["limits"] == []
    assert "covers 300 kHz to 100 GHz" in found.document["reason"]


def test_a_population_that_a_set_leaves_out(capsys: pytest.CaptureFixture[str]) -> None:
    arguments = ["limits", "--set", "eu-2013-35", "--population", "general_public"]
    found = run(capsys, [*arguments, "--frequency", "1GHz", "--json"])
    assert found.document["limits"] == []
    assert "says nothing about general_public" in found.document["reason"]


def test_whole_tables(capsys: pytest.CaptureFixture[str]) -> None:
    rows = run(capsys, ["limits", "--json"]).document["limits"]
    assert len(rows) > 200
    assert all(row["f_low_hz"] <= row["f_high_hz"] and row["formula"] for row in rows)
    assert len({row["set"] for row in rows}) == 7


def test_figures_for_people(capsys: pytest.CaptureFixture[str]) -> None:
    out = run(capsys, ["limits", "--frequency", "900MHz"]).out
    assert "general public, whole-body: E 41.25 V/m, over 30 min (Table 5)" in out
    assert "general population/uncontrolled, whole-body: S 6 W/m2, over 30 min" in out
    assert "[from memory]" in out
    assert "local codes" in out
    whole = run(capsys, ["limits", "--set", "eu-1999-519"]).out
    assert "10 GHz to 300 GHz: 61 V/m, over 4080 * f_GHz^-1.05 s" in whole


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (["--set", "nowhere"], "limit set 'nowhere' is not known; known: eu-1999-519"),
        (["--frequency", "900"], None),
        (["--frequency", "900XHz"], "not a frequency"),
        (["--frequency", "-1GHz"], "not a frequency"),
        (["--frequency", "nan"], "not a number"),
        (["--frequency", "1GHz", "--duration", "400"], "up to 360 s"),
        (["--frequency", "1GHz", "--duration", "-4"], "not a duration"),
    ],
)
def test_mistakes_are_one_line(
    capsys: pytest.CaptureFixture[str], arguments: list[str], says: str | None
) -> None:
    found = run(capsys, ["limits", *arguments])
    if says is None:
        assert found.code == 0
        return
    assert found.code == 2
    assert found.out == ""
    assert says in found.one_line
