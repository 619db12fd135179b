"""Front end for a receiver on the network: the daemon's side of the process that listens to it.

No sample enters this process: iq_worker.py measures, a pipe carries its readings.
"""

from __future__ import annotations

import json
import os
import selectors
import subprocess
import sys
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import numpy as np

from hardware.iq_options import Settings
from hardware.iq_shown import Shown
from hardware.iq_worker import settings_text
from hardware.thermometer import Thermometer
from monitor.core.flags import Flag
from monitor.core.readings import NS_PER_S, Batch, DeviceStatus, empty_batch

SILENT_S = 5.0
"""A process that says nothing for so long is ended and started anew; it speaks twice a second."""
START_S = 30.0
"""The same for its first word: a small machine takes its time to load numpy."""
BACK_OFF_S = 0.5
LONGEST_BACK_OFF_S = 30.0
END_S = 2.0
_PIECE = 1 << 16


class Worker:
    """The process: started, read from without waiting for it, started anew when it is gone."""

    def __init__(self, argument: str, now_ns: Callable[[], int]) -> None:
        self._argument = argument
        self._now_ns = now_ns
        self._process: subprocess.Popen[bytes] | None = None
        self._selector = selectors.DefaultSelector()
        self._wake_r, self._wake_w = os.pipe()
        self._selector.register(self._wake_r, selectors.EVENT_READ)
        self._rest = self._unsaid = b""
        self._spoken = False
        self._heard_ns = self._start_at_ns = now_ns()
        self._back_off_s = BACK_OFF_S
        self._closed = False
        self.problem = "starting"
        self.counters = {"worker_starts": 0, "worker_ended": 0, "worker_silent": 0}

    @property
    def pid(self) -> int | None:
        """Its number; None while there is none."""
        return self._process.pid if self._process else None

    def lines(self, timeout_s: float) -> list[bytes]:
        """What it said since the last call; waits timeout_s at most."""
        now_ns = self._now_ns()
        self._flush()
        if self._process is None and not self._closed and now_ns >= self._start_at_ns:
            self._start(now_ns)
        if self._closed or not self._selector.select(max(timeout_s, 0.0)):
            self._patience()
            return []
        process = self._process
        if process is None or process.stdout is None:
            return []
        data = self._said(process.stdout.fileno())
        if data == b"":
            code = process.wait()
            self._end("worker_ended", f"the receiver's process ended with {code}")
            return []
        *lines, self._rest = (self._rest + (data or b"")).split(b"\n")
        if lines:
            self._heard_ns, self._spoken, self.problem = self._now_ns(), True, ""
            self._back_off_s = BACK_OFF_S
        self._patience()
        return lines

    def say(self, line: bytes) -> bool:
        """Tell it a line, without waiting; False where it is not there or has not read the last."""
        if self._process is None or self._unsaid:
            return False
        self._unsaid = line
        self._flush()
        return self._process is not None

    def _flush(self) -> None:
        if self._process is None or self._process.stdin is None or not self._unsaid:
            return
        try:
            self._unsaid = self._unsaid[os.write(self._process.stdin.fileno(), self._unsaid) :]
        except BlockingIOError:
            return
        except OSError:  # it has ended, which its output will tell
            self._unsaid = b""

    def close(self) -> None:
        """End it: at the end of its input it goes by itself; else it is killed."""
        if self._closed:
            return
        self._closed = True
        os.write(self._wake_w, b"x")
        self._let_go(END_S)
        self._selector.close()
        os.close(self._wake_r)
        os.close(self._wake_w)

    def _start(self, now_ns: int) -> None:
        path = os.pathsep.join([str(Path(__file__).parents[1]), os.environ.get("PYTHONPATH", "")])
        try:
            self._process = subprocess.Popen(
                [sys.executable, "-P", "-m", "hardware.iq_worker", self._argument],
                stdin=subprocess.PIPE,
                stdout=subprocess.PIPE,
                env=os.environ | {"PYTHONPATH": path.rstrip(os.pathsep)},
                process_group=0,  # a key that interrupts us must not end it before us
            )
        except OSError as error:
            self._later(f"the receiver's process cannot be started: {error.strerror}")
            return
        assert self._process.stdout is not None
        assert self._process.stdin is not None
        os.set_blocking(self._process.stdout.fileno(), False)
        self._selector.register(self._process.stdout, selectors.EVENT_READ)
        self.counters["worker_starts"] += 1
        os.set_blocking(self._process.stdin.fileno(), False)
        self._heard_ns, self._spoken, self._rest, self._unsaid = now_ns, False, b"", b""
        self.problem = "the receiver's process is starting"

    def _said(self, descriptor: int) -> bytes | None:
        """Bytes that are there; b"" at the end, None where only a wait was ended."""
        try:
            return os.read(descriptor, _PIECE)
        except BlockingIOError:
            return None

    def _patience(self) -> None:
        limit_s = SILENT_S if self._spoken else START_S
        silent_ns = self._now_ns() - self._heard_ns
        if self._process is not None and silent_ns > limit_s * NS_PER_S:
            self._end("worker_silent", f"the receiver's process was silent for {limit_s:g} s")

    def _end(self, counter: str, why: str) -> None:
        self._let_go(0.0)
        self.counters[counter] += 1
        self._later(why)

    def _later(self, why: str) -> None:
        self.problem = why
        self._start_at_ns = self._now_ns() + int(self._back_off_s * NS_PER_S)
        self._back_off_s = min(2 * self._back_off_s, LONGEST_BACK_OFF_S)

    def _let_go(self, grace_s: float) -> None:
        process, self._process = self._process, None
        if process is None or process.stdin is None or process.stdout is None:
            return
        self._selector.unregister(process.stdout)
        process.stdin.close()
        try:
            process.wait(grace_s)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
        process.stdout.close()


