"""The connection to a sample server: set up, and every trouble noticed in its time and got over."""

from __future__ import annotations

import socket
import struct
import time

import pytest

from hardware.iq_client import (
    CONNECT_S,
    HEADER_S,
    LONGEST_BACK_OFF_S,
    STALL_S,
    Client,
    Radio,
    check_server,
    gain_note,
)
from monitor.core.errors import DeviceError
from tests.hardware.iq_servers import HEADER, Clock, Server, closes, silent, stalls, streams

RATE_HZ = 1_000_000
BIAS_TEE = 0x0E


@pytest.fixture
def at():
    """Makes a server and a client on it; both are let go at the end."""
    made = []

    def make(*scripts, clock=time.monotonic_ns):
        server = Server(*scripts)
        client = Client(Radio("127.0.0.1", server.port, RATE_HZ, 19.7, -3), 868_000_000, clock)
        made.extend([client, server])
        return server, client

    yield make
    for one in made:
        one.close()


def until(client, what, seconds=10.0):
    """Read on until what() holds; all that came."""
    end = time.monotonic() + seconds
    came = b""
    while not what():
        assert time.monotonic() < end, client.problem
        came += client.read(0.05)
    return came


def streamed(client, generation=1):
    return until(client, lambda: client.generation >= generation) + until_bytes(client)


def until_bytes(client, n=1000):
    came = b""
    end = time.monotonic() + 10
    while len(came) < n:
        assert time.monotonic() < end, client.problem
        came += client.read(0.05)
    return came


def test_the_receiver_is_set_up_with_a_fixed_gain_and_no_power_on_its_antenna(at):
    server, client = at(streams())
    assert len(streamed(client)) >= 1000
    assert client.problem == ""
    assert "tuner 5, gain 19.7 dB" in client.told
    client.tune(869_000_000)
    until(client, lambda: len(server.commands) >= 7)
    assert server.commands == [
        (2, RATE_HZ), (3, 1), (4, 197), (8, 0), (5, 2**32 - 3), (1, 868_000_000), (1, 869_000_000),
    ]  # fmt: skip
    assert BIAS_TEE not in [code for code, _ in server.commands]


def test_a_sample_cut_in_two_on_the_wire_stays_whole(at):
    def odd(server, link):
        link.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        for part in (HEADER[:5], HEADER[5:] + b"\x01", b"\x02\x03\x04\x05", b"\x06"):
            link.sendall(part)
            server.wait(link, 0.1)
        server.wait(link)

    _, client = at(odd)
    pieces = []
    end = time.monotonic() + 5
    while sum(map(len, pieces)) < 6 and time.monotonic() < end:
        pieces.append(client.read(0.05))
    assert b"".join(pieces) == bytes([1, 2, 3, 4, 5, 6])
    assert all(len(piece) % 2 == 0 for piece in pieces)


def test_a_header_that_never_comes_is_given_up_in_time(at):
    clock = Clock()
    server, client = at(silent, streams(), clock=clock)
    until(client, lambda: "waits for the header" in client.problem)
    clock.ahead(HEADER_S - 1.0)
    client.read(0.05)
    assert client.counters["no_header"] == 0
    clock.ahead(1.1)
    client.read(0.05)
    assert client.counters["no_header"] == 1
    assert "no header" in client.problem
    streamed(client)
    assert server.connections == 2


def test_a_stalled_stream_is_given_up_in_time(at):
    server, client = at(stalls, streams())
    streamed(client)
    end = time.monotonic() + 2 * STALL_S
    heard = time.monotonic()
    while client.counters["stalls"] == 0 and time.monotonic() < end:
        if client.read(0.05):
            heard = time.monotonic()
    assert STALL_S - 0.1 < time.monotonic() - heard < STALL_S + 0.3
    streamed(client, 2)
    assert client.problem == ""


def test_a_closed_stream_is_noticed_at_once_and_opened_again(at):
    server, client = at(closes, streams())
    streamed(client, 2)
    assert client.counters["closed"] == 1
    assert server.connections == 2


def test_a_reset_connection_is_opened_again(at):
    def resets(server, link):
        link.sendall(HEADER)
        link.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))

    _, client = at(resets, streams())
    streamed(client, 2)
    assert client.counters["closed"] == 1


def test_something_else_at_that_port_is_named(at):
    def web(server, link):
        link.sendall(b"HTTP/1.1 400 Bad Request\r\n")
        server.wait(link)

    _, client = at(web, streams())
    until(client, lambda: client.counters["wrong"])
    assert "not a sample server" in client.problem
    streamed(client)


def test_what_waits_after_we_did_not_read_is_never_taken_for_new(at):
    """Source: a server keeps up to 32 s of old samples for a client that does not read."""
    clock = Clock()

    def old(server, link):
        link.sendall(HEADER + bytes([9, 9]) * 1000)
        server.wait(link, 0.3)
        link.sendall(bytes([7, 7]) * (32 * RATE_HZ // 100))

    server, client = at(old, streams(), clock=clock)
    until_bytes(client, 2000)
    time.sleep(0.4)
    clock.ahead(STALL_S + 0.1)
    assert client.read(0.05) == b""
    assert client.counters["stale"] == 1
    came = streamed(client, 2)
    assert bytes([7, 7]) not in came[:200]
    assert server.connections == 2


def test_a_server_that_is_away_is_asked_again_and_again_ever_more_seldom(at):
    clock = Clock()
    server, client = at(streams(), clock=clock)
    server.close()
    waits = []
    for _ in range(7):
        before = client.counters["connect_failures"]
        waited = 0.0
        while client.counters["connect_failures"] == before:
            client.read(0.0)
            clock.ahead(0.05)
            waited += 0.05
            assert waited < 2 * LONGEST_BACK_OFF_S
        waits.append(waited)
    assert waits[1] < 0.5
    assert max(waits) == pytest.approx(LONGEST_BACK_OFF_S, abs=0.3)
    assert "refused" in client.problem


def test_a_gain_between_two_steps_is_told():
    """Source: table of nominal steps in IQ.md: 19.7 and 20.7 dB are neighbours."""
    radio = Radio("127.0.0.1", 1, RATE_HZ, 20.0, 0)
    assert "about 19.7 dB is in force" in gain_note(radio, 5, 29)
    assert gain_note(radio, 5, 28) == "gain 20 dB"
    assert gain_note(radio, 0, 0) == "gain 20 dB"


def test_check_names_what_to_do_about_a_server_that_is_not_there(at):
    server, _ = at(streams())
    check_server("127.0.0.1", server.port, "sensor.host")
    server.close()
    with pytest.raises(DeviceError, match="sensor.host: 127.0.0.1:.*start the receiver's server"):
        check_server("127.0.0.1", server.port, "sensor.host")
    assert CONNECT_S == 5.0
