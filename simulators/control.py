"""The board's control socket: one line of JSON in, one out, one request to a connection."""

from __future__ import annotations

import json
import os
import socket
from collections.abc import Callable
from pathlib import Path

TIMEOUT_S = 2.0
LONGEST = 4096


class Control:
    """A listening socket that the board serves between two frames."""

    def __init__(self, path: Path) -> None:
        """Listen at path; a socket that nobody serves any more is replaced. Raises OSError."""
        self.path = path
        if path.is_socket() and not _served(path):
            path.unlink()
        self._socket = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
        self._socket.bind(os.fspath(path))
        self._socket.listen(4)
        self._socket.setblocking(False)

    def fileno(self) -> int:
        """For select."""
        return self._socket.fileno()

    def serve(self, answer: Callable[[dict[str, object]], dict[str, object]]) -> None:
        """Answer one request that is waiting; a client that says nothing is let go."""
        try:
            client, _ = self._socket.accept()
        except BlockingIOError:
            return
        with client:
            client.settimeout(TIMEOUT_S)
            try:
                reply = answer(_request(client))
            except ValueError as error:
                reply = {"ok": False, "error": str(error)}
            except OSError:
                return
            _send(client, reply)

    def close(self) -> None:
        """Stop listening and take the socket away."""
        self._socket.close()
        self.path.unlink(missing_ok=True)


def _served(path: Path) -> bool:
    with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as probe:
        try:
            probe.connect(os.fspath(path))
        except ConnectionRefusedError:
            return False
        return True


def ask(path: Path, request: dict[str, object]) -> dict[str, object]:
    """The board's answer. Raises OSError where nobody listens, ValueError for nonsense."""
    with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as client:
        client.settimeout(5.0)
        client.connect(os.fspath(path))
        client.sendall(json.dumps(request).encode() + b"\n")
        return _request(client)


def _send(client: socket.socket, reply: dict[str, object]) -> None:
    try:
        client.sendall(json.dumps(reply).encode() + b"\n")
    except (BrokenPipeError, TimeoutError, ConnectionResetError):
        return  # the asker has gone; the fault is in force all the same


def _request(client: socket.socket) -> dict[str, object]:
    data = b""
    while b"\n" not in data and len(data) < LONGEST:
        got = client.recv(LONGEST)
        if not got:
            break
        data += got
    found = json.loads(data or b"null")
    if not isinstance(found, dict):
        raise ValueError("a JSON object on one line is expected")
    return found
