"""fieldsill serve as a process over a real record and a real control socket."""

from __future__ import annotations

import json
import re
import signal
import subprocess
import sys
import urllib.error
import urllib.request
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import numpy as np
import pytest

from monitor import control
from monitor.cli.serve import is_loopback
from monitor.record.types import Commit
from tests.cli.command import run
from tests.dashboard.fakes import alarm, snapshot
from tests.record import making
from tests.record.making import MINUTE, UTC0


def _record(folder: Path) -> Path:
    """Ninety minutes of invented averages, with a gap from minute 30 to 50."""
    path = folder / "record.db"
    writer = making.writer_of(path)
    boot = writer.begin_boot("a", "rehearsal")
    writer.commit(boot, making.fix())
    minutes = np.r_[1:31, 51:91]
    ratio = 0.1 + 0.3 * (minutes == 70)
    e2 = 1600.0 * ratio
    end_ns = minutes * MINUTE
    writer.commit(boot, Commit(
        raw=making.raw(0.0, 90 * 60), blocks=making.blocks(0, 180),
        fields=making.field_rows(end_ns, e2, averaging_s=1800),
        exposures=making.exposure_rows(end_ns, ratio, scope=0),
    ))  # fmt: skip
    writer.commit(boot, Commit(blocks=making.blocks(50 * 60, 240)))
    writer.close()
    return path


@contextmanager
def _served(*arguments: str) -> Iterator[tuple[str, subprocess.Popen[str]]]:
    process = subprocess.Popen(
        [sys.executable, "-m", "monitor", "serve", "--port", "0", *arguments],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    )  # fmt: skip
    try:
        assert process.stdout is not None
        found = re.search(r"Pages: (\S+)/$", process.stdout.readline().strip())
        assert found, process.stderr.read() if process.stderr else ""
        yield found.group(1), process
    finally:
        process.terminate()
        process.communicate(timeout=10)


def _get(address: str) -> tuple[int, str]:
    try:
        with urllib.request.urlopen(address, timeout=10) as answer:
            return answer.status, answer.read().decode()
    except urllib.error.HTTPError as error:
        return error.code, error.read().decode()


def test_over_a_record_without_a_daemon(tmp_path: Path) -> None:
    record = _record(tmp_path)
    with _served("--record", str(record)) as (address, process):
        assert address.startswith("http" + "://127.0.0.1:")
        code, page = _get(address)
        assert code == 200
        assert "No measurement since 2023-11-14 23:43:19 UTC; this says nothing" in page
        assert "Invented data." in page
        span = "from=2023-11-14T22:13:20Z&to=2023-11-14T23:43:20Z"
        code, text = _get(f"{address}/api/history?averaging=1800&{span}")
        found = json.loads(text)
        assert len(found["end_utc"]) == 70
        assert max(found["exposure_ratios"][0]["mean"]) == pytest.approx(0.4)
        assert found["gaps"] == [
            {"start_utc": "2023-11-14T22:43:20Z", "end_utc": "2023-11-14T23:03:20Z"}
        ]
        code, page = _get(f"{address}/history?averaging=1800&show=ratio&{span}")
        said = "0.40 of the limit (40 %), ending 2023-11-14 23:23 UTC"
        assert f"Largest thirty-minute average: {said}" in page
        process.send_signal(signal.SIGTERM)
        assert process.wait(timeout=10) == 0


def test_the_daemons_socket_answers_and_its_end_is_told_at_once(tmp_path: Path) -> None:
    record = _record(tmp_path)
    asked: list[dict[str, object]] = []

    def answer(request: dict[str, object]) -> dict[str, object]:
        if request["do"] != "now":
            asked.append(request)
            return {}
        return {"now": snapshot(0.72, alarms=[alarm("unacknowledged")])}

    server = control.Server(record.with_suffix(".sock"), answer)
    try:
        with _served("--record", str(record)) as (address, _):
            page = _get(address)[1]
            assert "Over an alert level" in page
            form = dict(re.findall(r'name="(token|key)" value="([^"]+)"', page))
            data = f"token={form['token']}&key={form['key']}&do=acknowledge".encode()
            with urllib.request.urlopen(f"{address}/alarms", data, timeout=10) as done:
                assert done.status == 200
            assert asked == [{"do": "acknowledge", "key": "half"}]
            server.close()
            assert "No measurement since" in _get(address)[1]
            assert _get(f"{address}/health")[0] == 503
    finally:
        if record.with_suffix(".sock").exists():
            server.close()


def test_a_record_that_is_none_is_one_clear_line(tmp_path: Path) -> None:
    path = tmp_path / "letter.db"
    path.write_text("dear reader", encoding="utf-8")
    with _served("--record", str(path)) as (address, _):
        assert "this says nothing about the field" in _get(address)[1]
        code, page = _get(f"{address}/history")
        assert code == 503
        assert re.search(r'<p class="wrong">[^<]*letter\.db[^<]*</p>', page)


def test_a_port_that_is_taken_names_the_remedy(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    with _served("--record", str(tmp_path / "none.db")) as (address, _):
        port = address.rpartition(":")[2]
        answer = run(capsys, ["serve", "--record", tmp_path / "none.db", "--port", port])
    assert answer.code == 3
    assert "--port (0 takes a free one)" in answer.one_line


def test_a_missing_site_file_is_wrong_input(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    answer = run(capsys, ["serve", "--site", tmp_path / "none.toml"])
    assert answer.code == 2
    assert "none.toml" in answer.one_line


def test_an_address_beyond_this_machine_is_warned_of_in_one_line(tmp_path: Path) -> None:
    with _served("--record", str(tmp_path / "none.db"), "--host", "0.0.0.0") as (_, process):
        process.terminate()
        _, errors = process.communicate(timeout=10)
    (line,) = errors.splitlines()
    assert "can be reached by other machines" in line


@pytest.mark.parametrize(
    ("host", "loopback"),
    [
        ("127.0.0.1", True), ("127.9.9.9", True), ("::1", True), ("localhost", True),
        ("0.0.0.0", False), ("::", False), ("192.0.2.7", False), ("box.example", False),
    ],
)  # fmt: skip
def test_what_counts_as_this_machine(host: str, loopback: bool) -> None:
    assert is_loopback(host) == loopback


def test_utc_of_the_record_is_what_the_test_expects() -> None:
    assert UTC0 == 1_700_000_000 * 10**9
