"""The detector board's front end over a real pseudo-terminal: faults, hang, unplug, return."""

from __future__ import annotations

import threading
import time

import numpy as np
import pytest

from hardware import open_front_end, settings_for
from monitor.core.flags import Flag
from monitor.core.readings import MISSING
from tests.hardware.boards import board, counters, greet, until


@pytest.fixture
def front_end(bench, fast_ns):
    opened = board(bench.path, fast_ns)
    yield opened
    opened.close()


def test_readings_come_with_counts_flags_and_status(bench, front_end, banner):
    greet(bench, front_end, banner)
    bench.send("FS1 0 100 3 1834,-,2011 -45 4987")
    batches = until(front_end, lambda: counters(front_end)["frames"] == 1)
    batch = batches[-1]
    assert batch.counts.tolist() == [[1834, MISSING, 2011]]
    assert batch.counts.dtype == np.int32
    assert batch.times_ns.dtype == np.int64
    assert batch.flags.tolist() == [0]
    assert batch.temperature_dc.tolist() == [-45]
    assert batch.now_ns >= batch.times_ns[-1]
    status = front_end.status()
    assert status.connected
    assert not status.ended
    assert (status.temperature_c, status.supply_v) == (-4.5, 4.987)
    assert "bench-board" in status.text
    assert front_end.clock_fix is None
    assert not front_end.owns_clock


def test_read_returns_at_once_with_data_and_waits_no_longer_than_told(bench, banner):
    front_end = board(bench.path)
    greet(bench, front_end, banner)
    bench.send("FS1 0 100 3 1,2,3 - -", "FS1 1 200 3 1,2,3 - -")
    begun = time.monotonic()
    assert front_end.read(30.0).n == 2
    assert time.monotonic() - begun < 1.0
    begun = time.monotonic()
    assert front_end.read(0.05).n == 0
    assert 0.04 < time.monotonic() - begun < 1.0
    front_end.close()


def test_each_reading_has_its_frames_temperature(bench, banner):
    front_end = board(bench.path)
    greet(bench, front_end, banner)
    bench.send("FS1 0 300 3 1,1,1;2,2,2 -45 -", "FS1 1 600 3 3,3,3;4,4,4 - -")
    bench.send("FS1 2 900 3 5,5,5;6,6,6;7,7,7 -44 -")
    batches = until(front_end, lambda: counters(front_end)["samples"] == 7)
    told = np.concatenate([b.temperature_dc for b in batches])
    assert told.dtype == np.int32
    assert told.tolist() == [-45, -45, MISSING, MISSING, -44, -44, -44]
    front_end.close()


def test_samples_of_a_frame_are_evenly_spaced(bench, banner):
    front_end = board(bench.path)
    greet(bench, front_end, banner)
    bench.send("FS1 0 300 3 1,1,1;2,2,2 - -", "FS1 1 600 3 3,3,3;4,4,4;5,5,5 - -")
    batches = until(front_end, lambda: counters(front_end)["samples"] == 5)
    times = np.concatenate([b.times_ns for b in batches])
    values = np.concatenate([b.counts for b in batches])[:, 0]
    assert values.tolist() == [1, 2, 3, 4, 5]
    assert np.abs(np.diff(times) - 100_000_000).max() < 2_000_000
    front_end.close()


def test_garbage_does_not_stop_the_frames(bench, front_end, banner):
    greet(bench, front_end, banner)
    bench.send(b"\x00\xffzz\n", b"<FS1 0 1", "FS1 0 100 3 1,2,3 - -", "FS1 2 300 3 1,2,3 - -")
    bench.send(b"<FS1 3 400 3 1,2,3 - -*0000>\n")
    until(front_end, lambda: counters(front_end)["bad_checksum"] == 1)
    assert counters(front_end) | {"frames": 2, "lost": 1, "garbage": 1, "partial": 1} == counters(
        front_end
    )


def test_a_hang_is_seen_asked_about_and_ends_with_the_next_frame(bench, front_end, banner):
    greet(bench, front_end, banner)
    bench.send("FS1 0 100 3 1,2,3 - -")
    until(front_end, lambda: counters(front_end)["frames"] == 1)
    until(front_end, lambda: not front_end.status().connected)
    assert "no new frame came for" in front_end.status().text
    assert counters(front_end)["hangs"] == 1
    assert b"?\n" in bench.heard()
    bench.send("FS1 1 200 3 1,2,3 - -")
    until(front_end, lambda: front_end.status().connected)
    assert counters(front_end)["hangs"] == 1
    assert counters(front_end)["lost"] == 0


def test_a_board_that_only_repeats_itself_counts_as_hung(bench, front_end, banner):
    greet(bench, front_end, banner)
    bench.send("FS1 0 100 3 1,2,3 - -")
    until(front_end, lambda: counters(front_end)["frames"] == 1)

    def hung():
        bench.send("FS1 0 100 3 1,2,3 - -")
        return not front_end.status().connected

    batches = until(front_end, hung)
    assert sum(b.n for b in batches) == 0
    assert counters(front_end)["repeated"] > 1
    assert "no new frame" in front_end.status().text


def test_a_long_hang_opens_the_port_anew(bench, front_end, banner):
    greet(bench, front_end, banner)
    bench.send("FS1 0 100 3 1,2,3 - -")
    until(front_end, lambda: counters(front_end)["reopened"] == 1)
    bench.heard()
    bench.send(banner, "FS1 1 200 3 1,2,3 - -")
    until(front_end, lambda: front_end.status().connected)
    assert counters(front_end)["vanished"] == 0


