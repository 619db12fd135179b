"""A board whose ticks are the clock: a day at speed, and a line that breaks."""

from __future__ import annotations

import os
import socket
import threading
import time

import numpy as np

from hardware import open_front_end, settings_for
from hardware.frames import crc
from tests.hardware.boards import board, counters, greet, until


def test_board_clock_a_day_of_frames_at_speed(bench):
    """Every frame is taken, times are the ticks; at least 60 000 frames in a second of CPU."""
    front_end = board(
        bench.path, simulated=True, clock="board", clock_start="2026-03-01T00:00:00+01:00"
    )
    greet(bench, front_end, "FSB rehearsal-board 0.1 3 1000 12 simulated")
    n = 86_400
    bodies = (f"FS1 {i % 65536} {1000 * i} 3 {i % 4096},7,8 253 5012" for i in range(n))
    day = b"".join(b"<%s*%04X>\n" % (b.encode(), crc(b.encode())) for b in bodies)

    def feed():
        left = memoryview(day)
        while left:
            left = left[os.write(bench.master, left[:65536]) :]

    feeder = threading.Thread(target=feed)
    feeder.start()
    # thread time: the feeding thread is not the driver's cost
    cpu, batches, deadline = time.thread_time(), [], time.monotonic() + 60
    while counters(front_end)["frames"] < n:
        assert time.monotonic() < deadline
        batches.append(front_end.read(1.0))
    cpu = time.thread_time() - cpu
    feeder.join()
    times = np.concatenate([b.times_ns for b in batches])
    counts = np.concatenate([b.counts for b in batches])
    assert (times == np.arange(n, dtype=np.int64) * 1_000_000_000).all()
    assert (counts[:, 0] == np.arange(n) % 4096).all()
    assert front_end.owns_clock
    assert front_end.clock_fix == (0, 1_772_319_600 * 1_000_000_000)
    assert counters(front_end)["lost"] == 0
    assert n / cpu > 60_000
    front_end.close()


def test_frames_that_came_before_the_line_broke_are_all_taken(tmp_path, fast_ns, banner, line):
    """Over socket://, where what was sent before the end can still be read."""
    with socket.create_server(("127.0.0.1", 0)) as server:
        device = f"socket://127.0.0.1:{server.getsockname()[1]}"
        start = "2026-03-01T00:00:00Z"
        settings = settings_for(
            "detector_board", {"device": device, "clock": "board", "clock_start": start}, tmp_path
        )
        front_end = open_front_end(settings, 3, fast_ns, time.time_ns, False)
        front_end.read(0.0)
        far, _ = server.accept()
        frames = (line(f"FS1 {i} {100 * i} 3 1,2,3 - -") for i in range(40))
        far.sendall(line(banner) + b"".join(frames))
        far.shutdown(socket.SHUT_WR)
        batches = until(front_end, lambda: counters(front_end)["vanished"] == 1)
        far.close()
    assert sum(b.n for b in batches) == 40
    front_end.close()
