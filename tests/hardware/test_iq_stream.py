"""The daemon's side: readings through a process of its own, which may die or hang at any time."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time

import pytest

from hardware import declared, open_front_end, settings_for
from hardware.iq_stream import SILENT_S
from monitor.core.errors import ConfigError
from monitor.core.flags import Flag
from monitor.core.readings import empty_batch, joined
from monitor.listening import long_enough
from tests.hardware.iq_servers import Clock, Server, closes, streams, tone

BANDS = [[868.0e6, 868.2e6], [868.4e6, 868.6e6]]
OPTIONS = {"host": "127.0.0.1", "rate_hz": 1e6, "gain_db": 19.7, "bands": BANDS}


def heard(offset_hz, amplitude):
    return lambda centre, rate, first, n: tone(n, rate, offset_hz, amplitude, first)


@pytest.fixture
def at(tmp_path):
    made = []

    def make(*scripts, clock=time.monotonic_ns, simulated=False, **options):
        server = Server(*scripts)
        settings = settings_for("iq_stream", OPTIONS | {"port": server.port} | options, tmp_path)
        front = open_front_end(settings, 2, clock, time.time_ns, simulated)
        made.extend([front, server])
        return server, front

    yield make
    for one in made:
        one.close()


def until(front, what, seconds=20.0):
    """Read on until what() holds: all that came, as one batch."""
    end = time.monotonic() + seconds
    batches = [empty_batch(2, 0)]
    while not what():
        assert time.monotonic() < end, front.status()
        batches.append(front.read(0.2))
        assert batches[-1].now_ns >= batches[-2].now_ns
    return joined(batches)


def running(pid):
    """Whether the process is there and not merely waiting to be counted out."""
    try:
        with open(f"/proc/{pid}/stat", encoding="ascii") as file:
            return file.read().rpartition(")")[2].split()[0] != "Z"
    except FileNotFoundError:
        return False


def boot_ns():
    return time.clock_gettime_ns(time.CLOCK_BOOTTIME)


def child_of(front):
    return front._worker.pid  # noqa: SLF001 - no other way to be rude to it


def test_readings_come_through_with_their_times_and_marks(at):
    """Source: amplitude 0.25 is -12.04 dBFS, by hand; the centre lies between the bands."""
    _, front = at(streams(make=heard(150e3, 0.25)), clock=boot_ns, simulated=True)
    assert not front.status().connected
    batch = until(front, lambda: front.status().counters.get("readings", 0) >= 5)
    assert batch.n >= 4
    assert (abs(batch.counts[:, 1] + 12_041) < 100).all()
    assert (batch.counts[:, 0] < -40_000).all()
    assert set(batch.flags.tolist()) == {int(Flag.SIMULATED)}
    assert abs(batch.now_ns - boot_ns()) < 1e9
    status = front.status()
    assert status.connected
    assert "gain 19.7 dB" in status.text
    assert status.counters["lost_samples"] == 0
    assert not front.owns_clock


def test_a_loss_is_told_in_the_text_that_events_are_made_of(at):
    _, front = at(streams(), clock=boot_ns)
    assert "lost" not in front.status().text
    front._counted({"lost_samples": 600_000})  # noqa: SLF001 - a true one takes twelve seconds
    front._worker.problem = ""  # noqa: SLF001
    assert "600000 samples lost so far" in front.status().text


def test_clipping_is_flagged(at):
    _, front = at(streams(make=heard(150e3, 1.0)), clock=boot_ns)
    batch = until(front, lambda: front.status().counters.get("readings", 0) >= 2)
    assert (batch.flags == int(Flag.CLIPPED)).all()


def test_a_process_that_dies_is_started_anew(at):
    _, front = at(streams(), clock=boot_ns)
    until(front, lambda: front.status().connected)
    os.kill(child_of(front), signal.SIGKILL)
    until(front, lambda: not front.status().connected, 2.0)
    assert "ended with -9; trying again" in front.status().text
    counted = front.status().counters
    assert counted["connected"] == 1
    until(front, lambda: front.status().connected)
    counters = front.status().counters
    assert (counters["worker_starts"], counters["worker_ended"]) == (2, 1)
    assert counters["connected"] == 2  # what the first process counted is not forgotten
    assert counters["samples"] > counted["samples"] > 0


def test_a_process_that_hangs_is_noticed_in_time_and_started_anew(at):
    _, front = at(streams(), clock=boot_ns)
    until(front, lambda: front.status().connected)
    pid = child_of(front)
    os.kill(pid, signal.SIGSTOP)
    stopped = time.monotonic()
    until(front, lambda: not front.status().connected)
    assert SILENT_S - 1.0 < time.monotonic() - stopped < SILENT_S + 1.0
    assert not running(pid)
    until(front, lambda: front.status().connected)
    assert front.status().counters["worker_silent"] == 1


def test_a_stream_that_closes_is_told_and_comes_back(at):
    server, front = at(closes, streams(), clock=boot_ns)
    until(front, lambda: front.status().connected)
    assert server.connections == 2
    assert front.status().counters["closed"] == 1


def test_a_server_that_is_away_is_named_and_time_goes_on(at):
    server, front = at(streams(), clock=boot_ns)
    server.close()
    until(front, lambda: "refused" in front.status().text)
    first = front.read(0.2).now_ns
    until(front, lambda: front.read(0.2).now_ns > first + 0.4e9, 3.0)
    assert not front.status().connected


def test_close_ends_the_process(at):
    _, front = at(streams(), clock=boot_ns)
    until(front, lambda: front.status().connected)
    pid = child_of(front)
    front.close()
    assert not running(pid)
    assert front.read(0.0).n == 0


def test_the_process_ends_when_whoever_started_it_is_killed(tmp_path):
    options = OPTIONS | {"port": 1}
    program = (
        "import hardware, time, pathlib\n"
        f"s = hardware.settings_for('iq_stream', {options!r}, pathlib.Path('.'))\n"
        "f = hardware.open_front_end(s, 2, time.monotonic_ns, time.time_ns, False)\n"
        "while not f.status().counters.get('connect_failures'): f.read(0.2)\n"
        "print(f._worker.pid, flush=True)\n"
        "while True: f.read(1.0)\n"
    )
    parent = subprocess.Popen([sys.executable, "-c", program], stdout=subprocess.PIPE)
    pid = int(parent.stdout.readline())
    assert running(pid)
    parent.kill()
    parent.communicate()
    end = time.monotonic() + 5
    while running(pid):
        assert time.monotonic() < end
        time.sleep(0.05)


def test_no_sample_comes_over_the_pipe(at):
    """Ten million bytes of samples; what is said about them is a hundredth of that."""
    _, front = at(streams(make=heard(150e3, 0.25)), clock=boot_ns)
    until(front, lambda: front.status().connected)
    worker = front._worker  # noqa: SLF001
    before, samples, said = front.status().counters["samples"], 0, 0
    while samples < 5_000_000:
        lines = worker.lines(0.5)
        said += sum(map(len, lines))
        told = [one["counters"] for one in map(json.loads, lines) if "counters" in one]
        samples = max([samples, *(counters["samples"] - before for counters in told)])
    assert 0 < said < 100_000


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"rate_hz": 500_000}, "sensor.rate_hz: 500000 is refused by receivers; a whole number"),
        ({"rate_hz": 3_300_000}, "225001 to 300000 or 900001 to 3200000"),
        ({"rate_hz": 1e6 + 0.5}, "sensor.rate_hz"),
        ({"gain_db": "auto"}, "sensor.gain_db: automatic gain is refused"),
        ({"automatic_gain": True}, "1.9 dB within one second"),
        ({"gain_db": 19.75}, "finer than a tenth"),
        ({"host": " "}, "sensor.host"),
        ({"host": "mast..lan"}, "sensor.host: 'mast..lan' is no name of a machine"),
        ({"host": "m" * 64}, "is no name of a machine"),  # RFC 1035, 2.3.4: a label has 63
        ({"port": 0}, "sensor.port"),
        ({"ppm": 0.5}, "sensor.ppm"),
        ({"centre_hz": 868.0e6}, "sensor.centre_hz: band 868.4 to 868.6 MHz is outside the span"),
        ({"bands": [[2, 1]]}, "sensor.bands"),
        ({"bands": [[868e6, 868e6 + 10]]}, "sensor.fft: round"),
        ({"bands": [[1e6, 5e9]]}, "below 4.29 GHz"),
        ({"fft": 1001}, "sensor.fft: 1001 is odd"),
        ({"interval_s": 1e-4}, "sensor.interval_s"),
        ({"settle_s": 0.01}, "sensor.settle_s"),
        ({"bias_tee": True}, "sensor.bias_tee: unknown key"),
    ],
)
def test_wrong_options_are_one_line(tmp_path, options, words):
    with pytest.raises(ConfigError) as caught:
        settings_for("iq_stream", OPTIONS | options, tmp_path)
    assert words in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_check_listens_until_the_first_reading_of_places_in_turn(at, tmp_path):
    """Source: by hand; a start of 2 s, eight buffers of 131 072 samples at 1 MS/s, settling, and
    a round of two places."""
    far = {"bands": [BANDS[0], [900e6, 900.2e6]], "dwell_s": 0.5, "settle_s": 0.3}
    _, front = at(streams(), **far)
    settings = settings_for("iq_stream", OPTIONS | far, tmp_path)
    expected = 2.0 + 8 * 0.131072 + 0.3 + 2 * (0.3 + 2 * 0.5)
    assert settings.first_s == pytest.approx(expected, abs=0.01)
    assert long_enough(settings) == 6.0
    assert long_enough(object()) == 3.0
    end = time.monotonic() + long_enough(settings)
    assert until(front, lambda: time.monotonic() > end, 30.0).times_ns.size


def test_what_a_reading_averages_is_declared(tmp_path):
    near = settings_for("iq_stream", OPTIONS, tmp_path)
    assert (near.averaging.kind, near.averaging.sparse) == ("power", False)
    assert near.averaging.seconds == near.round_s == 195 * 1024 / 1e6 / 2  # whole half segments
    far = {"bands": [BANDS[0], [900e6, 901e6]], "dwell_s": 0.5, "settle_s": 0.3}
    swept = settings_for("iq_stream", OPTIONS | far, tmp_path)
    assert swept.scheme.swept
    assert swept.averaging.sparse
    assert swept.averaging.seconds == pytest.approx(0.5, abs=256e-6)
    assert declared("iq_stream", OPTIONS | far) == swept.averaging
    assert swept.round_s == pytest.approx(len(swept.scheme.tunes) * 1.3, abs=0.01)
    assert swept.bands_hz == ((868.0e6, 868.2e6), (900e6, 901e6))


def test_the_first_word_may_take_longer_than_the_later_ones(at):
    clock = Clock()
    server, front = at(streams(), clock=clock)
    front.read(0.0)
    clock.ahead(SILENT_S + 2.0)
    front.read(0.0)
    assert front.status().counters["worker_silent"] == 0
    clock.ahead(30.0)
    front.read(0.0)
    assert front.status().counters["worker_silent"] == 1
