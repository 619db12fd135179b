"""Client of a sample server on TCP, as IQ.md describes it: one connection that comes and goes."""

from __future__ import annotations

import errno
import os
import selectors
import socket
import struct
from collections.abc import Callable
from dataclasses import dataclass

from monitor.core.errors import DeviceError
from monitor.core.readings import NS_PER_S

HEADER = struct.Struct(">4sII")
MAGIC = b"RTL0"
COMMAND = struct.Struct(">BI")
CENTRE, RATE, GAIN_MODE, GAIN, PPM, DIGITAL_GAIN = 1, 2, 3, 4, 5, 8

CONNECT_S = 5.0
HEADER_S = 5.0
"""A server that serves somebody else takes the connection, but sends no header."""
STALL_S = 2.0
"""Without a byte for so long a stream is given up; so is one that we did not read for so long:
the server may have up to 32 s of old samples waiting (IQ.md)."""
BACK_OFF_S = 0.25
LONGEST_BACK_OFF_S = 4.0
PIECE = 1 << 20
_R82 = (
    0, 9, 14, 27, 37, 77, 87, 125, 144, 157, 166, 197, 207, 229, 254, 280, 297, 328, 338, 364,
    372, 386, 402, 421, 434, 439, 445, 480, 496,
)  # fmt: skip
_E4 = (-10, 15, 40, 65, 90, 115, 140, 165, 190, 215, 240, 290, 340, 420)
_FC12 = (-99, -40, 71, 179, 192)
STEPS_TENTH_DB = {1: _E4, 2: _FC12, 5: _R82, 6: _R82}
"""Nominal gains of a tuner by its number in the header, tenths of dB (IQ.md)."""


@dataclass(frozen=True, slots=True)
class Radio:
    """Where the server is and how its receiver is to be set; the gain is fixed."""

    host: str
    port: int
    rate_hz: int
    gain_db: float
    ppm: int

    @property
    def name(self) -> str:
        """The server as messages call it."""
        return f"{self.host}:{self.port}"


def commands(radio: Radio, centre_hz: int) -> bytes:
    """What sets the receiver up: rate, manual gain, its step, no digital gain, crystal, centre."""
    pairs = (
        (RATE, radio.rate_hz),
        (GAIN_MODE, 1),
        (GAIN, round(radio.gain_db * 10)),
        (DIGITAL_GAIN, 0),
        (PPM, radio.ppm),
        (CENTRE, centre_hz),
    )
    return b"".join(command(code, value) for code, value in pairs)


def command(code: int, value: int) -> bytes:
    """Five bytes; a negative value as its two's complement."""
    return COMMAND.pack(code, value & 0xFFFF_FFFF)


def gain_note(radio: Radio, tuner: int, steps: int) -> str:
    """What is to be said about the gain asked for: which step of the tuner it will be."""
    known = STEPS_TENTH_DB.get(tuner, ())
    asked = round(radio.gain_db * 10)
    if not known or len(known) != steps or asked in known:
        return f"gain {radio.gain_db:g} dB"
    near = min(known, key=lambda step: abs(step - asked))
    return f"gain {radio.gain_db:g} dB is no step of this tuner, about {near / 10:g} dB is in force"


def check_server(host: str, port: int, where: str) -> None:
    """DeviceError in one line where nothing answers at that address within CONNECT_S."""
    try:
        socket.create_connection((host, port), CONNECT_S).close()
    except OSError as error:
        why = "no answer" if isinstance(error, TimeoutError) else error.strerror or str(error)
        raise DeviceError(
            f"{where}: {host}:{port}: {why}; start the receiver's server, or correct host and port"
        ) from None


