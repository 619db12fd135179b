"""The bridge as a process of its own, before a stand-in for the binding and before the real one."""

from __future__ import annotations

import ast
import os
import re
import shutil
import socket
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from hardware.iq_client import Client, Radio, command
from hardware.iq_plan import fixed_tune
from hardware.iq_receiver import Receiver, Scheme
from hardware.soapy_bridge import Format, LostError, RefusedError
from monitor.core.spectrum import clipped_components, samples_from_bytes

BRIDGE = Path("hardware/soapy_bridge.py").resolve()
STAND_IN = Path(__file__).parent / "stand_in"
RATE_HZ = 1_000_000
CENTRE_HZ = 868_800_000
SYSTEM = "/usr/bin/python3"


class Bridge:
    """A bridge at work; said() is what it wrote so far."""

    def __init__(self, folder, words, *options):
        self.log = folder / "calls"
        self.out = folder / "said"
        device = f"driver=stand-in,log={self.log},{words}"
        with self.out.open("w") as out:
            self.process = subprocess.Popen(
                [sys.executable, BRIDGE, "--port", "0", "--device", device, *options],
                env=os.environ | {"PYTHONPATH": str(STAND_IN)},
                stderr=out,
            )

    def said(self, pattern, within_s=10.0):
        until = time.monotonic() + within_s
        while not (found := re.search(pattern, self.out.read_text())):
            assert time.monotonic() < until, self.out.read_text()
            time.sleep(0.02)
        return found

    @property
    def port(self):
        return int(self.said(r"listens at 127\.0\.0\.1:(\d+)").group(1))

    def calls(self):
        return self.log.read_text().splitlines()


@pytest.fixture
def bridge(tmp_path):
    made = []

    def start(words, *options):
        made.append(Bridge(tmp_path, words, *options))
        return made[-1]

    yield start
    for one in made:
        one.process.terminate()
        one.process.wait(10)


def settings(gain_mode=1, gain=197, ppm=0):
    pairs = ((2, RATE_HZ), (3, gain_mode), (4, gain), (8, 0), (5, ppm), (1, CENTRE_HZ))
    return b"".join(command(code, value) for code, value in pairs)


def everything(port, said):
    """What comes after the header, until the other side closes."""
    got = bytearray()
    with socket.create_connection(("127.0.0.1", port), 5) as link:
        link.settimeout(5)
        link.sendall(said)
        while True:
            try:
                piece = link.recv(1 << 16)
            except ConnectionResetError:
                break
            if not piece:
                break
            got += piece
    assert got[:12] == b"RTL0" + bytes(8)
    return bytes(got[12:])


def read_tone(port, seconds=20.0):
    """The first reading that the front end's own receiver makes of the tone, dBFS, and clipped."""
    half = 60e3
    band = [(CENTRE_HZ + 100e3 - half, CENTRE_HZ + 100e3 + half)]
    scheme = Scheme(1, fixed_tune(band, CENTRE_HZ, 0.8 * RATE_HZ), 1024, 0.1, 0.2, 0.25)
    radio = Radio("127.0.0.1", port, RATE_HZ, 19.7, -3)
    receiver = Receiver(radio, scheme, time.monotonic_ns, seed=1)
    until = time.monotonic() + seconds
    try:
        while time.monotonic() < until:
            for reading in receiver.work(0.1):
                return reading.counts[0] / 1000.0, reading.clipped
    finally:
        receiver.close()
    raise AssertionError(receiver.problem)


@pytest.mark.parametrize(
    ("words", "dbfs"),
    [
        ("format=CS16,full_scale=2048", -6.02),
        ("format=CS8,full_scale=128", -5.987),  # code for code: 127.5 instead of 128
        ("format=CF32,full_scale=1.0", -6.02),
        ("format=CU8,full_scale=127.5", -6.02),
    ],
)
def test_the_front_end_reads_a_tone_of_half_scale(bridge, words, dbfs):
    """|z| = 0.5 is -6.02 dBFS in every format; the receiver is the one of iq_stream, unchanged."""
    one = bridge(f"{words},amplitude=0.5")
    level, clipped = read_tone(one.port)
    assert level == pytest.approx(dbfs, abs=0.02)
    assert clipped == 0
    said = {"rate 1000000.0", "gain_mode False", "gain 19.7", "ppm -3.0", f"centre {CENTRE_HZ}.0"}
    assert said <= set(one.calls())
    assert one.calls().index("activate") > max(one.calls().index(each) for each in said)


