"""Opening a detector board's front end and reading it until something shows."""

from __future__ import annotations

import time

from hardware import open_front_end, settings_for


def board(path, clock_ns=time.monotonic_ns, channels=3, simulated=False, **options):
    options = {"device": str(path)} | options
    settings = settings_for("detector_board", options, path.parent)
    return open_front_end(settings, channels, clock_ns, time.time_ns, simulated)


def until(front_end, condition, within_s=5.0):
    """Reads until condition() holds; all readings on the way."""
    batches, end = [], time.monotonic() + within_s
    while not condition():
        assert time.monotonic() < end, front_end.status()
        batches.append(front_end.read(0.02))
    return batches


def counters(front_end):
    return front_end.status().counters


def greet(bench, front_end, banner):
    front_end.read(0.01)
    assert bench.heard() == b"?\n"
    bench.send(banner)
    until(front_end, lambda: counters(front_end)["banners"] >= 1)
