"""The command line: what it prints, and one line for each mistake."""

from __future__ import annotations

import signal
from collections.abc import Iterator

import pytest

from simulators.__main__ import main


@pytest.fixture(autouse=True)
def _handlers() -> Iterator[None]:
    """The board takes the signals of its process, which here is the tests' own."""
    kept = {number: signal.getsignal(number) for number in (signal.SIGTERM, signal.SIGINT)}
    yield
    for number, handler in kept.items():
        signal.signal(number, handler)


def test_scenes_are_listed(capsys) -> None:
    assert main(["scenes"]) == 0
    assert capsys.readouterr().out.split() == ["busy-day", "over-limit", "quiet"]


@pytest.mark.parametrize(
    ("options", "word"),
    [
        (["--scenario", "stormy"], "stormy"),
        (["--rate", "7"], "whole milliseconds"),
        (["--start-utc", "2026-03-01T00:00:00"], "zone"),
        (["--start-utc", "yesterday"], "yesterday"),
        (["--fault", "soon:drop"], "SECONDS:KIND"),
        (["--seed", "-1"], "seed"),
    ],
)
def test_wrong_input_is_one_line_and_code_2(tmp_path, capsys, options, word) -> None:
    assert main(["board", "--link", str(tmp_path / "board"), *options]) == 2
    found = capsys.readouterr()
    assert word in found.err
    assert found.err.count("\n") == 1
    assert found.out == ""
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("option", ["--link", "--truth", "--control"])
def test_a_path_that_cannot_be_made_is_code_3(tmp_path, capsys, option) -> None:
    paths = {"--link": tmp_path / "board", option: tmp_path / "nowhere" / "file"}
    words = [str(word) for pair in paths.items() for word in pair]
    assert main(["board", *words]) == 3
    assert capsys.readouterr().err.count("\n") == 1
    assert not (tmp_path / "board").is_symlink()


def test_a_file_in_the_links_place_is_left_alone(tmp_path, capsys) -> None:
    (tmp_path / "board").write_text("mine")
    assert main(["board", "--link", str(tmp_path / "board")]) == 3
    assert "board" in capsys.readouterr().err
    assert (tmp_path / "board").read_text() == "mine"
