"""A rehearsal's folder and its processes: a simulated board, the daemon over it, the pages."""

from __future__ import annotations

import importlib.util
import json
import socket
import subprocess
import sys
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from pathlib import Path

from monitor.core.errors import ConfigError, DeviceError


@dataclass(frozen=True, slots=True)
class Rehearsal:
    """What a rehearsal is made of. folder holds all of it: delete the folder and it is gone."""

    folder: Path
    scenario: str
    seed: int
    history_s: float
    port: int
    started: datetime

    @property
    def site_path(self) -> Path:
        """The site file that is written for it."""
        return self.folder / "site.toml"

    @property
    def device(self) -> Path:
        """Link to the simulated board's pseudo-terminal."""
        return self.folder / "board"

    @property
    def record_path(self) -> Path:
        """The record, marked as simulated."""
        return self.folder / "record.db"


def data_folder() -> Path:
    """The simulators' data, found without importing them."""
    spec = importlib.util.find_spec("simulators")
    if spec is None or not spec.submodule_search_locations:
        raise ConfigError("the simulators are not installed; install fieldsill as a whole")
    return Path(next(iter(spec.submodule_search_locations))) / "data"


def scenarios() -> list[str]:
    """Names of the scenes that are shipped; none where the simulators are not installed."""
    try:
        return sorted(path.stem for path in (data_folder() / "scenes").glob("*.toml"))
    except ConfigError:
        return []


def free_port(host: str = "127.0.0.1") -> int:
    """A port of the loopback that nothing listens on now."""
    with socket.socket() as probe:
        probe.bind((host, 0))
        return int(probe.getsockname()[1])


def write_site(rehearsal: Rehearsal) -> None:
    """Make the folder and its site file."""
    rehearsal.folder.mkdir(parents=True, exist_ok=False, mode=0o700)
    start = rehearsal.started - timedelta(seconds=rehearsal.history_s)
    data = data_folder()
    text = (data / "rehearsal-site.toml.in").read_text(encoding="utf-8")
    filled = {
        "device": str(rehearsal.device),
        "record": str(rehearsal.record_path),
        "port": str(rehearsal.port),
        "clock_start": rfc3339(start),
        "calibration": str(data / "board-calibration.toml"),
    }
    for name, value in filled.items():
        text = text.replace("{" + name + "}", value)
    rehearsal.site_path.write_text(text, encoding="utf-8")


def rfc3339(moment: datetime) -> str:
    """UTC to the second."""
    return moment.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")


def start_board(rehearsal: Rehearsal) -> subprocess.Popen[str]:
    """Start the simulated board and wait until its device is there."""
    start = rehearsal.started - timedelta(seconds=rehearsal.history_s)
    arguments = ["--scenario", rehearsal.scenario, "--seed", str(rehearsal.seed)]
    arguments += ["--link", str(rehearsal.device), "--history", f"{rehearsal.history_s:g}"]
    arguments += ["--start-utc", rfc3339(start), "--truth", str(rehearsal.folder / "truth.csv")]
    arguments += ["--control", str(rehearsal.folder / "faults.sock"), "--with-parent"]
    board = subprocess.Popen(
        [sys.executable, "-P", "-m", "simulators", "board", *arguments],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    assert board.stdout is not None
    assert board.stderr is not None
    line = board.stdout.readline()
    if not line:
        lines = board.stderr.read().strip().splitlines() or ["no message"]
        board.wait()
        kind = ConfigError if board.returncode == 2 else DeviceError
        raise kind(f"the simulated board did not start: {lines[-1]}")
    json.loads(line)
    return board
