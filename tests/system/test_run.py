"""Both halves under one command: pages after measuring, one that ends comes back, the last word."""

from __future__ import annotations

import json
import re
import signal
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.system.commands import fieldsill, filled, wait_for

DATA = Path(__file__).parents[2] / "simulators" / "data"


@pytest.fixture
def folder(tmp_path: Path) -> Iterator[Path]:
    """A site file over a simulated board at ten readings a second."""
    text = (DATA / "rehearsal-site.toml.in").read_text()
    values = {
        "{device}": str(tmp_path / "board"),
        "{record}": str(tmp_path / "record.db"),
        "{port}": "0",
        "{calibration}": str(DATA / "board-calibration.toml"),
        'clock = "board"\nclock_start = "{clock_start}"\n': 'clock = "arrival"\n',
    }
    (tmp_path / "site.toml").write_text(filled(text, values))
    board = subprocess.Popen(
        [sys.executable, "-m", "simulators", "board", "--link", tmp_path / "board", "--rate", "10"],
        stdout=subprocess.PIPE, text=True,
    )  # fmt: skip
    assert board.stdout is not None
    assert json.loads(board.stdout.readline())["simulated"] is True
    yield tmp_path
    board.terminate()
    board.wait(10)


def children(pid: int) -> list[int]:
    """Process ids of the children, the oldest first."""
    return [int(word) for word in Path(f"/proc/{pid}/task/{pid}/children").read_text().split()]


def test_run_brings_measure_back_and_ends_with_a_word(folder: Path) -> None:
    out, err = folder / "out", folder / "err"
    with out.open("w") as to_out, err.open("w") as to_err:
        run = subprocess.Popen(
            [sys.executable, "-m", "monitor", "run", "--site", folder / "site.toml"],
            stdout=to_out, stderr=to_err,
        )  # fmt: skip
    try:
        wait_for(lambda: "Pages: " in out.read_text())
        measure, serve = children(run.pid)
        subprocess.run(["kill", str(measure)], check=True)
        wait_for(lambda: err.read_text() == "fieldsill: measure ended; again in 1 s\n")
        wait_for(lambda: len(children(run.pid)) == 2)
        assert serve in children(run.pid)
        assert measure not in children(run.pid)
    finally:
        run.send_signal(signal.SIGINT)
        code = run.wait(40)
    assert code == 0
    assert out.read_text().splitlines()[-1] == f"Stopped; record kept at {folder / 'record.db'}"
    assert len(re.findall("Pages: ", out.read_text())) == 1


def test_check_hears_the_board(folder: Path) -> None:
    done = fieldsill("check", "--site", folder / "site.toml")
    assert done.returncode == 0, done.stderr
    line = done.stdout.splitlines()[-1]
    assert re.fullmatch(
        r"ok +sensor +board rehearsal-board, firmware \S+, 12 bits; simulated, \S+ readings a"
        r" second",
        line,
    )
    silent = fieldsill("check", "--site", folder / "site.toml", "--listen", "0")
    assert "readings a second" not in silent.stdout
    real = folder / "real.toml"
    real.write_text(
        filled((folder / "site.toml").read_text(), {"simulated = true": "simulated = false"})
    )
    heard = fieldsill("check", "--site", real).stdout.splitlines()[-1]
    assert re.match(r"note +sensor +no reading came in 3 s: .*says that it is simulated", heard)
    assert not (folder / "record.db").exists()


def test_a_rehearsal_says_its_address_twice_and_where_its_record_is(tmp_path: Path) -> None:
    folder, out, err = tmp_path / "new", tmp_path / "out", tmp_path / "err"
    with out.open("w") as to_out, err.open("w") as to_err:
        rehearse = subprocess.Popen(
            [sys.executable, "-m", "monitor", "rehearse", "--history", "60s", "--folder", folder],
            stdout=to_out, stderr=to_err,
        )  # fmt: skip
    try:
        wait_for(lambda: len(re.findall("http://", out.read_text())) == 2)
        wait_for(lambda: "written in" in out.read_text())
        _, measure, serve = children(rehearse.pid)
        subprocess.run(["kill", str(measure)], check=True)
        wait_for(lambda: "fieldsill: measure ended; again in 1 s\n" in err.read_text())
        wait_for(lambda: len(set(children(rehearse.pid)) - {measure}) == 3)
        assert serve in children(rehearse.pid)
    finally:
        rehearse.terminate()
        code = rehearse.wait(40)
    assert code == 0
    lines = out.read_text().splitlines()
    assert lines[-1] == f"Stopped; record kept at {folder / 'record.db'}"
    assert len([line for line in lines if "http://" in line]) == 2
