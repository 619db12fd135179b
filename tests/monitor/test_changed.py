"""Another part than the calibrated one: by the site file, and under an old certificate."""

from __future__ import annotations

from pathlib import Path

import pytest

from monitor.calparts import CalibrationFile, parse
from monitor.changed import names_of, not_as_calibrated, swapped
from monitor.config import load_site
from monitor.core.errors import ConfigError
from monitor.installed import Installed

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
TEXT = (EXAMPLES / "detector-board-calibration.toml").read_text()
SITE = (EXAMPLES / "detector-board-site.toml").read_text()


def file(**changes: str) -> CalibrationFile:
    """The example with an antenna A-17 of certificate K 9, and with changes of these words."""
    text = TEXT.replace('serial = "serial number"', 'serial = "A-17"', 1)
    text = text.replace(
        'certificate = "number of the certificate"\ntable', 'certificate = "K 9"\ntable'
    )
    for old, new in changes.items():
        assert old.replace("__", "-") in text
        text = text.replace(old.replace("__", "-"), new)
    return parse(text.encode())


def test_parts_in_place_are_looked_for_by_type_serial_and_axis() -> None:
    held = file()
    assert not_as_calibrated([Installed("antenna", "A-17", "x")], held) == []
    assert not_as_calibrated(
        [Installed("antenna", "A-18", "x"), Installed("attenuator", "T 1", "")], held
    ) == [
        "antenna of axis x: A-18 is in place, calibrated was A-17",
        "attenuator: T 1 is in place, calibrated was none of its type",
    ]


def test_an_element_of_another_axis_does_not_do() -> None:
    text = TEXT.replace('serial = "serial number"', 'serial = "A-17"\naxis = "y"', 1)
    held = parse(text.encode())
    assert not_as_calibrated([Installed("antenna", "A-17", "y")], held) == []
    (line,) = not_as_calibrated([Installed("antenna", "A-17", "x")], held)
    assert line.startswith("antenna of axis x: A-17")


def test_a_detector_in_place_is_held_against_its_serial() -> None:
    held = parse(TEXT.replace('kind = "log"', 'kind = "log"\nserial = "roof-1"', 1).encode())
    assert names_of(held) == {"roof-1"}
    assert not_as_calibrated([Installed("detector", "roof-1", "")], held) == []
    assert len(not_as_calibrated([Installed("detector", "roof-2", "")], held)) == 1
    assert names_of(file()) == frozenset()


def test_a_serial_under_the_certificate_and_table_of_another_is_a_part_changed() -> None:
    before, after = file(), file(A__17="A-18")
    assert swapped(after, [before]) == [
        "antenna: A-18 stands under certificate K 9, which was entered for A-17"
    ]
    assert swapped(after, [before, after, after]) == swapped(after, [before])
    assert swapped(before, [before, after]) == []
    assert swapped(after, []) == []


@pytest.mark.parametrize("new", [{"K 9": "K 10"}, {"44.9": "44.8"}])
def test_a_new_certificate_or_table_makes_a_new_part(new: dict[str, str]) -> None:
    assert swapped(file(A__17="A-18", **new), [file()]) == []


def test_the_words_of_an_example_belong_to_nobody() -> None:
    example = parse(TEXT.encode())
    named = parse(TEXT.replace('serial = "serial number"', 'serial = "A-17"', 1).encode())
    assert swapped(named, [example]) == []


def test_installed_parts_stand_in_the_site_file(tmp_path: Path) -> None:
    path = tmp_path / "site.toml"
    path.write_text(SITE + '\n[[installed]]\ntype = "antenna"\nserial = "A-17"\naxis = "x"\n')
    assert load_site(path).installed == (Installed("antenna", "A-17", "x"),)
    assert load_site(EXAMPLES / "detector-board-site.toml").installed == ()


@pytest.mark.parametrize(
    ("table", "line"),
    [
        ('type = "antenna"', "installed[1].serial: missing; add serial = ..."),
        ('type = "antenna"\nserial = " "', "installed[1].serial: is empty"),
        ('type = "cable"\nserial = "1"\naxis = "w"', "installed[1].axis: 'w' is not one of x, y"),
        ('type = "cable"\nserial = "1"\ncolour = "red"', "installed[1].colour: unknown key"),
    ],
)
def test_a_mistake_in_an_installed_part_is_named(table: str, line: str, tmp_path: Path) -> None:
    path = tmp_path / "site.toml"
    path.write_text(f"{SITE}\n[[installed]]\n{table}\n")
    with pytest.raises(ConfigError, match="site.toml: ") as caught:
        load_site(path)
    assert line in str(caught.value)
