"""Each fault does on the wire what its name says."""

from __future__ import annotations

import os

import numpy as np
import pytest

from simulators.faults import Fault, Faults, scheduled
from tests.simulators import desk

SECONDS = 600


def _lines(tmp_path, *faults: str) -> list[bytes]:
    options = [word for text in faults for word in ("--fault", text)]
    return desk.history(tmp_path, SECONDS, "--seed", "3", *options)


def test_drop_leaves_numbers_out(tmp_path) -> None:
    seqs = [f.seq for f in desk.frames(_lines(tmp_path, "200:drop:3"))]
    assert len(seqs) == 57
    assert sorted(set(range(60)) - set(seqs)) == [20, 21, 22]


def test_truncate_cuts_a_frame_short(tmp_path) -> None:
    lines = _lines(tmp_path, "200:truncate")
    (merged,) = [line for line in lines if desk.body(line) is None]
    stump, after = merged[1:].split(b"<")
    assert stump.startswith(b"FS1 20 ")
    assert b">" not in stump
    found = desk.frame(b"<" + after)  # the next frame survives behind the rubbish
    assert found is not None
    assert found.seq == 21


def test_corrupt_changes_a_byte_and_the_checksum_tells(tmp_path) -> None:
    clean, lines = _lines(tmp_path), _lines(tmp_path, "200:corrupt:2")
    differing = [(a, b) for a, b in zip(clean, lines) if a != b]
    assert len(clean) == len(lines)
    assert len(differing) == 2
    for good, bad in differing:
        assert desk.body(bad) is None
        assert sum(a != b for a, b in zip(good, bad)) == 1
        assert len(good) == len(bad)


def test_repeat_sends_a_frame_twice(tmp_path) -> None:
    lines = _lines(tmp_path, "200:repeat:2")
    seqs = [f.seq for f in desk.frames(lines)]
    assert seqs == [*range(20), 20, 20, 21, 21, *range(22, 60)]
    doubled = [a for a, b in zip(lines, lines[1:]) if a == b and desk.frame(a)]
    assert len(doubled) == 2


def test_stick_gives_the_same_counts_while_time_goes_on(tmp_path) -> None:
    frames = desk.frames(_lines(tmp_path, "200:stick:100"))
    assert desk.times_ms(frames, 1000.0) == pytest.approx(np.arange(SECONDS) * 1000.0)
    samples = np.array([sample for f in frames for sample in f.samples])
    assert len(np.unique(samples[199:300], axis=0)) == 1
    assert len(np.unique(samples[300:400], axis=0)) > 50


def test_hang_leaves_time_out_and_no_number(tmp_path) -> None:
    frames = desk.frames(_lines(tmp_path, "200:hang:100"))
    assert [f.seq for f in frames] == list(range(len(frames)))
    times = desk.times_ms(frames, 1000.0)
    assert set(np.diff(times)) == {1000.0, max(np.diff(times))}
    assert 100_000 <= max(np.diff(times)) <= 120_000
    assert times[-1] == 599_000


def test_restart_begins_again_with_a_banner(tmp_path) -> None:
    lines = _lines(tmp_path, "200:restart")
    frames = desk.frames(lines)
    assert [f.seq for f in frames] == [*range(20), *range(40)]
    assert [f.tick_ms for f in frames[20:22]] == [9000, 19_000]
    first = next(i for i, line in enumerate(lines) if (f := desk.frame(line)) and f == frames[20])
    assert (desk.body(lines[first - 1]) or b"").startswith(b"FSB ")


@pytest.mark.parametrize("plan", [["20000:vanish:100"], ["20000:vanish", "20100:return"]])
def test_vanish_takes_the_device_away_and_it_returns(tmp_path, plan) -> None:
    """It vanishes late: what a terminal still holds then is lost, and far more has come before."""
    options = [word for text in plan for word in ("--fault", text)]
    with desk.board(tmp_path, "--history", "20400", "--exit-after-history", *options) as board:
        board.open()
        before = desk.frames(board.lines())
        board.close()
        desk.await_link(board.link)
        board.open()
        after = desk.frames(board.lines())
        assert board.process.wait(desk.PATIENCE_S) == 0
    assert [f.seq for f in before] == list(range(len(before)))
    assert 1_000_000 < before[-1].tick_ms <= 19_999_000
    assert after[0].tick_ms == pytest.approx(20_109_000, abs=10_000)
    assert after[0].seq == 2010  # frames were made all the while: the numbers tell what is missing
    assert after[-1].tick_ms == 20_399_000


def test_faults_by_command(tmp_path) -> None:
    with desk.board(tmp_path, "--rate", "20") as board:
        board.open()
        board.lines(5)
        assert board.fault("vanish")["ok"] is True
        while board.read(desk.PATIENCE_S):
            continue
        assert board.read(desk.PATIENCE_S) is None  # the line has hung up
        assert not os.path.lexists(board.link)
        board.close()
        assert board.fault("return")["simulated"] is True
        board.open()
        assert len(desk.frames(board.lines(10))) > 5
        board.fault("corrupt", "--count", "2")
        spoilt = [line for line in board.lines(40) if desk.body(line) is None]
        assert len(spoilt) == 2


def test_a_board_that_hangs_answers_nothing(tmp_path) -> None:
    with desk.board(tmp_path, "--rate", "20") as board:
        board.open()
        board.lines(5)
        board.fault("hang", "--seconds", "1")
        while board.read(0.15):
            continue
        board.ask()
        assert board.lines(within_s=0.3) == []
        found = desk.frames(board.lines(8))
    assert len(found) >= 6


def test_a_fault_without_a_board_is_one_line_and_code_3(tmp_path, capsys) -> None:
    from simulators.__main__ import main

    assert main(["fault", "--control", str(tmp_path / "none"), "drop"]) == 3
    assert capsys.readouterr().err.count("\n") == 1


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("drop", "SECONDS:KIND"),
        ("x:drop", "SECONDS:KIND"),
        ("5:drop:2:2", "SECONDS:KIND"),
        ("5:melt", "no fault 'melt'"),
        ("5:drop:0", "more than zero"),
    ],
)
def test_a_wrong_schedule_is_refused(text: str, words: str) -> None:
    with pytest.raises(ValueError, match=words):
        scheduled(text)


def test_a_schedule_strikes_once_and_in_order() -> None:
    faults = Faults([(2000, Fault("drop")), (1000, Fault("hang", 3.0))])
    assert faults.due(999) == []
    assert faults.due(1000) == [Fault("hang", 3.0)]
    assert faults.due(5000) == [Fault("drop")]
    assert faults.due(9000) == []
