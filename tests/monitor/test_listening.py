"""What a check hears on a line: a board, a silent one, lines that hold nothing, a dead channel."""

from __future__ import annotations

import shutil
import threading
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
import pytest

from monitor import control
from monitor.checks import Finding
from monitor.config import Site, load_site
from monitor.core.readings import MISSING, NS_PER_S, Batch, DeviceStatus, empty_batch
from monitor.listening import heard, left_alone

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"


@dataclass
class Line:
    """A front end with its own time: each read takes its time-out, n readings come with it."""

    n: int
    counts: tuple[int, int, int] = (1, 2, 3)
    counters: dict[str, int] = field(default_factory=dict)
    now_ns: int = 0
    owns_clock = False
    clock_fix = None

    def boot_ns(self) -> int:
        return self.now_ns

    def read(self, timeout_s: float) -> Batch:
        began_ns = self.now_ns
        self.now_ns += round(timeout_s * NS_PER_S)
        if not self.n:
            return empty_batch(3, self.now_ns)
        times_ns = np.linspace(began_ns, self.now_ns, self.n + 1).astype(np.int64)[1:]
        counts = np.tile(np.array(self.counts, np.int32), (self.n, 1))
        return Batch(times_ns, counts, np.zeros(self.n, np.int32), self.now_ns)

    def status(self) -> DeviceStatus:
        return DeviceStatus(True, "board seven", counters=self.counters)

    def close(self) -> None:
        self.now_ns = -1


def site() -> Site:
    return load_site(EXAMPLES / "detector-board-site.toml")


@pytest.mark.parametrize(
    ("line", "text", "ok"),
    [
        (Line(5), "board seven; real, 10 readings a second", True),
        (Line(5, (1, MISSING, 3)), "board seven; real, 10 readings a second; y: nothing", False),
        (Line(0), "no reading came in 3 s: board seven", False),
        (
            Line(0, counters={"lines": 7}),
            "7 lines came, none with a figure to read in 3 s: board seven",
            False,
        ),
    ],
)
def test_what_came_is_said(line: Line, text: str, ok: bool) -> None:
    assert heard(line, site(), 3.0, line.boot_ns) == Finding("sensor", text, ok)
    assert line.now_ns == 3 * NS_PER_S


def test_one_reading_has_no_rate() -> None:
    line = Line(1)
    found = heard(line, replace(site(), simulated=True), 0.25, line.boot_ns)
    assert found.text == "board seven; simulated, 1 reading in 0.25 s"


def test_a_line_that_is_measured_is_left_alone(tmp_path: Path) -> None:
    for path in EXAMPLES.glob("detector-board-*"):
        shutil.copy(path, tmp_path)
    here = load_site(tmp_path / "detector-board-site.toml")
    assert left_alone(here) is None
    asked = threading.Event()

    def answer(request: dict[str, object]) -> dict[str, object]:
        asked.set()
        return {"now": {}}

    server = control.Server(here.control_path, answer)
    try:
        found = left_alone(here)
    finally:
        server.close()
    assert asked.is_set()
    assert found == Finding("sensor", "not listened to: it is being measured; see fieldsill status")


def test_a_board_whose_clock_counts_is_left_alone() -> None:
    found = left_alone(replace(site(), sensor_options={"clock": "board"}))
    assert found is not None
    assert "not listened to: the board's own clock" in found.text
