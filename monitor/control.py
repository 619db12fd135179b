"""The daemon's local control socket: JSON lines over a unix stream beside the record.

It is the pages' and the commands' only way to make the daemon do something. One thread serves
all connections and never waits for any of them; a connection that dawdles is dropped.
"""

from __future__ import annotations

import json
import math
import os
import selectors
import socket
import stat
import threading
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path

from monitor.clock import SystemClock
from monitor.core.errors import ConfigError, DeviceError, FieldsillError

MAX_REQUEST_BYTES = 64 * 1024
MAX_REPLY_BYTES = 4 << 20
MAX_PATH_BYTES = 107  # of a unix socket's address on Linux
MAX_CONNECTIONS = 32
PATIENCE_S = 5.0

Handler = Callable[[dict[str, object]], dict[str, object]]
# What a handler may raise on a request that makes no sense; the asker is told, the thread lives.
_ANSWERABLE = (ArithmeticError, AttributeError, LookupError, OSError, RuntimeError, TypeError,
               ValueError)  # fmt: skip


class NoDaemonError(DeviceError):
    """Nothing listens there: a request was not even begun."""


def _connect(connection: socket.socket, path: Path) -> None:
    try:
        connection.connect(str(path))
    except (ConnectionRefusedError, FileNotFoundError) as error:
        raise NoDaemonError(
            f"no answer from the daemon at {path}; start it with fieldsill measure"
        ) from error


def ask(path: Path, request: Mapping[str, object], timeout_s: float = 2.0) -> dict[str, object]:
    """Send one request and return the daemon's reply, which has "ok" in it.

    NoDaemonError where nothing listens; DeviceError where no whole reply comes within timeout_s;
    ConfigError where the request holds what no line can.
    """
    _refuse_long(path)
    try:
        line = _line(request)
    except (TypeError, ValueError, RecursionError) as error:
        raise ConfigError(f"the request cannot be sent: {error}; correct its text") from error
    until = _now_s() + timeout_s
    try:
        with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as connection:
            connection.settimeout(timeout_s)
            _connect(connection, path)
            connection.sendall(line)
            reply = json.loads(_received(connection, until))
    except NoDaemonError:
        raise
    except (OSError, ValueError) as error:
        raise DeviceError(
            f"no answer from the daemon at {path}; start it with fieldsill measure"
        ) from error
    if not isinstance(reply, dict):
        raise DeviceError(f"what answers at {path} is no daemon of fieldsill; check record.path")
    return reply


def plain(value: object) -> object:
    """The value as JSON can hold it: numpy scalars as numbers, figures that are not there null."""
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    if hasattr(value, "item"):
        value = value.item()
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


@dataclass(slots=True)
class _Peer:
    connection: socket.socket
    until: float
    taken: bytearray = field(default_factory=bytearray)
    to_send: bytearray = field(default_factory=bytearray)
    last: bool = False


