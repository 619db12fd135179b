"""The loop: read, judge, tell, record. It waits on events only, and no reading waits for it."""

from __future__ import annotations

import threading
from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from monitor.alarm_desk import AlarmDesk
from monitor.clock import SystemClock
from monitor.config import Site
from monitor.core import pipeline
from monitor.core.errors import ConfigError
from monitor.core.flags import Flag
from monitor.core.judgement import MINUTE_NS
from monitor.core.readings import NS_PER_S, Batch, DeviceStatus, FrontEnd
from monitor.core.rows import Event
from monitor.core.station import Station
from monitor.record.background import WriterThread
from monitor.record.types import ClockFix
from monitor.snapshot import View, snapshot
from monitor.spool import Spool

READ_S = 0.5
"""Longest wait for readings, and the shortest time between two judgements of live ones."""
BULK_NS = 3600 * NS_PER_S
"""A front end that owns its clock is committed an hour of its time at once."""
FIX_EVERY_NS = 3600 * NS_PER_S
JUMP_NS = NS_PER_S // 2
LOOK_EVERY_NS = 60 * NS_PER_S
UNKNOWN_NS = 10 * 365 * 86_400 * NS_PER_S
"""Stated uncertainty of a clock that nothing has set: ten years."""
DEVICE_EVENTS_EVERY_NS = 60 * NS_PER_S


