"""Child processes of run and rehearse: start them, start them again, end them together."""

from __future__ import annotations

import subprocess
import sys
import threading
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from monitor.control import ask
from monitor.core.errors import DeviceError

FIRST_WAIT_S = 1.0
LONGEST_WAIT_S = 60.0
GRACE_S = 15.0
SOON_S = 10.0
LOOK_EVERY_S = 0.2
LEAST_LIFE_S = 1.5
LONG_LIFE_S = 20.0
"""A slow machine needs some seconds to read all that can be refused."""


@dataclass
class Child:
    """One process of ours. lasting: to be started again when it ends of itself.

    finishes: ends with 0 when its work is done, else 0 only says that somebody told it to end.
    may_start: is asked before its first start.
    """

    name: str
    arguments: Sequence[str]
    lasting: bool = True
    finishes: bool = False
    may_start: Callable[[], bool] = lambda: True
    process: subprocess.Popen[bytes] | None = None
    wait_s: float = FIRST_WAIT_S
    started_s: float = 0.0
    again_s: float = field(default=0.0)
    lived: bool = False

    def start(self, now_s: float) -> None:
        """Start the process; its output goes where ours goes."""
        self.process = subprocess.Popen([sys.executable, "-P", "-m", *self.arguments])
        self.started_s = now_s

    def code(self) -> int | None:
        """Exit code; None while it runs."""
        return None if self.process is None else self.process.poll()


def look(child: Child, now_s: float, tell: Callable[[str], None]) -> int | None:
    """Start a child that has ended once more, later each time; its code where it may not be.

    A wrong site file (2) or what is missing (3) is final soon after the first start: trying again
    would hide it. One that has once lived is always started again.
    """
    code = child.code()
    if child.process is not None and code is None:
        if now_s - child.started_s > LONGEST_WAIT_S:
            child.wait_s, child.lived = FIRST_WAIT_S, True
        return None
    if child.process is None:
        if now_s >= child.again_s and (child.started_s or child.may_start()):
            try:
                child.start(now_s)
            except OSError as error:
                tell(f"fieldsill: {child.name} cannot be started: {error}; again soon")
                child.again_s = now_s + LONGEST_WAIT_S
        return None
    child.lived = child.lived or now_s - child.started_s >= SOON_S
    if (code == 0 and child.finishes) or (code in (2, 3) and not child.lived):
        return code
    ended = f"fieldsill: {child.name} ended" + (f" with {code}" if code else "")
    if not child.lasting:
        tell(ended)
        return code
    tell(f"{ended}; again in {child.wait_s:g} s")
    child.process, child.again_s = None, now_s + child.wait_s
    child.wait_s = min(2 * child.wait_s, LONGEST_WAIT_S)
    return None


def watch(children: Sequence[Child], stop: threading.Event, tell: Callable[[str], None]) -> int:
    """Keep the children running until stop is set or one may not be started again.

    tell: says in one line what ended and when it starts again. Returns the exit code to end with.
    """
    while not stop.is_set():
        for child in children:
            code = look(child, time.monotonic(), tell)
            if code is not None:
                return code
        stop.wait(LOOK_EVERY_S)
    return 0


def under_way(daemon: Child, control_path: Path) -> bool:
    """Whether a daemon has found all it needs: it answers, or lives longer than it needs to say no.

    Pages over one that refuses to start would only hide its line.
    """
    lived_s = time.monotonic() - daemon.started_s
    if daemon.process is None or daemon.code() is not None or lived_s < LEAST_LIFE_S:
        return False
    if lived_s > LONG_LIFE_S:
        return True
    try:
        ask(control_path, {"do": "now"})
    except DeviceError:
        return False
    return True


def stopped(record_path: Path) -> str:
    """The last line, after somebody has stopped it all."""
    kept = f"record kept at {record_path}" if record_path.exists() else "nothing was recorded"
    return f"Stopped; {kept}"


def end(children: Sequence[Child]) -> None:
    """Ask the children to end, in order; kill what does not within the grace time."""
    for child in children:
        if child.process is not None and child.process.poll() is None:
            child.process.terminate()
    for child in children:
        if child.process is not None:
            try:
                child.process.wait(GRACE_S)
            except subprocess.TimeoutExpired:
                child.process.kill()
                child.process.wait()
