"""Limit sets as files: complete, in order, and refused with one clear line where they are not."""

from __future__ import annotations

import pytest

from monitor import limitsets
from monitor.core.errors import LimitError

GOOD = """
[set]
id = "made-up"
edition = "1"
title = "Levels of an invented place"
source = "nobody"
[[table]]
population = "general_public"
scope = "local"
averaging_s = 360
clause = "Table 1"
verified = true
rows = [{ low = "1MHz", high = "2MHz", quantity = "E", a = 10 }]
"""


def test_the_sets_that_the_product_holds() -> None:
    assert limitsets.available() == [
        "eu-1999-519",
        "eu-2013-35",
        "fcc-1.1310",
        "icnirp-1998",
        "icnirp-2020",
        "ieee-c95.1-2019",
        "safety-code-6-2015",
    ]


@pytest.mark.parametrize("set_id", limitsets.available())
def test_every_set_loads_and_names_its_source_and_clauses(set_id: str) -> None:
    held = limitsets.load(set_id)
    assert held.id == set_id
    assert held.title
    assert held.source
    assert all(row.clause and row.a > 0 and row.f_low_hz <= row.f_high_hz for row in held.rows)


def test_a_set_wholly_from_memory_says_so() -> None:
    for set_id in ("ieee-c95.1-2019", "safety-code-6-2015"):
        assert not any(row.verified for row in limitsets.load(set_id).rows)


def test_a_made_up_set_is_read() -> None:
    held = limitsets.parse(GOOD.encode(), "made-up")
    assert held.rows[0].value(1.5e6) == 10


@pytest.mark.parametrize(
    ("old", "new", "says"),
    [
        ("a = 10", "a = -10", r"rows\[1\]\.a"),
        ("a = 10", 'a = "10"', "not a number"),
        ('quantity = "E"', 'quantity = "P"', "not one of"),
        ('low = "1MHz"', 'low = "3MHz"', "must not be above high"),
        ('low = "1MHz"', 'low = "fast"', "not a"),
        ("verified = true", "verified = 1", "neither true nor false"),
        ("averaging_s = 360", "averaging_s = -1", "averaging_s"),
        ("averaging_s = 360", "averaging = 360", "averaging_s: missing"),
        ('scope = "local"', 'scope = "somewhere"', "scope"),
        ('clause = "Table 1"', 'clauses = "Table 1"', "clause: missing"),
        ('edition = "1"', 'edition = "1"\nnonsense = 2', "unknown key"),
        ('id = "made-up"', 'id = "other"', "name of the file"),
        ("[set]", "[set", "not a TOML text"),
    ],
)
def test_a_faulty_set_is_one_clear_line(old: str, new: str, says: str) -> None:
    with pytest.raises(LimitError, match=says) as caught:
        limitsets.parse(GOOD.replace(old, new).encode(), "made-up")
    assert "\n" not in str(caught.value)
    assert str(caught.value).startswith("made-up")


@pytest.mark.parametrize("set_id", ["icnirp", "../secret", "", "icnirp-2020.toml"])
def test_an_unknown_set_names_the_known_ones(set_id: str) -> None:
    with pytest.raises(LimitError, match="icnirp-2020, ieee"):
        limitsets.load(set_id)
