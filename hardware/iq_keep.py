"""Samples round a moment, kept as a recording when the daemon asks for it.

In the receiver's own process; hashing and writing happen on a thread, so that no sample waits.
"""

from __future__ import annotations

import queue
import threading
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from hardware.iq_budget import make_room, next_name
from hardware.iq_levels import DATATYPE
from hardware.iq_plan import Tune
from hardware.iq_ring import BYTES_PER_SAMPLE, Cutting, Ring, Run
from hardware.sigmf_write import About, Capture, Mark, write
from monitor.core.readings import NS_PER_S

KEPT_S = 1.0
"""How much is kept: half before the moment, half after it."""
RING_S = 2.0
"""An alarm comes a reading and a turn of the daemon's loop after what it is about."""
RING_BYTES = 32_000_000
META_BYTES = 100_000
"""Room that metadata are given; they take a few thousand bytes."""
PATIENCE_S = 2.0
"""What has not come so long after the moment will not be waited for."""
MOST_WAITING = 4
END_S = 2.0


def ring_for(rate_hz: float, round_s: float) -> Ring:
    """Long enough for a moment that lies two readings back, within the bytes."""
    seconds = min(RING_S + 2.0 * round_s, RING_BYTES / BYTES_PER_SAMPLE / rate_hz)
    return Ring(rate_hz, seconds)


def recording_bytes(rate_hz: float) -> int:
    """At most so many bytes has a recording."""
    return round(KEPT_S * rate_hz) * BYTES_PER_SAMPLE + META_BYTES


@dataclass(frozen=True, slots=True)
class Wanted:
    """What the daemon asks for. at_ns: boot time; utc_offset_ns: UTC less boot time, None where
    UTC is not known; names: of the bands by channel; why: what happened then.
    """

    at_ns: int
    folder: str
    label: str
    names: Sequence[str]
    why: str
    utc_offset_ns: int | None
    simulated: bool
    recorder: str


class Keeper:
    """Takes what is wanted, waits for the samples to come, writes, and has something to say."""

    def __init__(
        self, ring: Ring, rate_hz: float, tunes: Sequence[Tune], budget_bytes: int, hardware: str
    ) -> None:
        self._ring, self._rate_hz, self._tunes = ring, rate_hz, tunes
        self._budget_bytes, self._hardware = budget_bytes, hardware
        self._samples = round(KEPT_S * rate_hz)
        self._waiting: list[Wanted] = []
        self._work: queue.Queue[tuple[Wanted, Cutting] | None] = queue.Queue(MOST_WAITING)
        self._said: queue.SimpleQueue[dict[str, object]] = queue.SimpleQueue()
        self._thread = threading.Thread(target=self._run, name="keeper", daemon=True)
        self._thread.start()

    def ask(self, request: Mapping[str, Any]) -> None:
        """A request: the fields of Wanted."""
        wanted = Wanted(**request)
        if len(self._waiting) < MOST_WAITING:
            self._waiting.append(wanted)
        else:
            self._refuse(wanted, "too many recordings are asked for at once")

    def turn(self, now_ns: int) -> None:
        """Hand over what can be cut out now: its second half is there, or will not come."""
        for wanted in list(self._waiting):
            late = now_ns - wanted.at_ns > PATIENCE_S * NS_PER_S
            if not late and self._ring.after(wanted.at_ns) < self._samples - self._samples // 2:
                continue
            self._waiting.remove(wanted)
            try:
                self._work.put_nowait((wanted, self._ring.around(wanted.at_ns, self._samples)))
            except queue.Full:
                self._refuse(wanted, "the medium is too slow")

    def said(self) -> list[dict[str, object]]:
        """What became of requests since the last call, in words for the daemon."""
        found = []
        while not self._said.empty():
            found.append(self._said.get())
        return found

    def close(self) -> None:
        """Let what is begun be finished, for a short while."""
        try:
            self._work.put_nowait(None)
        except queue.Full:
            return
        self._thread.join(END_S)

    def _run(self) -> None:
        while (work := self._work.get()) is not None:
            wanted, cutting = work
            try:
                self._keep(wanted, cutting)
            except OSError as error:
                self._refuse(wanted, f"{wanted.folder}: {error.strerror or error}")

    def _refuse(self, wanted: Wanted, why: str) -> None:
        self._said.put({"kept": {"at_ns": wanted.at_ns, "why": why}})

    def _keep(self, wanted: Wanted, cutting: Cutting) -> None:
        if not cutting.runs:
            self._refuse(wanted, "no samples came")
            return
        folder = Path(wanted.folder)
        folder.mkdir(parents=True, exist_ok=True)
        name = next_name(folder, wanted.label)
        for gone in make_room(folder, self._budget_bytes, recording_bytes(self._rate_hz)):
            self._said.put({"removed": {"name": gone.name, "bytes": gone.size}})
        raw = [run.raw for run in cutting.runs]
        captures, marks = self._described(wanted, cutting)
        written = write(folder, name, self._about(wanted), captures, marks, raw)
        body: dict[str, object] = {
            "at_ns": wanted.at_ns, "name": name, "sha256": written.sha256,
            "meta_sha256": written.meta_sha256, "bytes": written.data_bytes + written.meta_bytes,
            "samples": written.data_bytes // BYTES_PER_SAMPLE,
            "start_ns": cutting.runs[0].start_ns, "covers": cutting.mark is not None,
        }  # fmt: skip
        self._said.put({"kept": body})

    def _about(self, wanted: Wanted) -> About:
        own = {"alert_boot_ns": wanted.at_ns}
        return About(
            DATATYPE, self._rate_hz, wanted.simulated, wanted.why, self._hardware,
            wanted.recorder, own,
        )  # fmt: skip

    def _described(self, wanted: Wanted, cutting: Cutting) -> tuple[list[Capture], list[Mark]]:
        captures, marks, start = [], [], 0
        for run in cutting.runs:
            utc = wanted.utc_offset_ns
            utc_ns = None if utc is None else run.start_ns + utc
            captures.append(Capture(start, self._tunes[run.place].centre_hz, run.start_ns, utc_ns))
            marks += self._bands(wanted.names, run, start)
            start += run.samples
        if cutting.mark is not None:
            marks.append(Mark(cutting.mark, 0, "alert", comment=wanted.why))
        return captures, marks

    def _bands(self, names: Sequence[str], run: Run, start: int) -> list[Mark]:
        tune = self._tunes[run.place]
        found = []
        for part in tune.parts:
            low, high = tune.centre_hz + part.low_hz, tune.centre_hz + part.high_hz
            label = names[part.channel] if part.channel < len(names) else f"band {part.channel}"
            found.append(Mark(start, run.samples, label, (low, high)))
        return found