class Server:
    """Listens at path as long as it lives; handler is called on the server's thread.

    handler: request to reply, quick and without waiting; "ok": True is added to its reply. What
    it raises becomes {"ok": False, "error": text}. DeviceError where the path is taken by
    another daemon or by a file; a socket that nobody serves any more is replaced.
    """

    def __init__(self, path: Path, handler: Handler, *, mode: int = 0o660) -> None:
        self.path = path
        self._handler = handler
        self._peers: dict[int, _Peer] = {}
        self._selector = selectors.DefaultSelector()
        self._listener = _listening(path, mode)
        self._inode = path.stat().st_ino
        self._wake, self._woken = socket.socketpair()
        self._selector.register(self._listener, selectors.EVENT_READ)
        self._selector.register(self._woken, selectors.EVENT_READ)
        self._thread = threading.Thread(target=self._run, name="control", daemon=True)
        self._thread.start()

    def close(self) -> None:
        """Stop serving and take the socket away."""
        self._wake.close()
        self._thread.join()
        if self.path.exists() and self.path.stat().st_ino == self._inode:
            self.path.unlink()

    def _run(self) -> None:
        serving = True
        while serving:
            for key, events in self._selector.select(self._patience_s()):
                if key.fileobj is self._woken:
                    serving = False
                elif key.fileobj is self._listener:
                    self._accept()
                else:
                    self._serve(self._peers[key.fd], events)
            for peer in [p for p in self._peers.values() if p.until <= _now_s()]:
                self._drop(peer)
        for peer in list(self._peers.values()):
            self._drop(peer)
        self._listener.close()
        self._woken.close()
        self._selector.close()

    def _patience_s(self) -> float | None:
        if not self._peers:
            return None
        return max(0.0, min(peer.until for peer in self._peers.values()) - _now_s())

    def _accept(self) -> None:
        try:
            connection, _ = self._listener.accept()
        except OSError:  # gone before it was served
            return
        if len(self._peers) >= MAX_CONNECTIONS:
            connection.close()
            return
        connection.setblocking(False)
        self._peers[connection.fileno()] = _Peer(connection, _now_s() + PATIENCE_S)
        self._selector.register(connection, selectors.EVENT_READ)

    def _serve(self, peer: _Peer, events: int) -> None:
        try:
            if events & selectors.EVENT_READ:
                self._take(peer)
            if peer.to_send:
                del peer.to_send[: peer.connection.send(peer.to_send)]
        except BlockingIOError:
            pass
        except OSError:
            self._drop(peer)
            return
        if peer.last and not peer.to_send:
            self._drop(peer)
            return
        # A peer that does not read its replies is asked nothing more.
        wanted = selectors.EVENT_WRITE if peer.to_send else selectors.EVENT_READ
        self._selector.modify(peer.connection, wanted)

    def _take(self, peer: _Peer) -> None:
        data = peer.connection.recv(65536)
        peer.last = not data
        peer.taken += data
        while (end := peer.taken.find(b"\n")) >= 0:
            if end > MAX_REQUEST_BYTES:
                break
            peer.to_send += self._answer(bytes(peer.taken[:end]))
            peer.until = _now_s() + PATIENCE_S
            del peer.taken[: end + 1]
        if len(peer.taken) > MAX_REQUEST_BYTES:
            peer.taken.clear()
            peer.to_send += _line(_refusal(f"a request has at most {MAX_REQUEST_BYTES} bytes"))
            peer.last = True

    def _answer(self, line: bytes) -> bytes:
        """The line of the reply; whatever the request holds, there is one."""
        try:
            request = json.loads(line)
            _line({"request": request})
        except UnicodeEncodeError:
            return _line(_refusal("the request holds a text that is no Unicode; correct it"))
        except (ValueError, RecursionError):
            return _line(_refusal("the request is not JSON; send one object a line"))
        if not isinstance(request, dict):
            return _line(_refusal("the request is not a JSON object"))
        try:
            return _line({"ok": True, **self._handler(request)})
        except FieldsillError as error:
            return _line(_refusal(str(error)))
        except _ANSWERABLE as error:
            text = f"the request cannot be done: {type(error).__name__}: {error}"
            return _line(_refusal(text))

    def _drop(self, peer: _Peer) -> None:
        del self._peers[peer.connection.fileno()]
        self._selector.unregister(peer.connection)
        peer.connection.close()


def _listening(path: Path, mode: int) -> socket.socket:
    _refuse_long(path)
    _clear_stale(path)
    listener = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
    try:
        listener.bind(str(path))
        os.chmod(path, mode)  # before listen(): until then nobody can connect
        listener.listen(MAX_CONNECTIONS)
    except OSError as error:
        listener.close()
        raise DeviceError(f"{path}: cannot listen: {error}; check the folder") from error
    listener.setblocking(False)
    return listener


def _clear_stale(path: Path) -> None:
    if not path.exists():
        return
    if not stat.S_ISSOCK(path.stat().st_mode):
        raise DeviceError(f"{path}: is a file, not a socket; move it away")
    with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as probe:
        probe.settimeout(1.0)
        try:
            probe.connect(str(path))
        except ConnectionRefusedError:
            path.unlink(missing_ok=True)
            return
        except OSError as error:
            raise DeviceError(f"{path}: cannot be used: {error}; check permissions") from error
    raise DeviceError(f"{path}: another daemon listens there; stop it or name another record.path")


def _refuse_long(path: Path) -> None:
    if len(os.fsencode(path)) > MAX_PATH_BYTES:
        raise ConfigError(
            f"{path}: too long for a socket's address ({MAX_PATH_BYTES} bytes); "
            "give record.path a shorter folder"
        )


def _now_s() -> float:
    return SystemClock().boot_ns() / 1e9


def _line(document: Mapping[str, object]) -> bytes:
    return json.dumps(plain(document), allow_nan=False, ensure_ascii=False).encode() + b"\n"


def _refusal(text: str) -> dict[str, object]:
    return {"ok": False, "error": text.encode("utf-8", "backslashreplace").decode()}


def _received(connection: socket.socket, until: float) -> bytes:
    """One line; ValueError where it does not end, is too long, or takes too long."""
    data = bytearray()
    while not data.endswith(b"\n"):
        left_s = until - _now_s()
        if left_s <= 0 or len(data) > MAX_REPLY_BYTES:
            raise ValueError("no whole reply")
        connection.settimeout(left_s)
        part = connection.recv(65536)
        if not part:
            raise ValueError("the reply breaks off")
        data += part
    return bytes(data)
