"""Which child is started, when, and what is said when one ends."""

from __future__ import annotations

import threading
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from monitor import supervise


@dataclass
class Process:
    """A process that has ended with a code, or has not (None)."""

    code: int | None = None

    def poll(self) -> int | None:
        return self.code


class Fake(supervise.Child):
    """A child that starts no process."""

    def start(self, now_s: float) -> None:
        self.process: Any = Process()
        self.started_s = now_s


def ended(code: int, after_s: float, **settings: Any) -> tuple[int | None, list[str], Fake]:
    child, said = Fake("measure", [], **settings), []
    child.start(100.0)
    child.process.code = code
    return supervise.look(child, 100.0 + after_s, said.append), said, child


def test_told_to_end_by_somebody_else_it_is_started_again_and_that_is_said() -> None:
    code, said, child = ended(0, 3.0)
    assert code is None
    assert said == ["fieldsill: measure ended; again in 1 s"]
    supervise.look(child, 103.9, said.append)
    assert child.process is None
    supervise.look(child, 104.1, said.append)
    assert child.started_s == 104.1
    assert len(said) == 1


def test_one_that_is_done_is_final_and_quiet() -> None:
    assert ended(0, 3.0, finishes=True)[:2] == (0, [])


@pytest.mark.parametrize("finishes", [False, True])
def test_a_crash_is_started_again(finishes: bool) -> None:
    code, said, _ = ended(4, 3.0, finishes=finishes)
    assert (code, said) == (None, ["fieldsill: measure ended with 4; again in 1 s"])


@pytest.mark.parametrize("code", [2, 3])
def test_a_refusal_soon_after_a_start_is_final_and_says_itself_why(code: int) -> None:
    assert ended(code, 9.0)[:2] == (code, [])
    assert ended(code, 11.0)[0] is None


def test_one_that_may_not_be_started_again_does_not_go_without_a_word() -> None:
    assert ended(0, 3.0, lasting=False)[:2] == (0, ["fieldsill: measure ended"])
    assert ended(4, 3.0, lasting=False)[:2] == (4, ["fieldsill: measure ended with 4"])


def test_the_first_start_waits_for_leave_and_later_ones_do_not() -> None:
    leave: list[bool] = []
    child = Fake("serve", [], may_start=lambda: bool(leave))
    supervise.look(child, 100.0, leave.append)
    assert child.process is None
    leave.append(True)
    supervise.look(child, 101.0, lambda line: None)
    assert child.started_s == 101.0
    child.process, leave[:] = None, []
    supervise.look(child, 102.0, lambda line: None)
    assert child.started_s == 102.0


@pytest.mark.parametrize(
    ("lived_s", "answers", "code", "way"),
    [
        (1.0, True, None, False),
        (2.0, True, None, True),
        (2.0, False, None, False),
        (21.0, False, None, True),
        (21.0, True, 2, False),
    ],
)
def test_a_daemon_is_under_way_once_it_answers(
    lived_s: float,
    answers: bool,
    code: int | None,
    way: bool,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    from monitor import control

    monkeypatch.setattr(supervise.time, "monotonic", lambda: 100.0 + lived_s)
    child = Fake("measure", [])
    child.start(100.0)
    child.process.code = code
    path = tmp_path / "record.sock"
    server = control.Server(path, lambda request: {}) if answers else None
    try:
        assert supervise.under_way(child, path) is way
    finally:
        if server:
            server.close()


def test_the_last_line_says_where_the_record_is(tmp_path: Path) -> None:
    path = tmp_path / "record.db"
    assert supervise.stopped(path) == "Stopped; nothing was recorded"
    path.touch()
    assert supervise.stopped(path) == f"Stopped; record kept at {path}"


def test_nothing_is_started_after_a_stop() -> None:
    child, stop = Fake("measure", []), threading.Event()
    stop.set()
    assert supervise.watch([child], stop, print) == 0
    assert child.process is None