class IqStream:
    """See monitor.core.readings.FrontEnd. One reading an interval, stamped at its first sample."""

    owns_clock = False
    clock_fix: tuple[int, int] | None = None

    def __init__(self, settings: Settings, boot_ns: Callable[[], int], simulated: bool) -> None:
        self._settings = settings
        self._bits = int(Flag.SIMULATED) if simulated else 0
        self._boot_ns = boot_ns
        self._worker = Worker(
            settings_text(settings.radio, settings.scheme, settings.seed, settings.evidence_bytes),
            boot_ns,
        )
        self.keeps = settings.evidence_bytes > 0
        self._kept: list[Mapping[str, object]] = []
        self._shown = Shown()
        self._checked: list[Mapping[str, object]] = []
        self._upto_ns = boot_ns()
        self._told: dict[str, object] = {}
        self._counters: dict[str, int] = {}
        self._before: dict[str, int] = {}  # of processes that have ended
        self._starts = 0
        self._thermometer = Thermometer(settings.thermometer, boot_ns)

    def read(self, timeout_s: float) -> Batch:
        """Readings since the last call; waits timeout_s at most."""
        times: list[int] = []
        counts: list[list[int]] = []
        flags: list[int] = []
        for line in self._worker.lines(timeout_s):
            said = json.loads(line)
            if "checked" in said:
                self._checked.append(said["checked"])
                continue
            if "upto" not in said:
                self._apart(said)
                continue
            self._told = said
            self._counted(said["counters"])
            start_ns = said.get("at", 0)
            if start_ns >= self._upto_ns:
                times.append(start_ns)
                counts.append(said["counts"])
                flags.append(self._bits | (int(Flag.CLIPPED) if said["clipped"] else 0))
                self._shown.note(start_ns, said["upto"], counts[-1], flags[-1])
            self._upto_ns = max(self._upto_ns, said["upto"])
        if self._worker.problem:  # whatever comes from a process yet to start is later
            self._upto_ns = max(self._upto_ns, self._boot_ns())
        if not times:
            return empty_batch(self._settings.scheme.channels, self._upto_ns)
        return Batch(
            np.array(times, np.int64),
            np.array(counts, np.int32),
            np.array(flags, np.int32),
            self._upto_ns,
            np.full(len(times), self._thermometer.tenths(), np.int32),
        )

    def status(self) -> DeviceStatus:
        """The stream's state; connected while samples come at the rate asked for."""
        problem = self._worker.problem or str(self._told.get("problem", ""))
        scheme, radio = self._settings.scheme, self._settings.radio
        text = f"{radio.name}, {radio.rate_hz / 1e6:g} million samples a second"
        text += f", {self._told['told']}" if self._told.get("told") else ""
        text += f", {len(scheme.tunes)} places of the tuner in turn" if scheme.swept else ""
        counters = self._sums() | self._worker.counters
        lost = counters.get("lost_samples", 0)
        text += f", {lost} samples lost so far" if lost else ""  # a text that changes is an event
        return DeviceStatus(
            connected=not problem,
            text=f"{problem}; trying again" if problem else text,
            temperature_c=self._thermometer.celsius(),
            counters=counters,
            floors=() if problem else tuple(self._told.get("floors", ())),  # type: ignore[arg-type]
        )

    def _counted(self, counters: dict[str, int]) -> None:
        """A process counts from nothing: what the one before it had counted is kept."""
        starts = self._worker.counters["worker_starts"]
        if starts != self._starts:
            self._before, self._starts = self._sums(), starts
        self._counters = counters

    def _sums(self) -> dict[str, int]:
        return self._before | {
            key: n + self._before.get(key, 0) for key, n in self._counters.items()
        }

    def _apart(self, said: Mapping[str, Any]) -> None:
        """What is no reading."""
        if "picture" in said:
            self._shown.take(said["picture"])
        else:
            self._kept.append(said)

    def shown(self) -> Mapping[str, Any]:
        """The newest spectrum for people to look at, see iq_shown.py; from any thread."""
        return self._shown.view

    def keep(self, request: Mapping[str, object]) -> bool:
        """Ask for the samples round a moment as a recording; see monitor.evidence.Keeper."""
        return self._worker.say(json.dumps(request).encode() + b"\n")

    def kept(self) -> list[Mapping[str, object]]:
        """What became of that, since the last call."""
        kept, self._kept = self._kept, []
        return kept

    def checked(self) -> list[Mapping[str, object]]:
        """What checks of the gain found, since the last call; see monitor.gain_watch."""
        checked, self._checked = self._checked, []
        return checked

    def close(self) -> None:
        """End the process."""
        self._worker.close()
