"""Time is an argument: what measures, judges or shows is given it; and nothing sleeps."""

from __future__ import annotations

from tests.conventions import tree

CLOCK_READERS = (
    "monitor/clock.py", "monitor/supervise.py", "monitor/cli/", "hardware/iq_worker.py",
)  # fmt: skip
"""The clock itself, and the edge: the commands, what watches the two processes, and a process of a
front end's own."""

CLOCK_CALLS = {
    "time.time", "time.time_ns", "time.monotonic", "time.monotonic_ns", "time.clock_gettime",
    "time.clock_gettime_ns", "datetime.now", "datetime.utcnow", "datetime.datetime.now",
}  # fmt: skip


def test_only_the_edge_reads_the_clock() -> None:
    readers = [
        f"{tree.name(path)}:{line} {call}"
        for path in tree.files(*tree.SHIPPED, suffix=".py")
        for line, call in tree.calls(path)
        if call in CLOCK_CALLS and not tree.name(path).startswith(CLOCK_READERS)
    ]
    assert readers == []


def test_nothing_that_ships_sleeps() -> None:
    sleepers = [
        f"{tree.name(path)}:{line}"
        for path in tree.files(*tree.SHIPPED, suffix=".py")
        for line, call in tree.calls(path)
        if call in ("time.sleep", "sleep")
    ]
    assert sleepers == []


def test_the_core_neither_reads_files_nor_prints() -> None:
    doors = [
        f"{tree.name(path)}:{line} {call}"
        for path in tree.files("monitor/core", suffix=".py")
        for line, call in tree.calls(path)
        if call in ("open", "print", "input", "exec", "eval", "np.load", "np.save")
    ]
    assert doors == []
