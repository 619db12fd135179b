"""A serial port that comes and goes: opened by path or URL, read in large pieces, never raising."""

from __future__ import annotations

import os
import select
import stat
import weakref
from collections.abc import Callable
from io import UnsupportedOperation
from pathlib import Path

import serial

from monitor.core.errors import DeviceError
from monitor.core.readings import NS_PER_S

BACK_OFF_S = 0.25
LONGEST_BACK_OFF_S = 4.0
_PIECE = 1 << 16
_MOST = 1 << 18
_SLICE_S = 0.02
_WRITE_S = 0.2
_SCHEMES = ("alt", "cp2110", "hwgrep", "loop", "rfc2217", "socket", "spy")


def is_url(device: str) -> bool:
    """Whether device is a URL of pyserial rather than a path."""
    return "://" in device


def url_problem(device: str) -> str:
    """What is wrong with a URL, in words; empty where nothing is, and for a path."""
    scheme = device.partition("://")[0].lower()
    if not is_url(device) or scheme in _SCHEMES:
        return ""
    return f"{device!r}: {scheme} is not one of {', '.join(_SCHEMES)}"


def check_device(device: str, where: str) -> None:
    """DeviceError in one line unless the path is a port that this user may open; URLs pass."""
    if is_url(device):
        return
    path = Path(device)
    try:
        mode = path.stat().st_mode
    except OSError:
        raise DeviceError(
            f"{where}: {device} does not exist; plug the board in, or look in /dev/serial/by-id"
            " for its name"
        ) from None
    if not stat.S_ISCHR(mode):
        raise DeviceError(f"{where}: {device} is not a serial port; name a device under /dev")
    if not os.access(path, os.R_OK | os.W_OK):
        raise DeviceError(
            f"{where}: {device} may not be opened by this user; add the user to the group"
            f" {path.group()}"
        )


class Port:
    """One serial line. now_ns: a clock that never jumps (ns); it paces the attempts to open.

    generation: grows with each opening; what read() returns is all of one generation.
    problem: why the port is closed, empty while it is open.
    """

    def __init__(self, device: str, baud: int, now_ns: Callable[[], int]) -> None:
        self._device = device
        self._baud = baud
        self._now_ns = now_ns
        self._port: serial.SerialBase | None = None
        self._fd = -1
        self._closed = False
        self._wake_r, self._wake_w = pair = os.pipe()
        weakref.finalize(self, _close_all, pair)
        self._back_off_s = BACK_OFF_S
        self._try_at_ns = now_ns()
        self.generation = 0
        self.problem = "not opened yet"
        self.counters = {"reopened": 0, "open_failures": 0, "vanished": 0}

    @property
    def is_open(self) -> bool:
        """Whether the port is open."""
        return self._port is not None

    def read(self, timeout_s: float, gather_s: float = 0.0) -> bytes:
        """All bytes that are there; waits at most timeout_s for the first of them.

        gather_s: how long to go on collecting after the first bytes, at most 256 KiB.
        """
        if self._port is None and not self._reopen(timeout_s):
            return b""
        data = self._piece(timeout_s)
        if not data or not gather_s:
            return data
        pieces, size = [data], len(data)
        until_ns = self._now_ns() + int(gather_s * NS_PER_S)
        while size < _MOST and self._now_ns() < until_ns:
            data = self._piece(gather_s / 4)
            if not data:
                break
            pieces.append(data)
            size += len(data)
        return b"".join(pieces)

    def write(self, data: bytes) -> None:
        """Send data if the port is open and takes it at once; nothing is promised."""
        port = self._port
        if port is None:
            return
        if self._fd >= 0 and not select.select([], [self._fd], [], 0)[1]:
            return
        try:
            port.write(data)
        except serial.SerialTimeoutException:
            return
        except OSError as error:
            self._lose(str(error))

    def reopen(self, why: str) -> None:
        """Close the port; the next read opens it again."""
        self._shut()
        self.problem = why
        self._try_at_ns = self._now_ns()

    def close(self) -> None:
        """Close for good and end a read() that waits."""
        if not self._closed:
            self._closed = True
            os.write(self._wake_w, b"x")
            self._shut()
            self.problem = "closed"

    def _piece(self, timeout_s: float) -> bytes:
        port = self._port
        if port is None or not self._wait(port, timeout_s):
            return b""
        try:
            return bytes(port.read(_PIECE))
        except OSError as error:
            self._lose(str(error))
            return b""

    def _wait(self, port: serial.SerialBase, timeout_s: float) -> bool:
        """Whether bytes may be there; handlers without a descriptor are asked in short slices."""
        if self._closed:
            return False
        if self._fd >= 0:
            ready = select.select([self._fd, self._wake_r], [], [], timeout_s)[0]
            return bool(ready) and self._wake_r not in ready
        for _ in range(max(1, round(timeout_s / _SLICE_S))):
            if self._waiting(port) or select.select([self._wake_r], [], [], _SLICE_S)[0]:
                break
        return not self._closed

    def _waiting(self, port: serial.SerialBase) -> bool:
        try:
            return bool(getattr(port, "in_waiting", 1))
        except OSError:
            return True

    def _reopen(self, timeout_s: float) -> bool:
        if self._closed:
            return False
        wait_s = (self._try_at_ns - self._now_ns()) / NS_PER_S
        if wait_s > 0:
            select.select([self._wake_r], [], [], min(wait_s, timeout_s))
            if self._closed or self._now_ns() < self._try_at_ns:
                return False
        try:
            self._port = serial.serial_for_url(
                self._device,
                baudrate=self._baud,
                timeout=0,
                write_timeout=_WRITE_S,
                exclusive=None if is_url(self._device) else True,
            )
        except (OSError, ValueError) as error:
            self.counters["open_failures"] += 1
            self._later(_in_words(self._device, error))
            return False
        self._fd = _descriptor(self._port)
        self.counters["reopened"] += self.generation > 0
        self.generation += 1
        self.problem = ""
        return True

    def _lose(self, why: str) -> None:
        self.counters["vanished"] += 1
        self._shut()
        self._later(f"{self._device} vanished ({why})")

    def _later(self, problem: str) -> None:
        self.problem = problem
        self._try_at_ns = self._now_ns() + int(self._back_off_s * NS_PER_S)
        self._back_off_s = min(2 * self._back_off_s, LONGEST_BACK_OFF_S)

    def heard(self) -> None:
        """The line works: the next back-off starts short again."""
        self._back_off_s = BACK_OFF_S

    def _shut(self) -> None:
        port, self._port = self._port, None
        if port is not None:
            try:
                port.close()
            except OSError as error:
                self.problem = str(error)


def _close_all(descriptors: tuple[int, int]) -> None:
    for descriptor in descriptors:
        os.close(descriptor)


def _descriptor(port: serial.SerialBase) -> int:
    """What select() can wait on; -1 where a handler of the library has no such thing."""
    try:
        return port.fileno()
    except UnsupportedOperation:
        return -1


def _in_words(device: str, error: Exception) -> str:
    if isinstance(error, OSError) and error.errno is not None:
        return f"{device} cannot be opened ({os.strerror(error.errno).lower()})"
    return f"{device} cannot be opened ({error})"
