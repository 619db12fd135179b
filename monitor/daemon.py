"""The loop: read, judge, tell, record. It waits on events only, and no reading waits for it."""

from __future__ import annotations

import threading
from collections.abc import Mapping, Sequence
from dataclasses import replace

from monitor import refchecks, refstrikes, spectrumview
from monitor.alarm_desk import AlarmDesk, text_of
from monitor.config import Site
from monitor.core import pipeline
from monitor.core.errors import ConfigError
from monitor.core.gather import Gathered
from monitor.core.judgement import MINUTE_NS
from monitor.core.readings import NS_PER_S, Batch, DeviceStatus, FrontEnd
from monitor.core.rows import Event
from monitor.core.station import Station
from monitor.evidence import evidence_of
from monitor.fixes import Clock, Fixes
from monitor.gain_watch import GainWatch
from monitor.marking import NOTHING, Standing, marked
from monitor.noise_watch import NoiseWatch
from monitor.record.background import WriterThread
from monitor.record.types import ClockFix
from monitor.snapshot import View, snapshot
from monitor.spool import Spool

READ_S = 0.5
"""Longest wait for readings, and the shortest time between two judgements of live ones."""
BULK_NS = 3600 * NS_PER_S
"""A front end that owns its clock is committed an hour of its time at once."""
DEVICE_EVENTS_EVERY_NS = 60 * NS_PER_S
RECORD_ALARM_AFTER_NS = 30 * NS_PER_S
RECORD = "record"
"""Key of the alarm that the record cannot be written."""
LAST_WORDS_S = 5.0


