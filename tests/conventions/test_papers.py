"""What the papers of the house say is there, is there."""

from __future__ import annotations

import re

import pytest

from monitor.cli import COMMANDS
from tests.conventions import tree

README = tree.ROOT / "README.md"
PAPERS = ("README.md", "DEVELOPERS.md")
TOP_LEVEL = {
    "README.md", "DEVELOPERS.md", "CHANGELOG.md", "LICENSE", "Makefile", "pyproject.toml",
    "requirements.lock", "monitor", "dashboard", "hardware", "simulators", "tests",
}  # fmt: skip
LEFT_BY_TOOLS = {"build", "dist", "fieldsill.egg-info"}


def _read(paper: str) -> str:
    return (tree.ROOT / paper).read_text(encoding="utf-8")


def _set_up_commands() -> list[str]:
    """The README's two commands, in their order."""
    return re.findall(r"^ {4}(sh hardware/setup\.sh \w+)", _read("README.md"), re.MULTILINE)


def test_readme_has_two_commands_and_continuous_integration_calls_the_second() -> None:
    first, second = _set_up_commands()
    script = _read("hardware/setup.sh")
    for command in (first, second):
        assert re.search(rf"^{command.split()[-1]}\)$", script, re.MULTILINE)
    assert _read(".ci/run").splitlines()[-1] == second


@pytest.mark.parametrize("paper", PAPERS)
def test_commands_named_in_the_papers_exist(paper: str) -> None:
    named = set(re.findall(r"fieldsill ([a-z][a-z-]+)\b", "\n".join(_code(paper))))
    assert named <= set(COMMANDS)
    assert paper != "README.md" or named == set(COMMANDS)


@pytest.mark.parametrize("paper", PAPERS)
def test_make_targets_named_in_the_papers_exist(paper: str) -> None:
    targets = set(re.findall(r"^([a-z]+):", _read("Makefile"), re.MULTILINE))
    named = set(re.findall(r"\bmake ([a-z]+)\b", "\n".join(_code(paper))))
    assert named <= targets


@pytest.mark.parametrize("paper", PAPERS)
def test_paths_named_in_the_papers_exist(paper: str) -> None:
    named = {
        word.rstrip("/")
        for code in _code(paper)
        for word in re.findall(r"(?<![\w./-])[\w.-]+/[\w./-]*[\w*]", code)
        if word.split("/")[0] in TOP_LEVEL
    }
    assert named
    assert [path for path in sorted(named) if not any(tree.ROOT.glob(path))] == []


def _code(paper: str) -> list[str]:
    """Indented blocks and words in backticks."""
    text = _read(paper)
    return re.findall(r"^ {4}.*$", text, re.MULTILINE) + re.findall(r"`([^`]+)`", text)


def test_each_change_says_what_it_does_to_reported_values() -> None:
    entries = re.split(r"^- ", _read("CHANGELOG.md"), flags=re.MULTILINE)[1:]
    assert entries
    assert [e[:60] for e in entries if "\n  Effect on reported values: " not in e] == []


def test_top_level_holds_nothing_else() -> None:
    there = {path.name for path in tree.ROOT.iterdir() if not path.name.startswith(".")}
    assert there - LEFT_BY_TOOLS == TOP_LEVEL


def test_both_lock_files_agree() -> None:
    def pins(name: str) -> dict[str, str]:
        return dict(re.findall(r"^([\w.-]+)==(\S+)", _read(name), re.MULTILINE))

    box, tests = pins("requirements.lock"), pins("tests/requirements.lock")
    assert box
    assert {package: tests.get(package) for package in box} == box
    assert not {"pandas", "scipy", "pytest"} & set(box)
