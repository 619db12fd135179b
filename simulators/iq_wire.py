"""The wire of a sample stream: a header, samples one way, five-byte commands the other."""

from __future__ import annotations

import socket
import struct

from simulators.iq_receiver import GAINS_DB, TUNER
from simulators.iq_transfers import Transfers

MAGIC = b"RTL0"
WRONG_MAGIC = b"XTL0"


def header(magic: bytes = MAGIC) -> bytes:
    """Twelve bytes: magic, tuner type and number of gain steps, big-endian."""
    return magic + struct.pack(">II", TUNER, len(GAINS_DB))


class Client:
    """One connection. transfers: None where it is left without header and samples."""

    def __init__(self, link: socket.socket, transfers: Transfers | None, head: bytes) -> None:
        link.setblocking(False)
        self.link = link
        self.transfers = transfers
        self.sent = 0
        self._head = len(head)
        self._left = memoryview(head)
        self._part = b""

    def waits(self) -> bool:
        """Whether bytes are on hand that the connection has not taken."""
        return bool(self._left)

    def give(self, data: bytes) -> None:
        """Put a transfer on hand."""
        self._left = memoryview(data)

    def send(self, most: int) -> memoryview:
        """What the connection took of the samples on hand. Raises OSError where it has gone."""
        try:
            taken = self.link.send(self._left[:most])
        except BlockingIOError:
            taken = 0
        gone, self._left = self._left[:taken], self._left[taken:]
        of_head = min(self._head, taken)
        self._head -= of_head
        self.sent += taken - of_head
        return gone[of_head:]

    def commands(self) -> list[tuple[int, int]]:
        """Whole commands that have come. Raises OSError where the client has gone."""
        try:
            data = self.link.recv(4096)
        except BlockingIOError:
            return []
        if not data:
            raise ConnectionResetError("the client has gone")
        data = self._part + data
        whole = len(data) // 5 * 5
        self._part = data[whole:]
        return list(struct.iter_unpack(">BI", data[:whole]))
