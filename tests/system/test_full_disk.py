"""A disk that is full: the daemon measures on, raises an alarm, ends when told, starts again."""

from __future__ import annotations

import subprocess
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.system.commands import start, wait_for
from tests.system.desk import Desk, live


@pytest.fixture
def desk(tmp_path: Path) -> Iterator[Desk]:
    disk = tmp_path / "disk"
    disk.mkdir()
    command = ["mount", "-t", "tmpfs", "-o", "size=2m", "none", disk]
    if subprocess.run(command, capture_output=True, check=False).returncode:
        pytest.skip("a small filesystem may not be mounted here: a full disk is not tested")
    try:
        with live(tmp_path, disk) as made:
            yield made
    finally:
        subprocess.run(["umount", "-l", disk], check=True)


def fill(disk: Path) -> None:
    """Leave no byte free."""
    ballast = disk / f"ballast{len(list(disk.iterdir()))}"
    with ballast.open("wb", buffering=0) as file:
        try:
            while file.write(b"0" * 4096):
                pass
        except OSError:
            pass


@pytest.mark.timeout(180)
def test_measuring_goes_on_and_the_daemon_ends_and_starts(desk: Desk) -> None:
    with desk.measuring() as daemon:
        wait_for(lambda: desk.readings() >= 20)
        fill(desk.disk)
        wait_for(lambda: desk.now().get("record_error"), 60)
        assert desk.now()["last_reading_age_s"] < 3
        daemon.terminate()
        assert daemon.wait(25) in (0, 3)
    again = start("measure", "--site", desk.folder / "site.toml")
    try:
        wait_for(lambda: (desk.now().get("last_reading_age_s") or 9) < 3, 30)
        fill(desk.disk)
        wait_for(lambda: "full" in desk.now().get("record_error", ""), 60)
        wait_for(lambda: "record" in {alarm["key"] for alarm in desk.now()["alarms"]}, 60)
        before = desk.now()["boot_ns"]
        for each in desk.disk.glob("ballast*"):
            each.unlink()
        wait_for(lambda: not desk.now().get("record_error"), 60)
        wait_for(lambda: desk.readings() > 100, 60)
        assert desk.now()["boot_ns"] > before
    finally:
        again.terminate()
        again.wait(25)