class Client:
    """One connection. now_ns: a clock that never jumps (ns).

    generation: grows with each stream that begins; what read() returns is all of one stream.
    problem: why there is no stream, empty while there is one. told: what the header said.
    """

    def __init__(self, radio: Radio, centre_hz: int, now_ns: Callable[[], int]) -> None:
        self._radio = radio
        self._centre_hz = centre_hz
        self._now_ns = now_ns
        self._socket: socket.socket | None = None
        self._selector = selectors.DefaultSelector()
        self._head: bytes | None = None
        self._odd = b""
        self._attempts = 0
        self._back_off_s = BACK_OFF_S
        self._try_at_ns = self._looked_ns = self._heard_ns = now_ns()
        self._connecting = False
        self.generation = 0
        self.problem = "not connected yet"
        self.told = ""
        keys = ("connected", "connect_failures", "no_header", "stalls", "stale", "closed", "wrong")
        self.counters = dict.fromkeys(keys, 0)

    @property
    def streaming(self) -> bool:
        """Whether the header has come and the receiver was set up."""
        return self._socket is not None and self._head is None

    def watch(self, descriptor: int) -> None:
        """Let what comes at this descriptor, too, end a wait of read()."""
        self._selector.register(descriptor, selectors.EVENT_READ)

    def read(self, timeout_s: float) -> bytes:
        """Whole samples that came, two bytes each; waits timeout_s at most."""
        now_ns = self._now_ns()
        if self._socket is None and not self._connect(now_ns, timeout_s):
            return b""
        self._wait(timeout_s)
        now_ns, before_ns = self._now_ns(), self._looked_ns
        self._looked_ns = now_ns
        if self.streaming and now_ns - before_ns > STALL_S * NS_PER_S:
            self.reopen(
                "stale", f"not read for {(now_ns - before_ns) / NS_PER_S:.1f} s, old samples"
            )
            return b""
        if self._connecting and not self._connected(now_ns):
            return b""
        data = self._receive()
        if data:
            self._heard_ns = now_ns
        elif self._socket is not None:
            self._patience(now_ns)
        if self._head is not None:
            data = self._header(data)
        data = self._odd + data
        even = len(data) & ~1
        self._odd = data[even:]
        return data[:even]

    def tune(self, centre_hz: int) -> None:
        """Another centre, now and for later streams."""
        self._centre_hz = centre_hz
        if self.streaming:
            self._send(command(CENTRE, centre_hz))

    def gain(self, gain_db: float) -> None:
        """Another gain, for this stream only: a later one begins at the radio's own."""
        if self.streaming:
            self._send(command(GAIN, round(gain_db * 10)))

    def well(self) -> None:
        """The stream has proved good: the next trouble is tried again soon."""
        self._back_off_s = BACK_OFF_S

    def reopen(self, counter: str, why: str) -> None:
        """Close the connection, count it, and connect again after a while, longer each time."""
        self._shut()
        self.counters[counter] += 1
        self.problem = why
        self._try_at_ns = self._now_ns() + int(self._back_off_s * NS_PER_S)
        self._back_off_s = min(2 * self._back_off_s, LONGEST_BACK_OFF_S)

    def close(self) -> None:
        """Let everything go."""
        self._shut()
        self._selector.close()

    def _wait(self, timeout_s: float) -> None:
        if self._selector.get_map():
            self._selector.select(max(timeout_s, 0.0))

    def _connect(self, now_ns: int, timeout_s: float) -> bool:
        wait_s = (self._try_at_ns - now_ns) / NS_PER_S
        if wait_s > 0:
            self._wait(min(wait_s, timeout_s))
            return False
        radio = self._radio
        try:
            found = socket.getaddrinfo(radio.host, radio.port, type=socket.SOCK_STREAM)
            family, kind, protocol, _, address = found[self._attempts % len(found)]
            self._attempts += 1
            self._socket = socket.socket(family, kind, protocol)
            self._socket.setblocking(False)
            code = self._socket.connect_ex(address)
        except OSError as error:
            self.reopen("connect_failures", f"{radio.name}: {error.strerror or error}")
            return False
        if code not in (0, errno.EINPROGRESS):
            self.reopen("connect_failures", f"{radio.name}: {os.strerror(code)}")
            return False
        self._selector.register(self._socket, selectors.EVENT_WRITE)
        self._connecting, self._head, self._odd = True, b"", b""
        self._heard_ns = self._looked_ns = now_ns
        return True

    def _connected(self, now_ns: int) -> bool:
        """Whether the attempt to connect has come to a good end."""
        assert self._socket is not None
        ready = [key.fileobj for key, _ in self._selector.select(0)]
        if self._socket not in ready:
            if now_ns - self._heard_ns > CONNECT_S * NS_PER_S:
                self.reopen("connect_failures", f"{self._radio.name}: no answer")
            return False
        code = self._socket.getsockopt(socket.SOL_SOCKET, socket.SO_ERROR)
        if code:
            self.reopen("connect_failures", f"{self._radio.name}: {os.strerror(code)}")
            return False
        self._selector.modify(self._socket, selectors.EVENT_READ)
        self._connecting, self._heard_ns = False, now_ns
        self.problem = f"{self._radio.name}: connected, waits for the header"
        return True

    def _receive(self) -> bytes:
        if self._socket is None:
            return b""
        try:
            data = self._socket.recv(PIECE)
        except BlockingIOError:
            return b""
        except OSError as error:
            self.reopen("closed", f"{self._radio.name}: {error.strerror or error}")
            return b""
        if not data:
            self.reopen("closed", f"{self._radio.name}: the server closed the connection")
        return data

    def _patience(self, now_ns: int) -> None:
        silent_ns = now_ns - self._heard_ns
        if self._head is not None and silent_ns > HEADER_S * NS_PER_S:
            why = "no header came; the server may be serving somebody else"
            self.reopen("no_header", f"{self._radio.name}: {why}")
        elif self._head is None and silent_ns > STALL_S * NS_PER_S:
            self.reopen("stalls", f"{self._radio.name}: no samples for {STALL_S:g} s")

    def _header(self, data: bytes) -> bytes:
        """Take the header's bytes off; what follows it are samples."""
        head = (self._head or b"") + data
        self._head = head
        if self._socket is None or len(head) < HEADER.size:
            return b""
        magic, tuner, steps = HEADER.unpack_from(head)
        if magic != MAGIC:
            self.reopen("wrong", f"{self._radio.name}: is not a sample server; correct the port")
            return b""
        self._head = None
        self.told = f"tuner {tuner}, {gain_note(self._radio, tuner, steps)}"
        self.problem = ""
        self.generation += 1
        self.counters["connected"] += 1
        self._send(commands(self._radio, self._centre_hz))
        return head[HEADER.size :]

    def _send(self, data: bytes) -> None:
        """A few bytes always fit, unless the server has ceased to read."""
        assert self._socket is not None
        try:
            sent = self._socket.send(data)
        except OSError as error:
            self.reopen("closed", f"{self._radio.name}: {error.strerror or error}")
            return
        if sent != len(data):
            self.reopen("closed", f"{self._radio.name}: the server takes no commands")

    def _shut(self) -> None:
        if self._socket is not None:
            if self._socket in self._selector.get_map():
                self._selector.unregister(self._socket)
            self._socket.close()
        self._socket, self._connecting, self._head, self._odd = None, False, None, b""