def test_unplugged_and_back(bench, front_end, banner):
    greet(bench, front_end, banner)
    bench.send("FS1 5 600 3 1,2,3 - -")
    until(front_end, lambda: counters(front_end)["frames"] == 1)
    bench.unplug()
    until(front_end, lambda: counters(front_end)["open_failures"] >= 2)
    status = front_end.status()
    assert not status.connected
    assert "trying again" in status.text
    assert status.counters["vanished"] == 1
    bench.plug()
    until(front_end, lambda: counters(front_end)["reopened"] == 1)
    assert bench.heard() == b"?\n"
    bench.send(banner, "FS1 0 100 3 4,5,6 - -")
    batches = until(front_end, lambda: front_end.status().connected)
    assert batches[-1].counts.tolist() == [[4, 5, 6]]
    assert counters(front_end)["restarts"] == 1


def test_an_unplugged_device_does_not_spin(bench, banner):
    front_end = board(bench.path)
    greet(bench, front_end, banner)
    bench.unplug()
    begun, cpu, calls = time.monotonic(), time.process_time(), 0
    while time.monotonic() - begun < 1.0:
        front_end.read(1.0)
        calls += 1
    assert calls < 10
    assert time.process_time() - cpu < 0.2
    front_end.close()


def test_times_increase_across_every_trouble(bench, front_end, banner):
    greet(bench, front_end, banner)
    batches = []
    for round_ in range(3):
        bench.send(*(f"FS1 {i} {100 + 100 * i} 3 {round_},2,3 - -" for i in range(5)))
        seen = counters(front_end)["frames"]
        batches += until(front_end, lambda seen=seen: counters(front_end)["frames"] == seen + 5)
        bench.unplug()
        until(front_end, lambda: not front_end.status().connected)
        bench.plug()
        opened = counters(front_end)["reopened"]
        until(front_end, lambda opened=opened: counters(front_end)["reopened"] > opened)
        bench.heard()
        bench.send(banner)
    times = np.concatenate([b.times_ns for b in batches])
    assert times.size == 15
    assert (np.diff(times) > 0).all()
    assert (np.diff([b.now_ns for b in batches]) >= 0).all()
    assert all(b.n == 0 or b.now_ns >= b.times_ns[-1] for b in batches)


def test_a_port_that_is_not_there_is_waited_for(bench, fast_ns, banner):
    bench.unplug()
    front_end = board(bench.path, fast_ns)
    until(front_end, lambda: counters(front_end)["open_failures"] >= 1)
    assert "no such file" in front_end.status().text
    bench.plug()
    until(front_end, lambda: bench.heard(0.01) == b"?\n")
    bench.send(banner, "FS1 0 100 3 1,2,3 - -")
    until(front_end, lambda: front_end.status().connected)
    assert counters(front_end)["reopened"] == 0
    front_end.close()


def test_a_simulated_board_at_a_real_site_gives_nothing(bench, front_end):
    greet(bench, front_end, "FSB bench-board 1.0 3 100 12 simulated")
    bench.send("FS1 0 100 3 1,2,3 - -")
    batches = until(front_end, lambda: counters(front_end)["refused"] == 1)
    assert sum(b.n for b in batches) == 0
    assert not front_end.status().connected
    assert "says that it is simulated" in front_end.status().text


def test_simulated_readings_are_marked(bench, fast_ns):
    front_end = board(bench.path, fast_ns, simulated=True)
    greet(bench, front_end, "FSB bench-board 1.0 3 100 12 simulated")
    bench.send("FS1 0 100 3 1,2,3 - -")
    batches = until(front_end, lambda: counters(front_end)["frames"] == 1)
    assert batches[-1].flags.tolist() == [Flag.SIMULATED]
    front_end.close()


def test_supply_outside_its_range_is_flagged(bench, fast_ns, banner):
    front_end = board(bench.path, fast_ns, supply_v=[4.75, 5.25])
    greet(bench, front_end, banner)
    bench.send("FS1 0 100 3 1,2,3 - 4100")
    batches = until(front_end, lambda: counters(front_end)["frames"] == 1)
    assert batches[-1].flags.tolist() == [Flag.SUPPLY_OUT_OF_RANGE]
    front_end.close()


def test_close_ends_a_read_that_waits(bench):
    front_end = board(bench.path)
    front_end.read(0.01)
    reader = threading.Thread(target=front_end.read, args=(30.0,))
    reader.start()
    time.sleep(0.01)
    begun = time.monotonic()
    front_end.close()
    reader.join(5.0)
    assert not reader.is_alive()
    assert time.monotonic() - begun < 2.0
    assert front_end.read(0.0).n == 0


def test_any_url_of_the_serial_library_serves(tmp_path, fast_ns, banner, line):
    settings = settings_for("detector_board", {"device": "loop://"}, tmp_path)
    settings.check_device()
    front_end = open_front_end(settings, 3, fast_ns, time.time_ns, False)
    front_end.read(0.01)
    # loop:// hears itself: its own '?' comes back as rubbish, what a board would send as frames
    port = front_end._port  # noqa: SLF001
    port.write(line(banner) + line("FS1 0 100 3 1,2,3 - -"))
    until(front_end, lambda: counters(front_end)["frames"] == 1)
    assert counters(front_end)["garbage"] == 1
    front_end.close()