class Daemon:
    """One station at work. Only run() changes state; other threads read the view."""

    def __init__(
        self,
        site: Site,
        here: Station,
        front: FrontEnd,
        writer: WriterThread,
        clock: Clock,
        state: pipeline.State,
        desk: AlarmDesk,
        *,
        history_s: float | None = None,
        fixes: Sequence[ClockFix] = (),
        rows: Gathered | None = None,
        standing: Standing = NOTHING,
    ) -> None:
        self._site, self._here, self._front, self._writer = site, here, front, writer
        self._clock, self._state, self._desk = clock, state, desk
        self._history_ns = None if history_s is None else round(history_s * NS_PER_S)
        self._standing = standing
        self._gain = GainWatch(front, site.channels, site.bands, here.chain)
        self._noise = NoiseWatch(here, [c.name for c in site.channels], desk.raised())
        self._bulk_ns = state.front_ns
        self._evidence = evidence_of(front, site, here)
        self._spool = Spool()
        if rows is not None:
            self._spool.add_rows(rows)
        self._lock = threading.Lock()
        self._asked: list[Event] = []
        self._fixes = Fixes(clock, front.clock_fix, front.owns_clock, fixes)
        self._heard_ns: int | None = None
        self._committed_ns = self._well_ns = clock.boot_ns()
        self._stuck = False
        self._device: tuple[bool, str] | None = None
        self._refused = 0
        self._told_ns = -DEVICE_EVENTS_EVERY_NS
        self.ended = threading.Event()
        self._status = DeviceStatus(False, "starting")

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
                if self._stuck or not self._front.owns_clock or self.ended.is_set():
                    spent_s = (self._clock.boot_ns() - began_ns) / NS_PER_S
                    stop.wait(max(0.0, READ_S - spent_s))
        finally:
            self.note(Event(self._state.front_ns, "stop", "daemon", {}))
            self._take_asked()
            self._commit(wait_s=LAST_WORDS_S, all_rows=True)
            self._front.close()
            self._writer.close(LAST_WORDS_S)

    def turn(self) -> None:
        """One pass: what came, what it means, who must know, what is kept."""
        if self._stuck and self._front.owns_clock:  # what is recorded already can wait for room
            self._commit(wait_s=READ_S)
            return
        fix = self._fixes.look()
        if fix is not None:
            self._spool.fix(fix)
        came = self._front.read(READ_S)
        self._status = self._front.status()
        if self._status.ended and not self.ended.is_set():
            came = replace(came, now_ns=self._after_the_end_ns(came))
        self._judge(came)
        self._tell_device()
        self._tell_record()
        self._take_asked()
        self._commit_when_due(came)

    def _judge(self, came: Batch) -> None:
        kept = pipeline.accepted(self._state, came)
        if not self._front.owns_clock:  # a series played again is not late
            self._state = replace(self._state, late=self._state.late + came.n - kept.n)
        batch = marked(
            kept,
            self._status,
            self._here.chain,
            simulated=self._site.simulated,
            synchronised=self._fixes.synchronised,
            offset_ns=self._fixes.offset_ns,
            standing=self._standing,
        )
        heard_ns = self._state.hearing.last_ns
        self._state, out = pipeline.step(self._state, batch, self._here)
        if self._state.hearing.last_ns != heard_ns:
            self._heard_ns = self._clock.boot_ns()
        out.events += self._noise.look(out.blocks, self._status)
        out.events += self._gain.look(self._state.front_ns, self._desk.raised())
        for event in out.events:
            self._desk.apply(event)
        self._keep_evidence(out.events)
        self._spool.add(batch, out)

    def _after_the_end_ns(self, batch: Batch) -> int:
        """Nothing comes after a series: its last block closes, and the minute that is kept."""
        last = int(batch.times_ns[-1]) if batch.n else self._state.last_ns
        end = max(batch.now_ns, last + self._here.hold_ns)
        return -(-end // MINUTE_NS) * MINUTE_NS

    def _keep_evidence(self, events: Sequence[Event]) -> None:
        now_ns = self._clock.boot_ns()
        offset_ns = self._fixes.offset_ns if self._fixes.synchronised else None
        self._evidence.notice(events, offset_ns, now_ns)
        for event in self._evidence.events(self._state.front_ns, now_ns):
            self._spool.event(event)

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

    def _tell_record(self) -> None:
        """An alarm while the record cannot be written; what it can never take is a fault in it."""
        now = self._clock.boot_ns()
        if not self._writer.error:
            self._well_ns = now
        raised = now - self._well_ns >= RECORD_ALARM_AFTER_NS
        if raised != (RECORD in self._desk.raised()):
            body: dict[str, object] = {"raised": raised, "why": self._writer.error}
            event = Event(self._state.front_ns, "alarm", RECORD, body)
            self._desk.apply(event)
            self._spool.event(event)
        if self._writer.refused > self._refused:
            self._refused = self._writer.refused
            lost: dict[str, object] = {"commits": self._refused, "why": self._writer.refusal}
            self._spool.event(Event(self._state.front_ns, "fault", "commit refused", lost))

    def _take_asked(self) -> None:
        with self._lock:
            asked, self._asked = self._asked, []
        for event in asked:
            self._spool.event(event)

    def _commit_when_due(self, came: Batch) -> None:
        due = self._clock.boot_ns() - self._committed_ns >= self._site.commit_s * NS_PER_S
        if self._front.owns_clock:
            due = due or self._state.front_ns - self._bulk_ns >= BULK_NS or self._caught_up()
        over = self._status.ended and not self.ended.is_set()
        if due or (over and not came.n):
            self._commit(wait_s=READ_S if self._front.owns_clock else 0.0, all_rows=over)
        if over and self._spool.empty and self._writer.flush(READ_S):
            self.ended.set()

    def _caught_up(self) -> bool:
        """Once, when a rehearsal's history has been judged: the pages wait for it."""
        if self._history_ns is None or self._state.front_ns < self._history_ns:
            return False
        self._history_ns = None
        return True

    @property
    def trouble(self) -> str:
        """Why something is not in the record, or ""."""
        return self._writer.error or self._writer.refusal

    def _commit(self, wait_s: float, all_rows: bool = False) -> None:
        self._committed_ns = self._clock.boot_ns()
        self._bulk_ns = self._state.front_ns
        self._stuck = False
        if self._spool.empty:
            return
        with_rows = all_rows or self._front.owns_clock or self._spool.minute
        commit = self._spool.commit(
            self._status.temperature_c, self._here.chain.identity, with_rows
        )
        if self._writer.put(None, commit, wait_s > 0, wait_s):
            self._spool.clear(with_rows)
        else:
            self._stuck = True
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
            state, self._status, self._writer.boot, self._fixes.offset_ns, age_s,
            self._desk.alarms(), progress, self.trouble,
        )  # fmt: skip

    def answer(self, request: Mapping[str, object]) -> dict[str, object]:
        """The control socket's answer; ConfigError where a request cannot be met."""
        do = request.get("do")
        if do == "now":
            return {"now": snapshot(self.view(), self._here, self._site)}
        if do == "spectrum":
            shown = getattr(self._front, "shown", None)
            found = None if shown is None else shown()
            return {"spectrum": spectrumview.document(found, self.view(), self._here, self._site)}
        now_ns = self._state.front_ns
        if do in ("acknowledge", "shelve", "unshelve"):
            event = self._desk.request(request, now_ns)
            self._desk.apply(event)
        elif do == "note":
            body: dict[str, object] = {"text": text_of(request, "text", 2000)}
            event = Event(now_ns, "note", text_of(request, "by", 200, ""), body)
        elif do in (refchecks.KIND, refstrikes.KIND):
            names = [channel.name for channel in self._site.channels]
            made = refchecks.event_of if do == refchecks.KIND else refstrikes.event_of
            event = made(request, names, now_ns)
        else:
            raise ConfigError(
                f"do: {do!r} is not now, spectrum, acknowledge, shelve, unshelve, note, "
                f"{refchecks.KIND} or {refstrikes.KIND}"
            )
        self.note(event)
        return {}
