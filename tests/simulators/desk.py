"""A simulated board on the desk, read by a small parser of its own (hardware/PROTOCOL.md)."""

from __future__ import annotations

import json
import os
import re
import select
import subprocess
import sys
import termios
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

PATIENCE_S = 20.0
FRAME = re.compile(rb"FS1 (\d+) (\d+) ([123]) ([-\d,;]+) (-|-?\d+) (-|\d+)")
BANNER = re.compile(rb"FSB ([\w.-]{1,24}) ([\w.-]{1,24}) ([123]) (\d+) (\d+) (real|simulated)")


@dataclass(frozen=True)
class Frame:
    """One frame as the page describes it."""

    seq: int
    tick_ms: int
    samples: list[list[int]]
    temp: bytes
    supply: bytes


def crc(data: bytes) -> int:
    """The page's checksum, bit by bit."""
    register = 0xFFFF
    for byte in data:
        register ^= byte << 8
        for _ in range(8):
            register = (register << 1) ^ (0x1021 if register & 0x8000 else 0)
            register &= 0xFFFF
    return register


def body(line: bytes) -> bytes | None:
    """What stands between the marks of a good line, None for anything else."""
    found = re.fullmatch(rb"<([^<>*]*)\*([0-9A-F]{4})>", line)
    if found is None or int(found.group(2), 16) != crc(found.group(1)):
        return None
    return found.group(1)


def frame(line: bytes) -> Frame | None:
    """A good line as a frame, None for anything else."""
    found = FRAME.fullmatch(body(line) or b"")
    if found is None:
        return None
    samples = [[int(c) for c in s.split(b",")] for s in found.group(4).split(b";")]
    assert {len(sample) for sample in samples} == {int(found.group(3))}
    return Frame(int(found.group(1)), int(found.group(2)), samples, *found.group(5, 6))


def frames(lines: list[bytes]) -> list[Frame]:
    """The good frames among the lines."""
    return [found for found in map(frame, lines) if found is not None]


def times_ms(frames: list[Frame], spacing_ms: float) -> list[float]:
    """Where the samples lie: evenly since the frame before, or spaced as the banner says."""
    times: list[float] = []
    before: Frame | None = None
    for now in frames:
        m = len(now.samples)
        follows = before is not None and now.seq == (before.seq + 1) % 65536
        step = (now.tick_ms - before.tick_ms) / m if before and follows else spacing_ms
        times += [now.tick_ms - (m - j) * step for j in range(1, m + 1)]
        before = now
    return times


def await_link(link: Path) -> None:
    """Until the device is there."""
    end_s = time.monotonic() + PATIENCE_S
    while not link.exists():
        assert time.monotonic() < end_s, "no device"
        time.sleep(0.005)


class Desk:
    """A running board and the reader's end of its line."""

    def __init__(self, folder: Path, process: subprocess.Popen[str]) -> None:
        self.process = process
        self.link = folder / "board"
        self.control = folder / "control"
        self.truth = folder / "truth.csv"
        self._fd = -1
        self._rest = b""

    def open(self, ask: bool = True) -> None:
        """Open the device as a monitor does: empty the input, then ask."""
        self._fd = os.open(self.link, os.O_RDWR | os.O_NOCTTY | os.O_NONBLOCK)
        termios.tcflush(self._fd, termios.TCIFLUSH)
        self._rest = b""
        if ask:
            self.ask()

    def ask(self) -> None:
        """Ask for a banner."""
        os.write(self._fd, b"?\n")

    def close(self) -> None:
        """Let the device go."""
        if self._fd >= 0:
            os.close(self._fd)
            self._fd = -1

    def said(self) -> dict[str, object]:
        """The next line on the board's standard output."""
        assert self.process.stdout is not None
        ready, _, _ = select.select([self.process.stdout], [], [], PATIENCE_S)
        assert ready, "the board says nothing"
        found = json.loads(self.process.stdout.readline())
        assert isinstance(found, dict)
        return found

    def read(self, timeout_s: float) -> list[bytes] | None:
        """Whole lines that come within the time; None once the device has gone."""
        ready, _, _ = select.select([self._fd], [], [], timeout_s)
        if not ready:
            return []
        try:
            data = os.read(self._fd, 65536)
        except OSError:
            return None
        if not data:
            return None
        *lines, self._rest = (self._rest + data).split(b"\n")
        return lines

    def lines(self, n: int = sys.maxsize, within_s: float = PATIENCE_S) -> list[bytes]:
        """Lines until there are n, the device goes, or the time is over."""
        found: list[bytes] = []
        end_s = time.monotonic() + within_s
        while len(found) < n and time.monotonic() < end_s:
            more = self.read(max(end_s - time.monotonic(), 0.0))
            if more is None:
                break
            found += more
        return found

    def fault(self, *words: str) -> dict[str, object]:
        """A fault by the command that people use."""
        command = [sys.executable, "-m", "simulators", "fault", "--control", str(self.control)]
        done = subprocess.run(
            [*command, *words], capture_output=True, text=True, timeout=PATIENCE_S
        )
        assert done.returncode == 0, done.stderr
        found = json.loads(done.stdout)
        assert isinstance(found, dict)
        return found


@contextmanager
def board(folder: Path, *options: str) -> Iterator[Desk]:
    """A board with these options, its line not yet opened; ended in the end."""
    command = [sys.executable, "-m", "simulators", "board", "--link", str(folder / "board")]
    command += ["--control", str(folder / "control"), "--truth", str(folder / "truth.csv")]
    with subprocess.Popen([*command, *options], stdout=subprocess.PIPE, text=True) as process:
        desk = Desk(folder, process)
        try:
            ready = desk.said()
            assert ready["event"] == "ready"
            assert ready["simulated"] is True
            yield desk
        finally:
            desk.close()
            process.terminate()
            try:
                process.wait(PATIENCE_S)
            except subprocess.TimeoutExpired:
                process.kill()
                raise


def history(folder: Path, seconds: float, *options: str) -> list[bytes]:
    """Every line of a history, up to the end of the board."""
    with board(folder, "--history", str(seconds), "--exit-after-history", *options) as desk:
        desk.open()
        lines = desk.lines()
        assert desk.said()["event"] == "history"
        assert desk.process.wait(PATIENCE_S) == 0
    return lines
