"""A sample server of the tests' own: a thread that plays one script for each connection."""

from __future__ import annotations

import socket
import struct
import threading
import time
from collections.abc import Callable, Sequence

import numpy as np

HEADER = b"RTL0" + struct.pack(">II", 5, 29)
CENTRE, RATE = 1, 2


class Clock:
    """The machine's steady clock, which a test may put forward."""

    def __init__(self):
        self.ahead_ns = 0

    def __call__(self):
        return time.monotonic_ns() + self.ahead_ns

    def ahead(self, seconds):
        self.ahead_ns += round(seconds * 1e9)


def tone(n, rate_hz, offset_hz, amplitude=0.5, first=0):
    """cu8 bytes of n samples of a tone, from sample number first on."""
    phase = 2j * np.pi * offset_hz / rate_hz * (first + np.arange(n))
    z = amplitude * np.exp(phase)
    both = np.column_stack([z.real, z.imag]).ravel()
    return np.rint(both * 127.5 + 127.5).astype("u1").tobytes()


class Server:
    """Plays scripts[i] for the i-th connection, the last one for all later; keeps commands.

    A script is called with the server and the connection and returns when it is to be closed.
    """

    def __init__(self, *scripts: Callable[[Server, socket.socket], None]) -> None:
        self.scripts: Sequence[Callable[[Server, socket.socket], None]] = scripts
        self.listener = socket.create_server(("127.0.0.1", 0))
        self.port = self.listener.getsockname()[1]
        self.stop = threading.Event()
        self.connections = 0
        self.commands: list[tuple[int, int]] = []
        self._half = b""
        self.thread = threading.Thread(target=self._serve, daemon=True)
        self.thread.start()

    def _serve(self) -> None:
        self.listener.settimeout(0.05)
        while not self.stop.is_set():
            try:
                link, _ = self.listener.accept()
            except TimeoutError:
                continue
            script = self.scripts[min(self.connections, len(self.scripts) - 1)]
            self.connections += 1
            with link:
                try:
                    script(self, link)
                except OSError:
                    continue

    def listen(self, link: socket.socket) -> None:
        """Take the commands that have come; OSError where the client is gone."""
        link.setblocking(False)
        try:
            data = link.recv(4096)
            if not data:
                raise ConnectionResetError
            self._half += data
        except BlockingIOError:
            pass
        link.setblocking(True)
        while len(self._half) >= 5:
            self.commands.append(struct.unpack(">BI", self._half[:5]))
            self._half = self._half[5:]

    def told(self, code: int, otherwise: int) -> int:
        """The last value of a command."""
        return next((value for c, value in reversed(self.commands) if c == code), otherwise)

    def wait(self, link: socket.socket, seconds: float = 60.0) -> None:
        """Say nothing for so long, or until the client is gone."""
        until = time.monotonic() + seconds
        while not self.stop.is_set() and time.monotonic() < until:
            self.listen(link)
            self.stop.wait(0.01)

    def close(self) -> None:
        self.stop.set()
        self.thread.join()
        self.listener.close()


def streams(seconds=60.0, rate_hz=None, lag_s=0.0, skip=(), make=None, piece_s=0.05):
    """A script: the header, then samples at their pace for so long.

    rate_hz: in force whatever is asked for. lag_s: samples keep the old centre for so long after a
    command. skip: (at_s, samples) that are lost. make: bytes of n samples, from (server's centre,
    rate, first sample, n). piece_s: of one transfer.
    """
    make = make or (lambda centre, rate, first, n: tone(n, rate, 100e3, first=first))

    def script(server, link):
        link.sendall(HEADER)
        server.wait(link, 0.02)
        rate = rate_hz or server.told(RATE, 2_048_000)
        began, sent, losses = time.monotonic(), 0, list(skip)
        centres = [(0.0, server.told(CENTRE, 0))]
        while not server.stop.is_set() and time.monotonic() - began < seconds:
            server.listen(link)
            now = time.monotonic() - began
            if server.told(CENTRE, 0) != centres[-1][1]:
                centres.append((now + lag_s, server.told(CENTRE, 0)))
            due = int(now / piece_s) * int(piece_s * rate)
            if losses and now >= losses[0][0]:
                sent += losses.pop(0)[1]
            if due > sent:
                centre = [value for at, value in centres if at <= now][-1]
                link.sendall(make(centre, rate, sent, due - sent))
                sent = due
            server.stop.wait(piece_s / 5)

    return script


def silent(server, link):
    """A script: no header comes."""
    server.wait(link)


def stalls(server, link):
    """A script: a little comes, then nothing."""
    streams(0.2)(server, link)
    server.wait(link)


def closes(server, link):
    """A script: a little comes, then the server closes."""
    streams(0.2)(server, link)