def test_options_take_the_place_of_what_the_binding_does_not_tell(bridge):
    """Some builds of the binding cannot return the full scale (python3-soapysdr 0.8.1-3)."""
    mute = bridge("untold=1,full_scale=2048")
    mute.said("cannot tell the device's full scale; give --format .*CS16.*--full-scale")
    assert mute.process.wait(10) == 3
    options = ("--format", "CS16", "--full-scale", "2048", "--antenna", "LOW")
    told = bridge("untold=1,full_scale=2048,amplitude=0.05", *options, "--digital-gain-db", "20")
    level, _ = read_tone(told.port)
    assert level == pytest.approx(-6.02, abs=0.02)
    assert "antenna LOW" in told.calls()


def test_lost_samples_close_the_connection_and_the_next_client_is_served(bridge):
    """What came before the loss is whole; nothing of what comes after is passed on."""
    one = bridge("format=CS16,full_scale=2048,ends_at=50000,ends_with=-4")
    for _ in range(2):
        assert len(everything(one.port, settings())) == 2 * 50_000
    one.said("closed: overflow, samples are lost\n(.|\n)*closed: overflow")
    assert one.calls()[-2:] == ["deactivate", "close"]
    assert one.process.poll() is None


def test_the_client_counts_it_and_comes_back(bridge):
    one = bridge("format=CS16,full_scale=2048,ends_at=50000,ends_with=-4")
    client = Client(Radio("127.0.0.1", one.port, RATE_HZ, 19.7, 0), CENTRE_HZ, time.monotonic_ns)
    until = time.monotonic() + 10
    while client.counters["connected"] < 2 and time.monotonic() < until:
        client.read(0.1)
    client.close()
    assert (client.counters["connected"], client.counters["closed"]) == (2, 1)


@pytest.mark.parametrize(
    ("words", "said", "reason"),
    [
        ("", settings(gain_mode=0), "automatic gain"),
        ("", settings() + command(8, 1), "automatic gain"),
        ("automatic=1", settings(), "stays at automatic gain"),
        ("gain_off=2", settings(), "gain 19.7 dB: the device takes 21.7"),
        ("rate_off=200", settings(), "rate 1000000 samples/s: the device takes 1000200"),
        ("centre_off=5000", settings(), "centre 868800000 Hz: the device takes 868805000"),
        ("refuses=centre", settings(), "command 1, 868800000: centre out of range"),
        ("no_ppm=1", settings(ppm=5), "takes no frequency correction"),
    ],
)
def test_what_the_device_does_not_do_as_told_closes_the_connection(bridge, words, said, reason):
    one = bridge(f"format=CS16,full_scale=2048,{words}".rstrip(","))
    assert everything(one.port, said) == b""
    one.said(f"connection closed: .*{reason}")
    assert one.process.poll() is None


@pytest.mark.parametrize(
    ("words", "reason"),
    [
        ("ends_at=20000,ends_with=-2", "stream error"),
        ("ends_at=20000,ends_with=-1", "no sample for 2 s"),
        ("activates_with=-5", "does not begin to receive .not supported"),
    ],
)
def test_a_device_that_fails_ends_the_bridge(bridge, words, reason):
    """Whoever started it starts it again, and the device is opened anew."""
    one = bridge(f"format=CS16,full_scale=2048,{words}")
    everything(one.port, settings())
    assert one.process.wait(10) == 3
    assert one.said(reason)


def test_no_sample_before_the_settings_and_none_for_a_second_client(bridge):
    one = bridge("format=CS16,full_scale=2048")
    with socket.create_connection(("127.0.0.1", one.port), 5) as first:
        assert len(first.recv(4096)) == 12
        first.settimeout(0.3)
        with pytest.raises(TimeoutError):
            first.recv(1)
        with socket.create_connection(("127.0.0.1", one.port), 5) as second:
            second.settimeout(0.3)
            with pytest.raises(TimeoutError):
                second.recv(1)


