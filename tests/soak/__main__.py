"""An hour of samples at 2.4 MS/s from the simulated receiver, the daemon being asked all the while.

python -m tests.soak [--minutes N]. Exit 1 where a sample is lost unnoticed or memory grows. Samples
are dropped on purpose now and then; what the client counts must agree within what it can tell, two
buffers of 262,144 bytes for each loss.
"""

from __future__ import annotations

import argparse
import json
import signal
import subprocess
import sys
import tempfile
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from monitor import control
from monitor.core.errors import DeviceError
from monitor.record.reader import Record

EXAMPLES = Path("hardware/examples")
RATE_HZ = 2_400_000
LOSE_EVERY_MIN = 10
LOSE_SAMPLES = 1_000_000
BUFFER_SAMPLES = 131_072
ASK_S = 0.2
SETTLED_MIN = 5
GROWTH = 1.05
"""Largest resident memory at the end over that after SETTLED_MIN minutes."""
PAUSE = threading.Event()


@contextmanager
def running(folder: Path) -> Iterator[subprocess.Popen[bytes]]:
    """The receiver's server and the daemon, ended in the end."""
    radio = subprocess.Popen(
        [sys.executable, "-m", "simulators", "iq", "--port", "0", "--with-parent",
         "--control", str(folder / "iq.sock")],
        stdout=subprocess.PIPE,
    )  # fmt: skip
    assert radio.stdout is not None
    port = json.loads(radio.stdout.readline())["port"]
    text = (EXAMPLES / "iq-stream-site.toml").read_text()
    text = text.replace("port = 1234", f"port = {port}")
    (folder / "site.toml").write_text(text.replace("simulated = false", "simulated = true"))
    body = (EXAMPLES / "iq-stream-calibration.toml").read_text()
    (folder / "iq-stream-calibration.toml").write_text(body)
    daemon = subprocess.Popen(
        [sys.executable, "-m", "monitor", "measure", "--site", str(folder / "site.toml")]
    )
    try:
        yield daemon
    finally:
        daemon.send_signal(signal.SIGTERM)
        daemon.wait(30)
        radio.kill()
        radio.wait()


def device(folder: Path) -> dict[str, Any]:
    """What the daemon says of its receiver; empty before it answers."""
    try:
        reply: dict[str, Any] = control.ask(folder / "watch.sock", {"do": "now"})
    except DeviceError:
        return {}
    found: dict[str, Any] = reply["now"]["device"]
    return found


def rss_mib(pid: int) -> float:
    """Resident memory of a process and of those that it has started, MiB."""
    children = Path(f"/proc/{pid}/task/{pid}/children").read_text().split()
    pages = [
        int(Path(f"/proc/{p}/statm").read_text().split()[1]) for p in (pid, *map(int, children))
    ]
    return sum(pages) * 4096 / 2**20


def minute(folder: Path, daemon: subprocess.Popen[bytes]) -> dict[str, Any]:
    """A minute of asking; the last answer."""
    said: dict[str, Any] = {}
    for _ in range(round(60 / ASK_S)):
        said = device(folder) or said
        PAUSE.wait(ASK_S)
        assert daemon.poll() is None, "the daemon ended"
    return said


def readings(folder: Path) -> int:
    """Readings in the record."""
    with Record.open(folder / "watch.db") as record:
        return sum(batch.n for boot in record.boots() for batch in record.raw_batches(boot.boot))


def drop(folder: Path) -> None:
    """Have the server drop samples."""
    words = ["lose", "--count", str(LOSE_SAMPLES)]
    command = [sys.executable, "-m", "simulators", "fault", "--control", str(folder / "iq.sock")]
    subprocess.run([*command, *words], check=True, capture_output=True)


def say(line: str) -> None:
    """A line at once."""
    sys.stdout.write(line + "\n")
    sys.stdout.flush()


def main() -> int:
    """Run, print a line a minute, judge."""
    parser = argparse.ArgumentParser(prog="python -m tests.soak")
    parser.add_argument("--minutes", type=int, default=60)
    minutes = parser.parse_args().minutes
    memory: list[float] = []
    lost = losses = 0
    with tempfile.TemporaryDirectory() as name, running(Path(name)) as daemon:
        folder = Path(name)
        for at in range(1, minutes + 1):
            said = minute(folder, daemon)
            memory.append(rss_mib(daemon.pid))
            say(f"{at:>3} min  {memory[-1]:6.1f} MiB  {said.get('counters')}")
            if at % LOSE_EVERY_MIN == SETTLED_MIN and at + 1 < minutes:
                drop(folder)
                losses += 1
        lost = int(said["counters"]["lost_samples"])
        kept = readings(folder)
    told = abs(lost - losses * LOSE_SAMPLES) <= 2 * BUFFER_SAMPLES * max(losses, 1)
    settled = memory[min(SETTLED_MIN, len(memory)) - 1]
    flat = memory[-1] <= GROWTH * settled
    say(f"dropped on purpose {losses * LOSE_SAMPLES}, counted {lost}; told: {told}")
    say(f"memory {settled:.1f} to {memory[-1]:.1f} MiB, flat: {flat}; {kept} readings kept")
    return 0 if told and flat else 1


if __name__ == "__main__":
    sys.exit(main())
