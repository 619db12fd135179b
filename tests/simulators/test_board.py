"""The board on its pseudo-terminal, read by an independent parser."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from datetime import UTC, datetime

import numpy as np
import pytest

from simulators import scenario
from simulators.source import Setup, Source
from tests.simulators import desk

START = "2026-03-01T06:00:00Z"


def _setup(seconds: float, **changes: object) -> Setup:
    values: dict[str, object] = {
        "scene": scenario.load("busy-day"),
        "seed": 3,
        "rate_hz": 1.0,
        "channels": 3,
        "bits": 12,
        "start_utc": datetime(2026, 3, 1, 6, tzinfo=UTC),
        "history_s": seconds,
    }
    return Setup(**(values | changes))  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("rate", "channels", "bits"), [("1", 3, 12), ("10", 1, 12), ("0.5", 2, 16), ("250", 3, 12)]
)
def test_history_is_whole_and_follows_the_page(tmp_path, rate, channels, bits) -> None:
    seconds = 4000 / float(rate)
    options = ["--rate", rate, "--channels", str(channels), "--bits", str(bits)]
    lines = desk.history(tmp_path, seconds, "--seed", "3", "--start-utc", START, *options)
    assert all(desk.body(line) is not None for line in lines)
    assert max(len(line) for line in lines) < 200
    frames = desk.frames(lines)
    assert [f.seq for f in frames] == list(range(len(frames)))
    spacing_ms = 1000 / float(rate)
    times = desk.times_ms(frames, spacing_ms)
    assert times == pytest.approx(np.arange(4000) * spacing_ms, abs=1e-6)
    counts = np.array([sample for f in frames for sample in f.samples])
    source = Source(_setup(seconds, rate_hz=float(rate), channels=channels, bits=bits))
    assert np.array_equal(counts, source.take(0, 4000))


def test_a_banner_comes_first_and_each_minute_and_says_simulated(tmp_path) -> None:
    lines = desk.history(tmp_path, 3600, "--start-utc", START)
    bodies = [desk.body(line) for line in lines]
    banners = [desk.BANNER.fullmatch(found) for found in bodies if found and found[:3] == b"FSB"]
    assert bodies[0] is not None
    assert bodies[0].startswith(b"FSB ")
    assert {b.group(3, 4, 5, 6) for b in banners if b} == {(b"3", b"1000", b"12", b"simulated")}
    ticks, since = [], 0
    for line in lines:
        found = desk.frame(line)
        if found is None:
            ticks.append(since)
        else:
            since = found.tick_ms
    assert max(np.diff([*ticks, 3_600_000])) <= 70_000  # one minute and at most a frame of ten


def test_the_truth_file_is_the_scenario_without_error(tmp_path) -> None:
    desk.history(tmp_path, 500, "--seed", "3", "--start-utc", START, "--errors", "8")
    text = (tmp_path / "truth.csv").read_text()
    assert "SIMULATED" in text.splitlines()[0]
    assert START in text
    rows = np.loadtxt(text.splitlines(), delimiter=",", skiprows=5)
    truth = scenario.truth("busy-day", 3, 0.0, 500, 1.0, midnight_s=6 * 3600.0)
    assert np.array_equal(rows[:, 0], truth.times_s)
    assert rows[:, 1] == pytest.approx(truth.e2, rel=1e-8)
    assert rows[:, 2:] == pytest.approx(truth.e2_axes, rel=1e-8)


def test_errors_move_the_counts_and_not_the_truth(tmp_path) -> None:
    plain, moved = Source(_setup(100)), Source(_setup(100, errors=8))
    assert not np.array_equal(plain.take(0, 100), moved.take(0, 100))


def test_nothing_is_sent_before_a_reader_asks(tmp_path) -> None:
    with desk.board(tmp_path, "--history", "100") as board:
        board.open(ask=False)
        assert board.lines(within_s=0.4) == []
        board.ask()
        first = board.lines(1)
        assert desk.body(first[0]) == b"FSB rehearsal-board 0.1 3 1000 12 simulated"
        assert desk.frames(board.lines(5))[0].seq == 0


def test_a_full_line_loses_nothing(tmp_path) -> None:
    with desk.board(tmp_path, "--history", "20000", "--exit-after-history") as board:
        board.open()
        time.sleep(0.3)  # long enough for the line to fill: it holds 64 KiB at most
        frames = desk.frames(board.lines())
    times = desk.times_ms(frames, 1000.0)
    assert times == pytest.approx(np.arange(20_000) * 1000.0)


def test_real_time_goes_on_where_the_history_ends(tmp_path) -> None:
    """No reading is missing between them, and board time keeps up with real time."""
    began_s = time.monotonic()
    with desk.board(tmp_path, "--history", "600", "--rate", "10") as board:
        time.sleep(0.3)
        board.open()
        lines: list[bytes] = []
        while time.monotonic() < began_s + 2.0:
            lines += board.read(0.1) or []
        elapsed_ms = 1000 * (time.monotonic() - began_s)
        times = desk.times_ms(desk.frames(lines), 100.0)
        assert board.said()["event"] == "history"
    assert times == pytest.approx(np.arange(len(times)) * 100.0)
    assert 600_000 + 500 < times[-1] <= 600_000 + elapsed_ms


def test_without_a_history_time_begins_with_the_reader(tmp_path) -> None:
    with desk.board(tmp_path, "--rate", "20") as board:
        time.sleep(0.5)
        board.open()
        asked_s = time.monotonic()
        frames = desk.frames(board.lines(12))
        took_ms = 1000 * (time.monotonic() - asked_s)
    assert frames[0].tick_ms == 0
    assert frames[-1].tick_ms <= took_ms


def test_a_question_is_answered_at_once(tmp_path) -> None:
    with desk.board(tmp_path, "--rate", "0.1") as board:
        board.open()
        board.lines(3)  # the answer, the first banner, the first frame; then ten seconds of quiet
        asked_s = time.monotonic()
        board.ask()
        answer = board.lines(1)
        assert time.monotonic() - asked_s < 1.0  # the page says 200 ms; leave a slow machine room
    assert [desk.body(line) for line in answer] == [b"FSB rehearsal-board 0.1 3 10000 12 simulated"]


def test_a_history_waits_for_a_reader_that_left(tmp_path) -> None:
    with desk.board(tmp_path, "--history", "30000", "--exit-after-history") as board:
        board.open()
        before = desk.frames(board.lines(50))
        board.close()
        time.sleep(0.2)
        assert board.process.poll() is None
        board.open()
        after = desk.frames(board.lines())
    assert after[0].seq > before[-1].seq
    assert after[-1].tick_ms == 29_999_000


def test_ending_takes_the_link_and_the_socket_away(tmp_path) -> None:
    with desk.board(tmp_path) as board:
        assert os.path.islink(board.link)
        board.process.terminate()
        assert board.process.wait(desk.PATIENCE_S) == 0
        assert not os.path.lexists(board.link)
        assert not os.path.lexists(board.control)


def test_a_board_ends_with_its_starter(tmp_path) -> None:
    board = [sys.executable, "-m", "simulators", "board", "--link", str(tmp_path / "board")]
    starter = (
        "import subprocess, sys\n"
        "board = subprocess.Popen(sys.argv[1:], stdout=subprocess.PIPE)\n"
        "board.stdout.readline()\n"
        "print(board.pid, flush=True)\n"
    )
    command = [sys.executable, "-c", starter, *board, "--with-parent"]
    done = subprocess.run(command, capture_output=True, text=True, timeout=desk.PATIENCE_S)
    assert int(done.stdout) > 0, done.stderr
    end_s = time.monotonic() + desk.PATIENCE_S
    while os.path.lexists(tmp_path / "board") and time.monotonic() < end_s:
        time.sleep(0.01)
    assert not os.path.lexists(tmp_path / "board")


@pytest.mark.parametrize(
    ("change", "word"),
    [
        ({"rate_hz": 3.0}, "whole milliseconds"),
        ({"channels": 4}, "channels"),
        ({"bits": 24}, "bits"),
        ({"history_s": -1.0}, "history"),
    ],
)
def test_a_setup_that_the_line_cannot_carry_is_refused(change, word) -> None:
    with pytest.raises(ValueError, match=word):
        _setup(10.0, **change)
