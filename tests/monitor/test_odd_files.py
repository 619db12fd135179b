"""Whatever stands in a site or calibration file, the answer is one line or a sound object."""

from __future__ import annotations

import copy
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from monitor import tomlfile
from monitor.calfile import load_chain
from monitor.config import load_site
from monitor.core.errors import ConfigError, FieldsillError

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
ODD = [
    "", "x", "9e999GHz", -1, 0, 2**62, 1e308, float("nan"), float("inf"), True, [], {}, [[]],
    [1], [{}], ["a"], [[1, 2]], [["1GHz", "2"]], [["", 1]], [1, 2, 3],
]  # fmt: skip


def places(value: object, path: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    """The path of every value of a document, tables and lists included."""
    if path:
        yield path
    if isinstance(value, (dict, list)):
        for key, item in value.items() if isinstance(value, dict) else enumerate(value):
            yield from places(item, (*path, key))


def changed(values: dict[str, Any], path: tuple[Any, ...], odd: object) -> dict[str, Any]:
    """A copy of a document with one value replaced."""
    whole = copy.deepcopy(values)
    inner: Any = whole
    for key in path[:-1]:
        inner = inner[key]
    inner[path[-1]] = odd
    return whole


@pytest.mark.parametrize("path", sorted(EXAMPLES.glob("*.toml")), ids=lambda p: p.stem)
def test_any_value_anywhere(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    values = tomllib.loads(path.read_text(encoding="utf-8"))
    site = load_site(path.with_name(path.name.replace("calibration", "site")))
    lines: list[str] = []
    for place in places(values):
        for odd in ODD:
            top = tomlfile.TopTable(changed(values, place, odd), path.name)
            monkeypatch.setattr(tomlfile, "read", lambda *_, top=top: (top, b""))
            try:
                if "site" in path.name:
                    load_site(path)
                else:
                    load_chain(path, site.channels, site.bands)
            except FieldsillError as error:
                lines.append(str(error))
    assert len(lines) > len(ODD)
    assert [line for line in lines if not line.startswith(f"{path.name}: ") or "\n" in line] == []


@pytest.mark.parametrize(
    "text",
    [
        "a = 99999999999999999999",
        "a = " + "9" * 5000,
        "a = [" + "[" * 3000 + "]" * 3001,
        "a = 1\na = 2",
        "a = [1, -99999999999999999999]",
    ],
    ids=["65 bits", "5000 digits", "3000 brackets", "twice", "in a list"],
)
def test_texts_that_no_reader_should_trip_over(text: str) -> None:
    with pytest.raises(ConfigError, match="x.toml: not valid TOML") as caught:
        tomlfile.parse(text.encode(), "x.toml", "site file")
    assert "\n" not in str(caught.value)


def test_a_file_of_many_megabytes_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "big.toml"
    path.write_bytes(b"#" * (tomlfile.MAX_BYTES + 1))
    with pytest.raises(ConfigError, match="big.toml: 4000001 bytes"):
        tomlfile.read(path, "site file")
