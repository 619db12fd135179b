"""What may not stand in a file of this house."""

from __future__ import annotations

import re

from tests.conventions import tree

UNFINISHED = re.compile(
    r"\b(TO" r"DO|FIX" r"ME|XX" r"X|HA" r"CK|Not" r"Implemented(Error)?)\b|pragma: no " r"cover"
)
ADDRESS = re.compile(r"(?:https?|wss?|ftp):" r"//([^\s/\"'`<>)\]:{]*)")
LOOPBACK = {"127.0.0.1", "localhost", "[", ""}
NAMESPACES = {"www.w3.org"}
"""A namespace is a name: nothing is fetched from it."""


def _lines(paths: list, pattern: re.Pattern[str]) -> list[tuple[str, re.Match[str]]]:
    return [
        (f"{tree.name(path)}:{number}", match)
        for path in paths
        for number, line in enumerate(path.read_text(encoding="utf-8").splitlines(), 1)
        for match in pattern.finditer(line)
    ]


def test_nothing_is_left_unfinished() -> None:
    found = _lines(tree.texts(), UNFINISHED)
    assert [f"{place} {match.group()}" for place, match in found] == []


def test_the_search_itself_finds_what_it_looks_for() -> None:
    assert UNFINISHED.search("# TO" + "DO later")
    assert UNFINISHED.search("raise Not" + "ImplementedError")
    found = ADDRESS.search('src="https:' + '//elsewhere.example/x.js"')
    assert found
    assert found.group(1) == "elsewhere.example"


def test_pages_and_programs_name_no_host_on_the_network() -> None:
    paths = tree.files(*tree.PACKAGES) + [tree.ROOT / "requirements.lock"]
    strangers = [
        f"{place} {match.group(1)}"
        for place, match in _lines([p for p in paths if p in set(tree.texts())], ADDRESS)
        if match.group(1) not in LOOPBACK | NAMESPACES
        and not match.group(1).endswith((".example", ".invalid", ".test"))
    ]
    assert strangers == []


def test_no_file_names_a_place_on_somebodys_machine() -> None:
    found = _lines(tree.texts(), re.compile(r"(?<![\w.])/(?:home|root|work|Users|mnt)/\w+"))
    assert [f"{place} {match.group()}" for place, match in found] == []
