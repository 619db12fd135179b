"""The receiver's server on the wire: bytes as the open protocol has them, and each fault.

Protocol facts: 12-byte header "RTL0", tuner type, number of gain steps, big-endian; five-byte
commands, code and 32-bit parameter, big-endian; samples are interleaved unsigned bytes; one client
at a time; what is refused or unknown is passed over without a word. Source: osmocom rtl-sdr 2.0.2.
"""

from __future__ import annotations

import os
import socket
import time
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from simulators.__main__ import main
from tests.simulators.radio import PATIENCE_S, Radio, radio

HEADER = bytes.fromhex("52544c30 00000005 0000001d")
RATE = 1_024_000


@pytest.fixture(scope="module")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Radio]:
    with radio(tmp_path_factory.mktemp("radio")) as found:
        yield found


@pytest.fixture(autouse=True)
def _freed(served: Radio) -> Iterator[None]:
    yield
    served.fault("free")


def _until(served: Radio, key: str, value: object) -> dict[str, object]:
    end_s = time.monotonic() + PATIENCE_S
    while (state := served.state()).get(key) != value:
        assert time.monotonic() < end_s, f"{key} never became {value}"
        time.sleep(0.01)
    return state


def _until_told(served: Radio, code: int, value: int) -> dict[str, object]:
    end_s = time.monotonic() + PATIENCE_S
    while (state := served.state())["commands"][-1:] != [[code, value]]:
        assert time.monotonic() < end_s, f"{code} {value} never came"
        time.sleep(0.01)
    return state


def test_the_header_is_twelve_bytes_then_samples_as_the_server_says_it_sent_them(served) -> None:
    with served.client() as client:
        data = client.read(12 + 1_000_000)
        served.state()  # brings its file up to date
        sent = served.sent.read_bytes()
    assert data[:12] == HEADER
    assert data[12:] == sent[:1_000_000]
    assert len(set(data[12:])) > 2


def test_commands_take_effect_in_any_order_and_while_samples_flow(served) -> None:
    with served.client() as client:
        client.read(100_000)
        for code, value in ((4, 207), (3, 1), (1, 466_000_000), (5, -3), (2, RATE)):
            client.tell(code, value)
        state = _until(served, "rate_hz", RATE)
        assert client.read(100_000)
    assert state["manual"] is True
    assert state["gain_db"] == 20.7
    assert state["centre_hz"] == 466_000_000
    assert [1, 466_000_000] in state["commands"]
    assert [5, 2**32 - 3] in state["commands"]
    # 28.8 MHz * 2^22 / ratio, ratio in steps of 4: never 0.14 Hz off at 2.048 MS/s; +2 and +3 ppm
    assert abs(state["real_rate_hz"] - RATE * (1 + 5e-6)) < 0.14


@pytest.mark.parametrize(
    ("key", "code", "good", "refused"),
    [
        ("rate_hz", 2, 250_000, (225_000, 300_001, 900_000, 3_200_001, 0)),
        ("rate_hz", 2, 2_400_000, (225_000, 300_001, 900_000, 3_200_001, 0)),
        ("centre_hz", 1, 806_000_000, (23_000_000, 1_767_000_000, 0)),
        ("gain_db", 13, 11, (29, 2**32 - 1)),
    ],
)
def test_what_is_refused_leaves_the_old_setting_without_a_word(
    served, key, code, good, refused
) -> None:
    with served.client() as client:
        client.tell(3, 1)
        client.tell(code, good)
        for value in refused:
            client.tell(code, value)
        client.tell(0x7F, good)  # of no meaning, and the last to come
        state = _until_told(served, 0x7F, good)
        assert len(client.read(12 + 65_536)) == 12 + 65_536
    assert state[key] == (19.7 if key == "gain_db" else good)


def test_a_command_in_pieces_is_one_command(served) -> None:
    with served.client() as client:
        for byte in b"\x01" + (433_920_000).to_bytes(4, "big"):
            client.link.sendall(bytes([byte]))
            time.sleep(0.01)
        assert _until(served, "centre_hz", 433_920_000)["connected"] is True


def test_the_counter_runs_without_a_gap_where_nothing_is_lost(served) -> None:
    with served.client() as client:
        client.tell(7, 1)
        data = np.frombuffer(client.read(12 + 1_500_000)[-500_000:], np.uint8)
        client.tell(7, 0)
        assert client.read(10)
    assert set(np.diff(data.astype(np.int64)) % 256) == {1}


def test_a_second_client_connects_and_hears_nothing_until_the_first_has_gone(served) -> None:
    with served.client() as first:
        assert first.read(12) == HEADER
        with served.client() as second:
            assert second.read(12, 0.7) == b""
            first.link.close()
            assert second.read(12) == HEADER


@pytest.mark.parametrize("rate_hz", [1_024_000, 2_400_000])
def test_samples_come_in_real_time(served, rate_hz) -> None:
    with served.client() as client:
        client.tell(2, rate_hz)
        _until(served, "rate_hz", rate_hz)
        client.read(1_000_000)
        start_s = time.monotonic()
        n = client.listen(2.0)
        took_s = time.monotonic() - start_s
    # a transfer more or less, and half of one for a machine that is busy
    assert n == pytest.approx(2 * rate_hz * took_s, abs=1.5 * 262_144)


