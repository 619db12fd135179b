"""A stranger's program receives from the simulated receiver: one end of the wire is not ours.

rtl_433 22.11 is a general-purpose receiver program from Debian (package rtl-433). It asks for a
rate, a gain and a frequency, and writes what comes into a file.
"""

from __future__ import annotations

import shutil
import subprocess
from pathlib import Path

import numpy as np
import pytest

from tests.simulators.radio import band_dbfs, complex_of, radio

PROGRAM = shutil.which("rtl_433")
SAMPLES = 2_000_000
RATE = 1_024_000

pytestmark = pytest.mark.skipif(
    PROGRAM is None, reason="no rtl_433: apt-get install rtl-433 (a foreign client of the stream)"
)


def _received(folder: Path, port: int, *more: str) -> bytes:
    got = folder / "got.cu8"
    command = [str(PROGRAM), "-d", f"rtl_tcp:127.0.0.1:{port}", "-f", "466.2M", "-s", str(RATE)]
    command += ["-g", "20", "-n", str(SAMPLES), "-w", str(got), *more]
    subprocess.run(command, cwd=folder, capture_output=True, timeout=60)
    return got.read_bytes() if got.exists() else b""


def test_a_foreign_program_tunes_us_and_receives_every_byte_intact(tmp_path: Path) -> None:
    with radio(tmp_path) as served:
        got = _received(tmp_path, served.address[1])
        state = served.state()
        sent = served.sent.read_bytes()
    assert len(got) == 2 * SAMPLES
    assert got == sent[: len(got)]
    assert (state["rate_hz"], state["centre_hz"]) == (RATE, 466_200_000)
    assert (state["manual"], state["gain_db"]) == (True, 19.7)
    codes = [code for code, _ in state["commands"]]
    assert {1, 2, 3, 4} <= set(codes)

    # the carrier at 466.23 MHz stands 30 kHz above the centre, less 2 ppm; -45 + 19.7 + 12 dBFS
    late = complex_of(got[-2 * 500_000 :])
    level_dbfs = band_dbfs(late, RATE, 28_500.0, 29_500.0)
    assert level_dbfs == pytest.approx(-13.3, abs=0.1)
    assert np.abs(np.mean(late)) < 0.01


def test_a_foreign_program_refuses_a_header_that_is_none_of_the_protocols(tmp_path: Path) -> None:
    with radio(tmp_path, "--fault", "0:mislabel") as served:
        assert _received(tmp_path, served.address[1], "-T", "5") == b""
        assert served.state()["connections"] == 1
