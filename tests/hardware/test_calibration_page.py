"""The calibration file's page is true: its samples are read, its keys and figures are all there."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from pathlib import Path

import pytest

from monitor import calparts
from monitor.calfile import chain
from monitor.calterms import ASSUMED_DB
from monitor.config import Band, Channel
from monitor.core.errors import CalibrationError
from monitor.core.flags import Flag

PAGE = Path("hardware/CALIBRATION.md").read_text(encoding="utf-8")
WHOLE, *PARTS = re.findall(r"```toml\n(.*?)```", PAGE, re.DOTALL)
BAND = {"main": Band("main", 7e8, 2.7e9)}
CHANNELS = [Channel(axis, axis, "main") for axis in "xyz"]


def completed(part: str) -> str:
    """A sample with what it lacks for a whole file: an antenna or a detector takes the place."""
    tables = re.split(r"^(?=\[)", WHOLE, flags=re.MULTILINE)
    heads = {table.split("\n")[0].strip("[]") for table in re.split(r"^(?=\[)", part, flags=re.M)}
    kept = [
        table
        for table in tables
        if not (
            ('type = "antenna"' in table and 'type = "antenna"' in part)
            or (table.startswith("[[element]]") and 'kind = "probe"' in part)
            or (table.startswith("[detector]") and "detector" in heads)
            or (table.startswith("[calibration]") and "calibration" in heads)
        )
    ]
    return "".join(kept) + "\n" + part


def test_the_whole_file_gives_a_chain_that_lacks_nothing() -> None:
    held = chain(calparts.parse(WHOLE.encode()), CHANNELS, BAND)
    assert held.flags == int(Flag.INVENTED_CALIBRATION)


@pytest.mark.parametrize("part", PARTS, ids=lambda part: part.split("\n")[1])
def test_every_sample_is_read_and_gives_a_chain(part: str) -> None:
    file = calparts.parse(completed(part).encode())
    gain = next(iter(re.findall(r'^gain = "(.*)"$', part, re.MULTILINE)), "")
    held = chain(file, [replace(channel, gain=gain) for channel in CHANNELS], BAND)
    assert len(held.k) == 3
    names = re.findall(r'^name = "(.*)"$', part, re.MULTILINE)
    assert set(names) <= {line.name for lines in held.contributions for line in lines}
    serials = re.findall(r'^serial = "(.*)"$', part, re.MULTILINE)
    assert set(serials) <= {element.serial for element in file.elements}


@pytest.mark.parametrize(
    ("heading", "before"),
    [
        ("`[calibration]`", 'id = "roof-1, spring"'),
        ("`[[element]]`", 'serial = "A-17"'),
        ("`[[contribution]]`", 'name = "detector curve, certificate"'),
    ],
)
def test_every_key_of_a_table_is_on_the_page(heading: str, before: str) -> None:
    """The reader itself names what it knows where it meets a key that it does not."""
    (section,) = re.findall(rf"^## {re.escape(heading)}.*?(?=^## )", PAGE, re.M | re.DOTALL)
    with pytest.raises(CalibrationError, match="unknown key; known: ") as caught:
        calparts.parse(WHOLE.replace(before, before + "\nqqqq = 1").encode())
    known = str(caught.value).split("known: ")[1].split(", ")
    assert len(known) > 5
    assert [key for key in known if f"`{key}`" not in section] == []


@pytest.mark.parametrize("part", [p for p in PARTS if p.startswith("[detector]")])
def test_every_key_of_a_detector_is_on_the_page(part: str) -> None:
    """Of each kind, and of what stands under it."""
    section = PAGE[PAGE.index("\n## Detector\n") :]
    heads = [line for line in part.split("\n") if line.startswith("[") and "element" not in line]
    for head in dict.fromkeys(heads):
        with pytest.raises(CalibrationError, match="unknown key; known: ") as caught:
            calparts.parse(completed(part.replace(head, head + "\nqqqq = 1", 1)).encode())
        known = str(caught.value).split("known: ")[1].split(", ")
        assert len(known) > 1
        assert [
            key for key in known if f"`{key}`" not in section and f".{key}]]`" not in section
        ] == []


def test_every_key_of_what_was_found_is_on_the_page() -> None:
    (section,) = re.findall(r"^## `\[as_found\]`.*?(?=^## )", PAGE, re.M | re.DOTALL)
    (sample,) = (part for part in PARTS if part.startswith("[as_found]"))
    for before in ("adjusted = false", 'type = "cable"'):
        with pytest.raises(CalibrationError, match="unknown key; known: ") as caught:
            calparts.parse(completed(sample.replace(before, before + "\nqqqq = 1")).encode())
        known = str(caught.value).split("known: ")[1].split(", ")
        assert len(known) > 3
        assert [key for key in known if f"`{key}`" not in section and key != "element"] == []


def test_assumed_half_widths_are_those_in_use() -> None:
    rows = dict(re.findall(r"^\| `(\w+)` \| (\d\.\d) \|", PAGE, re.MULTILINE))
    assert {kind: float(db) for kind, db in rows.items()} == ASSUMED_DB


@pytest.mark.parametrize(
    ("kind", "db"),
    [
        ("out_of_band", 10 * math.log10(1.25)),
        ("cross_axis", 20 * math.log10(1 + 10 ** (-25 / 20))),
        ("near_field", -20 * math.log10(abs(1 - 1j / math.pi - 1 / math.pi**2))),
        ("own_body", 20 * math.log10(1.18)),
        ("polarisation", -20 * math.log10(math.cos(math.radians(32)))),
    ],
)
def test_the_reasons_for_them_hold(kind: str, db: float) -> None:
    """Each from its formula: powers add, a part comes back in phase, the short dipole's field."""
    (row,) = re.findall(rf"^\| `{kind}` \| \d\.\d \| .*$", PAGE, re.MULTILINE)
    assert f"{db:.2f} dB" in row
    assert math.ceil(2 * db) / 2 == ASSUMED_DB[kind]
