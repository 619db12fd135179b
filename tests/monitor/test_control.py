"""The control socket answers whole lines, whatever else hangs on it."""

from __future__ import annotations

import json
import os
import socket
import stat
import threading
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from monitor import control
from monitor.control import MAX_REQUEST_BYTES, NoDaemonError, Server, ask
from monitor.core.errors import ConfigError, DeviceError

Request = dict[str, object]


def _handler(request: Request) -> Request:
    if request.get("do") == "refuse":
        raise ConfigError("no such alarm: roof; name one of now's alarms")
    if request.get("do") == "stumble":
        return {"value": request["missing"]}
    if request.get("do") == "much":
        return {"text": "x" * 1_000_000}
    return {"echo": request, "figure": float("nan")}


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """Where the socket goes."""
    return tmp_path / "site.sock"


@pytest.fixture
def server(path: Path) -> Iterator[Server]:
    """A server with the handler above."""
    made = Server(path, _handler)
    yield made
    made.close()


def _client(path: Path) -> socket.socket:
    client = socket.socket(socket.AF_UNIX)
    client.settimeout(10)
    client.connect(str(path))
    return client


def _line(client: socket.socket) -> Request:
    with client.makefile("rb") as file:
        reply: Request = json.loads(file.readline())
    return reply


def test_a_request_and_its_reply(server: Server, path: Path) -> None:
    reply = ask(path, {"do": "note", "text": "über"})
    assert reply == {"ok": True, "echo": {"do": "note", "text": "über"}, "figure": None}


def test_a_reply_larger_than_any_buffer(server: Server, path: Path) -> None:
    assert len(str(ask(path, {"do": "much"})["text"])) == 1_000_000


@pytest.mark.parametrize(
    ("request_", "error"),
    [
        ({"do": "refuse"}, "no such alarm: roof; name one of now's alarms"),
        ({"do": "stumble"}, "the request cannot be done: KeyError: 'missing'"),
    ],
)
def test_what_the_handler_raises_is_told(
    server: Server, path: Path, request_: Request, error: str
) -> None:
    assert ask(path, request_) == {"ok": False, "error": error}
    assert ask(path, {})["ok"] is True


@pytest.mark.parametrize("bad", [b"{do: now}\n", b"[1]\n", b"\xff\xfe\n", b"[" * 5000 + b"\n"])
def test_what_is_not_a_json_object_is_told(server: Server, path: Path, bad: bytes) -> None:
    with _client(path) as client:
        client.sendall(bad)
        reply = _line(client)
    assert reply["ok"] is False
    assert "JSON" in str(reply["error"])


@pytest.mark.parametrize("end", [b"", b"\n"])
def test_a_request_too_long_is_refused_and_the_connection_closed(
    server: Server, path: Path, end: bytes
) -> None:
    with _client(path) as client:
        client.sendall(b"x" * (MAX_REQUEST_BYTES + 1) + end)
        with client.makefile("rb") as file:
            reply = json.loads(file.readline())
            assert file.readline() == b""
    assert reply == {"ok": False, "error": "a request has at most 65536 bytes"}


def test_several_requests_in_pieces_on_one_connection(server: Server, path: Path) -> None:
    with _client(path) as client, client.makefile("rb") as file:
        for part in (b'{"do": "a"}\n{"d', b'o": "b"}', b"\n"):
            client.sendall(part)
        found = [json.loads(file.readline())["echo"]["do"] for _ in range(2)]
    assert found == ["a", "b"]


