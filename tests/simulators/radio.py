"""A simulated receiver's server, started as people start it, and a small client of its own."""

from __future__ import annotations

import json
import select
import socket
import struct
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from simulators import control

PATIENCE_S = 20.0


class Radio:
    """A running server and what it says of itself."""

    def __init__(self, folder: Path, process: subprocess.Popen[str]) -> None:
        self.process = process
        self.control = folder / "iq-control"
        self.truth = folder / "iq-truth.csv"
        self.sent = folder / "sent.cu8"
        assert process.stdout is not None
        ready, _, _ = select.select([process.stdout], [], [], PATIENCE_S)
        assert ready, "the server says nothing"
        said = json.loads(process.stdout.readline())
        assert said["event"] == "ready"
        assert said["simulated"] is True
        self.address = (said["host"], said["port"])

    def state(self) -> dict[str, object]:
        """What the server says of itself."""
        return control.ask(self.control, {})

    def fault(self, kind: str, amount: float | None = None) -> None:
        """A fault, at once."""
        reply = control.ask(self.control, {"fault": kind, "amount": amount})
        assert reply["ok"] is True, reply

    @contextmanager
    def client(self) -> Iterator[Client]:
        """A connection."""
        with socket.create_connection(self.address, PATIENCE_S) as link:
            yield Client(link)


class Client:
    """One end of a connection."""

    def __init__(self, link: socket.socket) -> None:
        self.link = link

    def tell(self, code: int, value: int) -> None:
        """One command: a byte and four, the most significant first."""
        self.link.sendall(struct.pack(">BI", code, value % 2**32))

    def read(self, n: int, within_s: float = PATIENCE_S) -> bytes:
        """n bytes, or fewer where the other end closes or the time is over."""
        data = bytearray()
        end_s = time.monotonic() + within_s
        while len(data) < n and (left_s := end_s - time.monotonic()) > 0:
            self.link.settimeout(left_s)
            try:
                got = self.link.recv(min(n - len(data), 2**20))
            except (TimeoutError, ConnectionResetError):
                break
            if not got:
                break
            data += got
        return bytes(data)

    def listen(self, seconds: float) -> int:
        """How many bytes come within a time."""
        n, end_s = 0, time.monotonic() + seconds
        while got := self.read(2**18, max(end_s - time.monotonic(), 0.0)):
            n += len(got)
        return n


@contextmanager
def radio(folder: Path, *options: str) -> Iterator[Radio]:
    """A server on a free port; ended in the end."""
    command = [sys.executable, "-m", "simulators", "iq", "--port", "0", "--with-parent"]
    command += ["--control", str(folder / "iq-control"), "--truth", str(folder / "iq-truth.csv")]
    command += ["--sent", str(folder / "sent.cu8"), *options]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as process:
        try:
            yield Radio(folder, process)
        finally:
            process.terminate()
            process.wait(PATIENCE_S)


def complex_of(data: bytes) -> NDArray[np.complex128]:
    """Bytes as complex samples in which a tone of full scale has amplitude 1."""
    pairs = (np.frombuffer(data, np.uint8).astype(np.float64) - 127.5) / 127.5
    return pairs[0::2] + 1j * pairs[1::2]


def band_dbfs(samples: NDArray[np.complex128], rate_hz: float, low: float, high: float) -> float:
    """Power between two offsets by one long windowed transform (Hann), dBFS."""
    window = np.hanning(samples.size)
    power = np.abs(np.fft.fft(samples * window)) ** 2 / (samples.size * np.sum(window**2))
    at = np.fft.fftfreq(samples.size, 1.0 / rate_hz)
    return float(10.0 * np.log10(np.sum(power[(at >= low) & (at < high)])))
