"""A board at the other end of a pseudo-terminal, with a checksum of its own making."""

from __future__ import annotations

import os
import pty
import re
import select
import time
import tty
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest


def slow_crc(data: bytes) -> int:
    """CRC-16/CCITT-FALSE bit by bit, from its definition; not the product's own."""
    register = 0xFFFF
    for byte in data:
        for bit in range(7, -1, -1):
            feedback = (register >> 15) ^ (byte >> bit & 1)
            register = (register << 1 & 0xFFFF) ^ (0x1021 if feedback else 0)
    return register


def line_of(body: str) -> bytes:
    """The body as a line of the protocol."""
    return b"<%s*%04X>\n" % (body.encode(), slow_crc(body.encode()))


BANNER = "FSB bench-board 1.0 3 100 12 real"


class Bench:
    """A pseudo-terminal whose far side plays the board; path stays while boards come and go."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self.master = -1
        self.plug()

    def plug(self) -> None:
        """A board appears at the path."""
        self.master, slave = pty.openpty()
        tty.setraw(slave)
        self.path.unlink(missing_ok=True)
        self.path.symlink_to(os.ttyname(slave))
        self.slave = slave

    def unplug(self) -> None:
        """The board vanishes, its device node with it."""
        os.close(self.master)
        os.close(self.slave)
        self.path.unlink()
        self.master = -1

    def send(self, *lines: str | bytes) -> None:
        """Bytes as they are, texts as bodies of lines."""
        whole = b"".join(line if isinstance(line, bytes) else line_of(line) for line in lines)
        os.write(self.master, whole)

    def heard(self, within_s: float = 2.0) -> bytes:
        """What the monitor sent, empty where it sent nothing within that time."""
        ready = select.select([self.master], [], [], within_s)[0]
        return os.read(self.master, 4096) if ready else b""

    def close(self) -> None:
        if self.master >= 0:
            self.unplug()


@pytest.fixture
def bench(tmp_path: Path) -> Iterator[Bench]:
    board = Bench(tmp_path / "ttyBoard")
    yield board
    board.close()


@pytest.fixture
def fast_ns() -> Callable[[], int]:
    """A clock that runs forty times as fast as the machine's: 3 s of silence pass in 75 ms."""
    start = time.monotonic_ns()
    return lambda: (time.monotonic_ns() - start) * 40


@pytest.fixture
def line() -> Callable[[str], bytes]:
    return line_of


@pytest.fixture
def crc_by_definition() -> Callable[[bytes], int]:
    return slow_crc


@pytest.fixture
def banner() -> str:
    return BANNER


@pytest.fixture
def recordings() -> Path:
    folder = os.environ.get("FIELDSILL_RECORDINGS")
    if not folder:
        pytest.skip("FIELDSILL_RECORDINGS is not set: real recordings not tested")
    return Path(folder)


@pytest.fixture
def page() -> str:
    """The protocol's page."""
    return Path("hardware/PROTOCOL.md").read_text(encoding="utf-8")


@pytest.fixture
def fenced(page: str) -> Callable[[str], list[str]]:
    """All lines of the page's fenced blocks of one kind."""

    def blocks(kind: str) -> list[str]:
        found = re.findall(rf"```{kind}\n(.*?)```", page, re.DOTALL)
        return [row for block in found for row in block.splitlines()]

    return blocks
