"""The board's end of a serial line: a pseudo-terminal with a link to its other end."""

from __future__ import annotations

import errno
import fcntl
import os
import select
import struct
import termios
import tty
from pathlib import Path


class Line:
    """A pseudo-terminal in raw mode. The link names the end that a reader opens."""

    def __init__(self, link: Path) -> None:
        self.link = link
        self._master = -1
        self._slave_name = ""

    @property
    def is_open(self) -> bool:
        """Whether the device is there at all."""
        return self._master >= 0

    def fileno(self) -> int:
        """The board's end, for select; -1 while the device is away."""
        return self._master

    def open(self) -> None:
        """Let the device appear. Raises OSError where the link cannot be made."""
        if self.link.exists() and not self.link.is_symlink():
            raise FileExistsError(errno.EEXIST, "is there and no link", str(self.link))
        master, slave = os.openpty()
        try:
            tty.setraw(slave)
            self._slave_name = os.ttyname(slave)
            fresh = self.link.with_name(f".{self.link.name}.{os.getpid()}")
            fresh.unlink(missing_ok=True)
            fresh.symlink_to(self._slave_name)
            os.replace(fresh, self.link)
        except OSError:
            os.close(master)
            raise
        finally:
            os.close(slave)  # the terminal hangs up until a reader opens it
        os.set_blocking(master, False)
        self._master = master

    def close(self) -> None:
        """Let the device vanish, and its link with it."""
        if not self.is_open:
            return
        if self.link.is_symlink() and os.readlink(self.link) == self._slave_name:
            self.link.unlink()
        master, self._master = self._master, -1  # a signal may come in between
        os.close(master)

    def attached(self) -> bool:
        """Whether somebody has the other end open."""
        if not self.is_open:
            return False
        poll = select.poll()
        poll.register(self._master, 0)
        return not any(event & select.POLLHUP for _, event in poll.poll(0))

    def write(self, data: bytes | memoryview) -> int:
        """Bytes taken now, without waiting; 0 where the line is full or nobody is there."""
        try:
            return os.write(self._master, data)
        except BlockingIOError:
            return 0
        except OSError as error:
            if error.errno != errno.EIO:
                raise
            return 0

    def read(self) -> bytes:
        """What the reader has sent so far."""
        try:
            return os.read(self._master, 4096)
        except BlockingIOError:
            return b""
        except OSError as error:
            if error.errno != errno.EIO:
                raise
            return b""

    def unread(self) -> int:
        """Bytes that the reader has not yet taken, as far as the terminal counts them."""
        slave = os.open(self._slave_name, os.O_RDONLY | os.O_NOCTTY | os.O_NONBLOCK)
        try:
            (waiting,) = struct.unpack("i", fcntl.ioctl(slave, termios.FIONREAD, b"\0" * 4))
            return int(waiting)
        finally:
            os.close(slave)
