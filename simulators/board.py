"""The simulated detector board: a history as fast as the line takes it, then real time."""

from __future__ import annotations

import math
import os
import select
import time
from collections.abc import Callable, Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from simulators import wire
from simulators.control import Control
from simulators.faults import Fault, Faults
from simulators.line import Line
from simulators.source import Setup, Source

NAME = "rehearsal-board"
FIRMWARE = "0.1"
CHUNK = 3600
"""Readings made at once in the history."""
LIVE_FRAMES_PER_S = 20
BANNER_EVERY_MS = 60_000
LOOK_S = 0.05
"""How often an absent reader is looked for."""


class Firmware:
    """Frames and banners from counts, as the protocol page asks; faults strike here."""

    def __init__(self, setup: Setup, faults: Faults) -> None:
        self._setup = setup
        self._faults = faults
        self._group = wire.samples_per_frame(setup.channels, setup.bits)
        self._held = ""
        self._resumed = False
        self.restart(0)

    def restart(self, now_ms: int) -> None:
        """Start anew: numbers and ticks from 0, a banner first."""
        self._seq = 0
        self._start_ms: int | None = None
        self._banner_at_ms = now_ms

    def banner(self) -> bytes:
        """The banner line."""
        setup = self._setup
        return wire.banner(NAME, FIRMWARE, setup.channels, setup.spacing_ms, setup.bits)

    def lines(
        self,
        first: int,
        counts: NDArray[np.int32],
        group: int,
        at_tick: Callable[[int], None],
    ) -> Iterator[bytes]:
        """What goes onto the wire for readings first..: at most group of them to a frame.

        at_tick is called with the board's time (ms) before each frame is made.
        """
        texts = wire.sample_texts(counts)
        group, at, n = min(group, self._group), 0, len(texts)
        while at < n:
            # after a standstill a frame of several would spread them over the time it lasted
            take = min(1 if self._resumed else group, n - at)
            first_ms = (first + at) * self._setup.spacing_ms
            now_ms = first_ms + (take - 1) * self._setup.spacing_ms
            samples = texts[at : at + take]
            at += take
            at_tick(now_ms)
            self._resumed = self._faults.hung(now_ms)
            if not self._resumed:
                yield self._frame(first_ms, now_ms, samples)

    def _frame(self, first_ms: int, now_ms: int, samples: list[str]) -> bytes:
        if self._faults.stuck(now_ms) and self._held:
            samples = [self._held] * len(samples)
        self._held = samples[-1]
        if self._start_ms is None:
            self._start_ms = first_ms
        data = wire.frame(
            self._seq,
            now_ms - self._start_ms,
            self._setup.channels,
            samples,
            self._temperature_dc(now_ms),
            5010 - (now_ms // 1000) % 7,
        )
        self._seq = (self._seq + 1) % wire.SEQ_WRAP
        data = self._faults.spoil(data)
        if now_ms >= self._banner_at_ms:
            self._banner_at_ms = now_ms + BANNER_EVERY_MS
            data = self.banner() + data
        return data

    def _temperature_dc(self, now_ms: int) -> int:
        utc_s = np.array([now_ms / 1000.0 + self._setup.midnight_s])
        return int(self._setup.scene.climate.told_dc(utc_s)[0])


class Board:
    """Firmware, line, faults and control together. run() returns at the end of a history only."""

    def __init__(
        self, source: Source, line: Line, control: Control | None, faults: Faults, with_parent: bool
    ) -> None:
        self._source = source
        self._line = line
        self._control = control
        self._faults = faults
        self._firmware = Firmware(source.setup, faults)
        self._parent = os.getppid() if with_parent else None
        self._waits = True  # for a reader's first question, and when the line is full
        self._asked = False
        self._now_ms = 0
        self._away_until_ms: int | None = None
        self._next = 0

    def history(self) -> int:
        """Send the history; returns its number of readings once a reader has taken them."""
        self._wait_for_reader()
        setup = self._source.setup
        self._send_until(math.floor(setup.history_s * setup.rate_hz + 1e-9), CHUNK)
        self._source.flush()
        empty = 0
        while self._line.attached() and empty < 3:  # bytes on their way are not counted: look again
            empty = 0 if self._line.unread() else empty + 1
            self._pump(LOOK_S)
        return self._next

    def live(self, started_s: float) -> None:
        """Real time from time.monotonic() started_s on, for ever: the history's end lies there."""
        setup = self._source.setup
        if setup.history_s == 0:
            started_s = time.monotonic()
        group = max(1, math.ceil(setup.rate_hz / LIVE_FRAMES_PER_S))
        while True:
            board_s = setup.history_s + time.monotonic() - started_s
            due = math.floor(board_s * setup.rate_hz) + 1
            self._waits = due - self._next > 2.0 * max(setup.rate_hz, group)  # still catching up
            if due - self._next >= group:
                self._send_until(due, CHUNK if self._waits else group)
                self._source.flush()
            else:
                next_s = (self._next + group - 1) / setup.rate_hz
                self._pump(max(next_s - board_s, 0.001))
            self._answer()

    def _send_until(self, end: int, group: int) -> None:
        while self._next < end:
            first, n = self._next, min(CHUNK, end - self._next)
            self._next += n
            counts = self._source.take(first, n)
            for data in self._firmware.lines(first, counts, group, self._at_tick):
                self._transmit(data)
                self._answer()

    def _at_tick(self, now_ms: int) -> None:
        self._now_ms = now_ms
        for fault in self._faults.due(now_ms):
            self._begin(fault)
        if self._away_until_ms is not None and now_ms >= self._away_until_ms:
            self._return()

    def _transmit(self, data: bytes) -> None:
        """Hand bytes to the line. Waits where it must; otherwise what is not taken is lost."""
        view = memoryview(data)
        while view:
            if not self._line.attached():
                if not self._waits or self._away_until_ms is not None:
                    return
                self._wait_for_reader()
                if len(view) < len(data):
                    return  # half a frame means nothing to a reader who has just come
            taken = self._line.write(view)
            view = view[taken:]
            if not taken:
                if not self._waits:
                    return
                self._pump(0.2, writing=True)

    def _wait_for_reader(self) -> None:
        """Until somebody has the line open and asks who is there; then answer."""
        self._asked = False
        while not (self._line.attached() and self._asked):
            self._pump(LOOK_S)
        self._answer()

    def _answer(self) -> None:
        """The banner that was asked for; firmware that stands still does not hear."""
        if self._asked:
            self._asked = False
            if not self._faults.hung(self._now_ms):
                self._transmit(self._firmware.banner())

    def _pump(self, timeout_s: float, writing: bool = False) -> None:
        """Wait for the line, the control socket or the time; take what comes."""
        if self._parent is not None and os.getppid() != self._parent:
            raise SystemExit(0)
        attached = self._line.attached()
        line = [self._line] if attached else []
        control = [self._control] if self._control is not None else []
        if not attached:
            timeout_s = min(timeout_s, LOOK_S)  # a reader's coming wakes nobody
        waited: list[Any] = [*line, *control]
        ready, _, _ = select.select(waited, line if writing else [], [], timeout_s)
        if self._line in ready and b"?" in self._line.read():
            self._asked = True
        if self._control is not None and self._control in ready:
            self._control.serve(self._command)

    def _command(self, request: dict[str, object]) -> dict[str, object]:
        amount = request.get("amount")
        if amount is not None and not isinstance(amount, (int, float)):
            raise ValueError(f"amount {amount!r} is not a number")
        self._begin(Fault(str(request.get("fault")), amount))
        return {"ok": True, "board_s": self._now_ms / 1000.0, "simulated": True}

    def _begin(self, fault: Fault) -> None:
        if fault.kind == "vanish":
            self._line.close()
            if fault.amount is not None:
                self._away_until_ms = self._now_ms + round(fault.amount * 1000.0)
            else:
                self._away_until_ms = self._faults.returns_ms()
        elif fault.kind == "return":
            self._return()
        elif fault.kind == "restart":
            self._firmware.restart(self._now_ms)
        else:
            self._faults.start(fault, self._now_ms)

    def _return(self) -> None:
        self._away_until_ms = None
        if not self._line.is_open:
            self._line.open()