def test_a_client_that_does_not_read_is_sent_away(bridge):
    one = bridge("format=CS16,full_scale=2048")
    with socket.create_connection(("127.0.0.1", one.port), 5) as link:
        link.setsockopt(socket.SOL_SOCKET, socket.SO_RCVBUF, 1 << 16)
        link.sendall(settings())
        one.said("reads nothing for 2 s", within_s=30)
    assert "close" in one.calls()


def test_every_rail_of_a_converter_is_a_rail_of_the_wire():
    for form, rails in (
        (Format("CS16", 2048.0), np.array([-2048, 2047], "i2")),
        (Format("CS16", 2047.0), np.array([-2047, 2047], "i2")),
        (Format("CS16", 32768.0), np.array([-32768, 32767], "i2")),
        (Format("CS8", 128.0), np.array([-128, 127], "i1")),
        (Format("CF32", 1.0), np.array([-1.0, 127 / 128], "f4")),
        (Format("CS16", 2048.0, -20.0), np.array([-2048, 2047], "i2")),
    ):
        assert clipped_components(form.cu8(rails), "cu8") == (2, 2), form
        below = (rails * 0.9).astype(rails.dtype)
        assert clipped_components(form.cu8(below), "cu8") == (0, 2), form
    beyond = Format("CF32", 1.0).cu8(np.array([-9.0, 9.0, -1e30], "f4"))
    assert beyond == bytes([0, 255, 0])


def test_sixteen_bits_are_rounded_to_the_nearest_of_eight():
    codes = np.arange(-2047, 2047, dtype="i2")
    values = samples_from_bytes(Format("CS16", 2048.0).cu8(codes), "cu8").view("f4")
    assert np.abs(values - codes / 2048.0).max() <= 0.5 / 127.5 + 1e-6


@pytest.mark.parametrize(
    ("name", "full", "gain", "says"),
    [("CS8", 128.0, 6.0, "no digital gain"), ("CS8", 64.0, 0.0, "full scale"),
     ("CF32", 0.0, 0.0, "above 0"), ("CF32", 1.0, 200.0, "below 100")],
)  # fmt: skip
def test_what_cannot_be_scaled_is_refused(name, full, gain, says):
    with pytest.raises(LostError, match=says):
        Format(name, full, gain)


def test_values_that_are_not_numbers_are_no_silence():
    with pytest.raises(RefusedError, match="not numbers"):
        Format("CF32", 1.0).cu8(np.array([0.0, np.nan], "f4"))


@pytest.fixture
def real_binding():
    """The system's Python, where it has the binding; asked in a process of its own."""
    found = shutil.which(SYSTEM) and subprocess.run(
        [SYSTEM, "-c", "import SoapySDR, numpy"], env={}, capture_output=True
    )
    if not found or found.returncode:
        pytest.skip(f"{SYSTEM} has no SoapySDR binding (python3-soapysdr): not tested with it")
    return SYSTEM


@pytest.mark.parametrize(
    ("device", "says"),
    [("driver=null", "has 0 receiving channels"), ("driver=nosuch", "no match")],
)
def test_the_real_binding_without_a_receiver(real_binding, device, says):
    """One line and exit 3; a channel to receive with takes a real receiver."""
    run = subprocess.run(
        [real_binding, BRIDGE, "--device", device], env={}, capture_output=True, text=True
    )
    assert run.returncode == 3
    assert run.stderr.count("\n") == 1
    assert says in run.stderr


def test_the_stand_in_has_no_call_that_the_real_binding_lacks(real_binding):
    tree = ast.parse((STAND_IN / "SoapySDR.py").read_text(encoding="utf-8"))
    calls = {d.name for d in ast.walk(tree) if isinstance(d, ast.FunctionDef) and d.name[0] != "_"}
    ask = "import SoapySDR, sys; print(*(hasattr(SoapySDR.Device, n) for n in sys.argv[1:]))"
    run = [real_binding, "-c", ask, *calls]
    assert len(calls) > 15
    assert set(subprocess.check_output(run, env={}, text=True).split()) == {"True"}
