"""A simulated board on a pseudo-terminal, ten readings a second, and a site file over it."""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

from monitor import control
from monitor.core.errors import DeviceError
from monitor.record.reader import Record
from tests.system.commands import filled, start, wait_for

DATA = Path(__file__).parents[2] / "simulators" / "data"


@dataclass
class Desk:
    """A simulated board at ten readings a second, and a site file over it."""

    folder: Path
    disk: Path

    def now(self) -> dict:
        try:
            return control.ask(self.disk / "record.sock", {"do": "now"})["now"]
        except DeviceError:
            return {}

    def fault(self, *arguments: object) -> None:
        command = [sys.executable, "-m", "simulators", "fault", "--control", self.folder / "faults"]
        subprocess.run([*map(str, command), *map(str, arguments)], check=True, capture_output=True)

    @contextmanager
    def measuring(self) -> Iterator[subprocess.Popen[bytes]]:
        daemon = start("measure", "--site", self.folder / "site.toml")
        try:
            wait_for(lambda: (self.now().get("device") or {}).get("connected"))
            yield daemon
        finally:
            daemon.terminate()
            daemon.wait(20)

    def readings(self) -> int:
        with Record.open(self.disk / "record.db") as record:
            return sum(b.n for boot in record.boots() for b in record.raw_batches(boot.boot))


@contextmanager
def live(folder: Path, disk: Path) -> Iterator[Desk]:
    """A simulated board and a site file in folder, the record on disk."""
    text = (DATA / "rehearsal-site.toml.in").read_text()
    values = {
        "{device}": str(folder / "board"),
        "{record}": str(disk / "record.db"),
        "{port}": "0",
        "{calibration}": str(DATA / "board-calibration.toml"),
        'clock = "board"\nclock_start = "{clock_start}"\n': 'clock = "arrival"\n',
        "after_s = 60": "after_s = 3",
        "commit_s = 10": "commit_s = 1",
    }
    (folder / "site.toml").write_text(filled(text, values))
    board = subprocess.Popen(
        [sys.executable, "-m", "simulators", "board", "--link", folder / "board", "--rate", "10",
         "--control", folder / "faults"],
        stdout=subprocess.PIPE, text=True,
    )  # fmt: skip
    assert board.stdout is not None
    assert json.loads(board.stdout.readline())["simulated"] is True
    yield Desk(folder, disk)
    board.terminate()
    board.wait(10)