class Daemon:
    """One station at work. Only run() changes state; other threads read the view."""

    def __init__(
        self,
        site: Site,
        here: Station,
        front: FrontEnd,
        writer: WriterThread,
        clock: SystemClock,
        boot: int,
        state: pipeline.State,
        desk: AlarmDesk,
        *,
        history_s: float | None = None,
    ) -> None:
        self._site, self._here, self._front, self._writer = site, here, front, writer
        self._clock, self._boot, self._state, self._desk = clock, boot, state, desk
        self._history_ns = None if history_s is None else round(history_s * NS_PER_S)
        self._start_ns = state.front_ns
        self._spool = Spool()
        self._lock = threading.Lock()
        self._asked: list[Event] = []
        self._offset_ns: int | None = None
        self._fix_ns = self._look_ns = -FIX_EVERY_NS
        self._synchronised = True
        self._heard_ns: int | None = None
        self._committed_ns = clock.boot_ns()
        self._device: tuple[bool, str] | None = None
        self._refused = 0
        self._told_ns = -DEVICE_EVENTS_EVERY_NS
        self.ended = threading.Event()
        self._status = DeviceStatus(False, "starting")
        if front.clock_fix is not None:
            self._fix(ClockFix(*front.clock_fix, "front end", 0))

    def note(self, event: Event) -> None:
        """Have an event written with the next commit; from any thread."""
        with self._lock:
            self._asked.append(event)

    def run(self, stop: threading.Event, exit_at_end: bool = False) -> None:
        """Work until stop is set (or a series has ended); write what is left, let all go."""
        try:
            while not stop.is_set() and not (exit_at_end and self.ended.is_set()):
                began_ns = self._clock.boot_ns()
                self.turn()
                if not self._front.owns_clock or self.ended.is_set():
                    spent_s = (self._clock.boot_ns() - began_ns) / NS_PER_S
                    stop.wait(max(0.0, READ_S - spent_s))
        finally:
            self.note(Event(self._state.front_ns, "stop", "daemon", {}))
            self._take_asked()
            self._commit(block=True)
            self._front.close()
            self._writer.close()

    def turn(self) -> None:
        """One pass: what came, what it means, who must know, what is kept."""
        if not self._front.owns_clock:
            self._mind_clock()
        batch = self._front.read(READ_S)
        self._status = self._front.status()
        if self._status.ended and not self.ended.is_set():
            batch = replace(batch, now_ns=self._after_the_end_ns(batch))
        batch = self._marked(pipeline.accepted(self._state, batch), batch)
        self._state, out = pipeline.step(self._state, batch, self._here)
        for event in out.events:
            self._desk.apply(event)
        self._spool.add(batch, out)
        if batch.n:
            self._heard_ns = self._clock.boot_ns()
        self._tell_device()
        self._take_asked()
        self._commit_when_due(batch)

    def _after_the_end_ns(self, batch: Batch) -> int:
        """Nothing comes after a series: its last block closes, and the minute that is kept."""
        last = int(batch.times_ns[-1]) if batch.n else self._state.last_ns
        end = max(batch.now_ns, last + self._here.hold_ns)
        return -(-end // MINUTE_NS) * MINUTE_NS

    def _marked(self, kept: Batch, came: Batch) -> Batch:
        """The readings taken, with the flags that only the daemon knows of."""
        if not self._front.owns_clock:  # a series played again is not late
            self._state = replace(self._state, late=self._state.late + came.n - kept.n)
        bits = int(Flag.SIMULATED) if self._site.simulated else 0
        bits |= 0 if self._synchronised else int(Flag.CLOCK_UNSYNCHRONISED)
        low, high = self._here.chain.valid_temperature_c
        board = self._status.temperature_c
        if board is not None and not low <= board <= high:
            bits |= int(Flag.OUT_OF_TEMPERATURE)
        flags = kept.flags | np.int32(bits)
        due_ns = self._here.chain.due_utc_ns
        if due_ns is not None and self._offset_ns is not None:
            overdue = kept.times_ns + self._offset_ns > due_ns
            flags = np.where(overdue, flags | np.int32(Flag.CALIBRATION_OVERDUE), flags)
        return replace(kept, flags=flags.astype(np.int32))

    def _mind_clock(self) -> None:
        """Keep a clock fix: each hour, after a jump, and when the clock comes to be trusted."""
        boot_ns, utc_ns = self._clock.boot_ns(), self._clock.utc_ns()
        jumped = self._offset_ns is None or abs(utc_ns - boot_ns - self._offset_ns) > JUMP_NS
        if not jumped and boot_ns - self._look_ns < LOOK_EVERY_NS:
            return
        self._look_ns = boot_ns
        error_ns = self._clock.uncertainty_ns()
        changed = self._synchronised != (error_ns is not None)
        self._synchronised = error_ns is not None
        if not (jumped or changed or boot_ns - self._fix_ns >= FIX_EVERY_NS):
            return
        source = "system clock" if self._synchronised else "system clock, unsynchronised"
        self._fix(ClockFix(boot_ns, utc_ns, source, UNKNOWN_NS if error_ns is None else error_ns))

    def _fix(self, fix: ClockFix) -> None:
        self._offset_ns, self._fix_ns = fix.utc_ns - fix.boot_ns, fix.boot_ns
        self._spool.fix(fix)

    def _tell_device(self) -> None:
        """Events for what the device does, at most one a minute for mere text."""
        now = self._clock.boot_ns()
        device = (self._status.connected, self._status.text)
        fresh = self._device is None or device[0] != self._device[0]
        slow = now - self._told_ns >= DEVICE_EVENTS_EVERY_NS
        if device == self._device or not (fresh or slow):
            return
        self._device, self._told_ns = device, now
        body: dict[str, object] = {
            "connected": device[0], "text": device[1],
            "counters": dict(self._status.counters), "late": self._state.late,
        }  # fmt: skip
        self._spool.event(Event(self._state.front_ns, "device", self._site.sensor_kind, body))

    def _take_asked(self) -> None:
        with self._lock:
            asked, self._asked = self._asked, []
        for event in asked:
            self._spool.event(event)

    def _commit_when_due(self, batch: Batch) -> None:
        now = self._clock.boot_ns()
        due = now - self._committed_ns >= self._site.commit_s * NS_PER_S
        if self._front.owns_clock:
            due = due or self._state.front_ns - self._start_ns >= BULK_NS or self._caught_up()
        if self._status.ended and not self.ended.is_set() and not batch.n:
            due = True
        if due:
            self._commit(block=self._front.owns_clock)
        if self._status.ended and self._spool.empty and not self.ended.is_set():
            self._writer.flush()
            self.ended.set()

    def _caught_up(self) -> bool:
        """Once, when a rehearsal's history has been judged: the pages wait for it."""
        if self._history_ns is None or self._state.front_ns < self._history_ns:
            return False
        self._history_ns = None
        return True

    def _tell_refused(self) -> None:
        """A commit that the record can never take is lost: say so in the record itself."""
        if self._writer.refused > self._refused:
            self._refused = self._writer.refused
            body: dict[str, object] = {"commits": self._refused, "why": self._writer.refusal}
            self._spool.event(Event(self._state.front_ns, "fault", "commit refused", body))

    @property
    def trouble(self) -> str:
        """Why something is not in the record, or ""."""
        return self._writer.error or self._writer.refusal

    def _commit(self, block: bool) -> None:
        self._tell_refused()
        self._committed_ns = self._clock.boot_ns()
        self._start_ns = self._state.front_ns
        if self._spool.empty:
            return
        commit = self._spool.commit(self._status.temperature_c, self._here.chain.identity)
        if self._writer.put(self._boot, commit, block):
            self._spool.clear()
        else:
            self._spool.give_up(self._state.front_ns)

    def view(self) -> View:
        """What is known now, consistent in itself."""
        state, heard = self._state, self._heard_ns
        age_s = None if heard is None else (self._clock.boot_ns() - heard) / NS_PER_S
        progress = None
        history_ns = self._history_ns
        if history_ns is not None and state.front_ns < history_ns:
            progress = (max(state.front_ns, 0) / NS_PER_S, history_ns / NS_PER_S)
        return View(
            state, self._status, self._boot, self._offset_ns, age_s, self._desk.alarms(),
            progress, self.trouble,
        )  # fmt: skip

    def answer(self, request: Mapping[str, object]) -> dict[str, object]:
        """The control socket's answer; ConfigError where a request cannot be met."""
        do = request.get("do")
        if do == "now":
            return {"now": snapshot(self.view(), self._here, self._site)}
        if do in ("acknowledge", "shelve", "unshelve"):
            event = self._desk.request(request, self._state.front_ns)
            self._desk.apply(event)
            self.note(event)
            return {}
        if do == "note":
            text = str(request.get("text", "")).strip()[:2000]
            if not text:
                raise ConfigError("text: empty; write the note")
            self.note(Event(self._state.front_ns, "note", str(request.get("by", ""))[:200],
                            {"text": text}))  # fmt: skip
            return {}
        raise ConfigError(f"do: {do!r} is not now, acknowledge, shelve, unshelve or note")
