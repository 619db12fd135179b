"""Time is an argument: one module reads the clock, and nothing sleeps."""

from __future__ import annotations

from tests.conventions import tree

CLOCK = "monitor/clock.py"
CLOCK_CALLS = {
    "time.time", "time.time_ns", "time.monotonic", "time.monotonic_ns", "time.clock_gettime",
    "time.clock_gettime_ns", "datetime.now", "datetime.utcnow", "datetime.datetime.now",
}  # fmt: skip


def test_one_module_reads_the_clock() -> None:
    readers = [
        f"{tree.name(path)}:{line} {call}"
        for path in tree.files(*tree.SHIPPED, suffix=".py")
        for line, call in tree.calls(path)
        if call in CLOCK_CALLS and tree.name(path) != CLOCK
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