@pytest.mark.parametrize(("rate_hz", "frequency_hz"), [(2_400_000, 806e6), (3_200_000, 1421e6)])
def test_real_time_leaves_more_than_half_of_a_core(served, rate_hz, frequency_hz) -> None:
    def used_s() -> float:
        words = Path(f"/proc/{served.process.pid}/stat").read_text().rsplit(")", 1)[1].split()
        return sum(int(word) for word in words[11:13]) / os.sysconf("SC_CLK_TCK")

    with served.client() as client:
        for code, value in ((2, rate_hz), (1, int(frequency_hz)), (3, 1), (4, 207)):
            client.tell(code, value)
        client.read(2_000_000)
        before_s, start_s = used_s(), time.monotonic()
        n = client.listen(3.0)
        took_s, cpu_s = time.monotonic() - start_s, used_s() - before_s
    assert n == pytest.approx(2 * rate_hz * took_s, rel=0.1)
    assert cpu_s < 0.5 * took_s


def test_lost_samples_are_missing_by_their_number(served) -> None:
    with served.client() as client:
        client.tell(7, 1)
        client.read(1_500_000)
        served.fault("lose", 1001)
        data = np.frombuffer(client.read(4_000_000), np.uint8).astype(np.int64)
        state = served.state()
        client.tell(7, 0)
        client.read(10)
    steps = np.diff(data) % 256
    assert state["lost_samples"] == 1001
    # two bytes to a sample: the counter jumps once, by 2 * 1001 and the usual 1
    assert list(steps[steps != 1]) == [(2 * 1001 + 1) % 256]


def test_a_stall_is_followed_by_the_stale_samples_at_once(served) -> None:
    with served.client() as client:
        client.tell(2, RATE)
        client.tell(7, 1)
        client.read(1_500_000)
        served.fault("stall", 3)
        early = client.listen(2.0)
        start_s = time.monotonic()
        late = np.frombuffer(client.read(2 * 2 * RATE), np.uint8).astype(np.int64)
        took_s = time.monotonic() - start_s
        client.tell(7, 0)
        assert served.state()["lost_samples"] == 0
        client.read(10)
    assert early < 2 * RATE  # what was under way, less than half of what was made
    assert late.size == 2 * 2 * RATE  # two seconds' worth
    assert took_s < 2.5  # one of standing still, and two if nothing had waited
    assert set(np.diff(late) % 256) == {1}


def test_a_halted_receiver_makes_nothing_meanwhile(served) -> None:
    with served.client() as client:
        client.tell(2, RATE)
        client.read(500_000)
        served.fault("halt", 1)
        client.listen(2.0)
        lost = served.state()["lost_samples"]
    assert lost == pytest.approx(RATE, rel=0.2)


def test_a_slow_network_lets_through_what_it_was_told(served) -> None:
    with served.client() as client:
        client.read(400_000)
        served.fault("slow", 200000)
        client.listen(0.5)
        assert client.listen(2.0) == pytest.approx(400_000, rel=0.15)


def test_a_fault_by_the_command_that_people_use(served, capsys) -> None:
    words = ["fault", "--control", str(served.control)]
    with served.client() as client:
        assert client.read(12) == HEADER
        assert main([*words, "lose", "--count", "500"]) == 0
        client.read(600_000)
        assert served.state()["lost_samples"] == 500
    assert main([*words, "drop"]) == 2  # the board's, not the receiver's
    assert "no fault 'drop'" in capsys.readouterr().out


def test_a_closed_connection_can_be_opened_again(served) -> None:
    with served.client() as client:
        client.read(100_000)
        served.fault("shut")
        start_s = time.monotonic()
        client.read(2**30)
        assert time.monotonic() - start_s < 2.0
    with served.client() as client:
        assert client.read(12) == HEADER


def test_a_header_that_never_comes_and_one_that_is_wrong(served) -> None:
    served.fault("mute")
    served.fault("mislabel")
    with served.client() as client:
        assert client.read(1, 1.0) == b""
    with served.client() as client:
        assert client.read(12) == b"XTL0" + HEADER[4:]
    with served.client() as client:
        assert client.read(12) == HEADER


def _refused(served: Radio) -> bool:
    try:
        socket.create_connection(served.address, 1.0).close()
    except ConnectionRefusedError:
        time.sleep(0.05)
        return True
    return False


def test_an_absent_server_refuses_and_comes_back_on_its_port(served) -> None:
    served.fault("absent", 1)
    time.sleep(0.3)
    assert _refused(served)
    end_s = time.monotonic() + PATIENCE_S
    while _refused(served):
        assert time.monotonic() < end_s
    with served.client() as client:
        assert client.read(12) == HEADER


@pytest.mark.parametrize(
    ("options", "word"),
    [
        (["--air", "moon"], "moon"),
        (["--seed", "-1"], "seed"),
        (["--fault", "3:drop"], "drop"),
        (["--fault", "3:slow"], "bytes a second"),
    ],
)
def test_wrong_input_is_one_line_and_code_2(capsys, options, word) -> None:
    assert main(["iq", "--port", "0", *options]) == 2
    found = capsys.readouterr()
    assert word in found.err
    assert found.err.count("\n") == 1


def test_a_port_that_is_taken_is_code_3(served, capsys) -> None:
    assert main(["iq", "--port", str(served.address[1])]) == 3
    assert capsys.readouterr().err.count("\n") == 1