def test_slow_and_silent_clients_hold_up_nobody_and_are_dropped(
    path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(control, "PATIENCE_S", 0.3)
    server = Server(path, _handler)
    silent, half, deaf = (_client(path) for _ in range(3))
    half.sendall(b'{"do"')
    deaf.sendall(b'{"do": "much"}\n')  # and never reads the reply
    assert ask(path, {"do": "now"})["ok"] is True
    assert silent.recv(1) == b""
    assert half.recv(1) == b""
    with _client(path) as later:  # dropped after the deaf one
        assert later.recv(1) == b""
    received = 0
    while part := deaf.recv(1 << 20):
        received += len(part)
    assert received < 1_000_000
    for client in (silent, half, deaf):
        client.close()
    server.close()


def test_more_connections_than_it_serves(server: Server, path: Path) -> None:
    many = [_client(path) for _ in range(control.MAX_CONNECTIONS)]
    for client in many:  # each is served before the next is counted
        client.sendall(b"{}\n")
        assert _line(client)["ok"] is True
    with pytest.raises(DeviceError, match="no answer"):
        ask(path, {})
    for client in many:
        client.close()


def test_nobody_there(path: Path) -> None:
    message = f"no answer from the daemon at {path}; start it with fieldsill measure"
    with pytest.raises(NoDaemonError) as caught:
        ask(path, {"do": "now"})
    assert str(caught.value) == message


@pytest.mark.parametrize("reply", [b"", b"half", b"nonsense\n", None])
def test_an_answer_that_is_none(path: Path, reply: bytes | None) -> None:
    listener = socket.socket(socket.AF_UNIX)
    listener.bind(str(path))
    listener.listen()
    gone = threading.Event()

    def serve() -> None:
        connection, _ = listener.accept()
        with connection:
            connection.recv(100)
            if reply is None:
                gone.wait(10)
            else:
                connection.sendall(reply)

    thread = threading.Thread(target=serve)
    thread.start()
    with pytest.raises(DeviceError, match="no answer from the daemon") as caught:
        ask(path, {"do": "now"}, timeout_s=0.3)
    assert not isinstance(caught.value, NoDaemonError)  # it may have been taken: not to be repeated
    gone.set()
    thread.join()
    listener.close()


def test_only_user_and_group_may_ask_and_the_socket_goes_with_the_server(path: Path) -> None:
    server = Server(path, _handler)
    mode = path.stat().st_mode
    server.close()
    assert stat.S_ISSOCK(mode)
    assert stat.S_IMODE(mode) == 0o660
    assert not path.exists()


def test_a_stale_socket_is_replaced(path: Path) -> None:
    dead = socket.socket(socket.AF_UNIX)
    dead.bind(str(path))
    dead.close()
    server = Server(path, _handler)
    assert ask(path, {})["ok"] is True
    server.close()


def test_a_living_daemons_socket_is_left_to_it(server: Server, path: Path) -> None:
    with pytest.raises(DeviceError, match="another daemon listens there"):
        Server(path, _handler)
    assert ask(path, {})["ok"] is True


def test_a_file_in_the_way_is_left_alone(path: Path) -> None:
    path.write_text("mine")
    with pytest.raises(DeviceError, match="is a file, not a socket"):
        Server(path, _handler)
    assert path.read_text() == "mine"


def test_a_folder_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(DeviceError, match="cannot listen"):
        Server(tmp_path / "gone" / "site.sock", _handler)


@pytest.mark.parametrize("use", [lambda p: Server(p, _handler), lambda p: ask(p, {})])
def test_a_path_too_long_for_an_address(tmp_path: Path, use: Callable[[Path], object]) -> None:
    long = tmp_path / ("x" * 120) / "site.sock"
    with pytest.raises(ConfigError, match="too long for a socket's address"):
        use(long)


def test_closing_drops_who_is_still_connected(path: Path) -> None:
    server = Server(path, _handler)
    client = _client(path)
    client.sendall(b"{}\n")
    assert _line(client)["ok"] is True
    files = len(os.listdir("/proc/self/fd"))
    server.close()
    assert client.recv(1) == b""
    client.close()
    assert len(os.listdir("/proc/self/fd")) < files


def test_a_text_that_is_no_unicode_is_refused_and_the_server_lives(
    server: Server, path: Path
) -> None:
    with _client(path) as client:
        client.sendall(b'{"do": "note", "text": "\\ud800 hello"}\n')
        reply = _line(client)
    assert reply == {
        "ok": False,
        "error": "the request holds a text that is no Unicode; correct it",
    }
    with pytest.raises(ConfigError, match="cannot be sent"):
        ask(path, {"do": "note", "text": "\ud800"})
    assert ask(path, {})["ok"] is True


def test_a_reply_that_no_line_can_hold_is_told_and_the_server_lives(path: Path) -> None:
    def handler(request: Request) -> Request:
        if request.get("do") == "raise":
            raise ConfigError("no alarm \udc80")
        return {"object": object()} if request.get("do") == "object" else {"text": "\udc80"}

    server = Server(path, handler)
    try:
        for do in ("object", "text"):
            assert "cannot be done" in str(ask(path, {"do": do})["error"])
        assert ask(path, {"do": "raise"})["error"] == "no alarm \\udc80"
    finally:
        server.close()
