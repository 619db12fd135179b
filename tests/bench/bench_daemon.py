"""The daemon alone on a live line: ten readings a second on three axes, as on a small board.

Memory and processor time are read from /proc. Bytes written are counted at the block device of a
filesystem of its own (ext4 with 4 KiB blocks on a loop device, its journal included, mounted as
hardware/deploy/README.md advises) where one may be mounted, else by the kernel's account of the
process, which leaves the journal out. Until the record's log has its full length, after about
forty minutes, each commit also lengthens a file, which costs more: hence the long warm-up.

FIELDSILL_BENCH_S, FIELDSILL_BENCH_WARM_UP_S: seconds measured, and waited before.
FIELDSILL_BENCH_MOUNT: other options of mount(8), for example "defaults".
"""

from __future__ import annotations

import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from tests.bench.measure import Figure

MEASURE_S = float(os.environ.get("FIELDSILL_BENCH_S", "600"))
WARM_UP_S = float(os.environ.get("FIELDSILL_BENCH_WARM_UP_S", "2400"))
MOUNT = os.environ.get("FIELDSILL_BENCH_MOUNT", "noatime,lazytime,commit=60")
DAY_S = 86_400
SECTOR_BYTES = 512
DATA = Path(__file__).parents[2] / "simulators" / "data"
AIM_RSS_MIB, AIM_CPU_PERCENT, AIM_MB_A_DAY = 60.0, 2.0, 110.0


@contextmanager
def own_filesystem(folder: Path) -> Iterator[tuple[Path, Path | None]]:
    """A folder to write in, and the statistics of the block device below it if it is its own."""
    image, place = folder / "image", folder / "disk"
    place.mkdir()
    with image.open("wb") as file:
        file.truncate(256 << 20)
    made = subprocess.run(
        ["mkfs.ext4", "-q", "-b", "4096", image], capture_output=True, check=False
    )
    mounted = made.returncode == 0 and _mounted(image, place)
    if not mounted:
        yield place, None
        return
    try:
        yield place, Path("/sys/dev/block") / _device_number(place) / "stat"
    finally:
        subprocess.run(["umount", place], check=True)


def _mounted(image: Path, place: Path) -> bool:
    command = ["mount", "-o", f"loop,{MOUNT}", image, place]
    return subprocess.run(command, capture_output=True, check=False).returncode == 0


def _device_number(place: Path) -> str:
    number = place.stat().st_dev
    return f"{os.major(number)}:{os.minor(number)}"


def site_file(folder: Path, disk: Path) -> Path:
    """The rehearsal's site, but on the machine's own clock."""
    text = (DATA / "rehearsal-site.toml.in").read_text()
    clock = 'clock = "board"\nclock_start = "{clock_start}"'
    values = {
        clock: 'clock = "arrival"',
        "{device}": str(folder / "board"),
        "{record}": str(disk / "record.db"),
        "{port}": "0",
        "{calibration}": str(DATA / "board-calibration.toml"),
    }
    for old, new in values.items():
        text = text.replace(old, new)
    (folder / "site.toml").write_text(text)
    return folder / "site.toml"


@contextmanager
def running(*arguments: str) -> Iterator[subprocess.Popen[bytes]]:
    """A process of ours, ended afterwards."""
    process = subprocess.Popen(
        [sys.executable, "-m", *arguments], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
    )
    try:
        yield process
    finally:
        process.terminate()
        process.wait(20)


def cpu_s(pid: int) -> float:
    """User and system time of a process, s."""
    fields = Path(f"/proc/{pid}/stat").read_text().rsplit(")", 1)[1].split()
    return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")


def rss_mib(pid: int) -> float:
    """Resident memory of a process, MiB."""
    for line in Path(f"/proc/{pid}/status").read_text().splitlines():
        if line.startswith("VmRSS:"):
            return int(line.split()[1]) / 1024
    raise ValueError(f"process {pid} has no resident memory: it has ended")


def written_bytes(pid: int, stat: Path | None) -> int:
    """Bytes that have gone to the block device."""
    os.sync()
    if stat is not None:
        return int(stat.read_text().split()[6]) * SECTOR_BYTES
    for line in Path(f"/proc/{pid}/io").read_text().splitlines():
        if line.startswith("write_bytes:"):
            return int(line.split()[1])
    raise ValueError("the kernel keeps no account of written bytes")


def bench_daemon() -> Iterator[Figure]:
    """Resident memory, share of one core, bytes written a day."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        with own_filesystem(folder) as (disk, stat):
            site = site_file(folder, disk)
            link = str(folder / "board")
            with (
                running("simulators", "board", "--link", link, "--rate", "10"),
                running("monitor", "measure", "--site", str(site)) as daemon,
            ):
                time.sleep(WARM_UP_S)
                cpu, written, began = (
                    cpu_s(daemon.pid),
                    written_bytes(daemon.pid, stat),
                    time.time(),
                )
                time.sleep(MEASURE_S)
                spent_s = time.time() - began
                cpu = cpu_s(daemon.pid) - cpu
                written = written_bytes(daemon.pid, stat) - written
                rss = rss_mib(daemon.pid)
    where = f"at the block device ({MOUNT})" if stat else "by the kernel's account"
    yield Figure("resident memory", rss, "MiB", reference=AIM_RSS_MIB, reference_name="aim")
    percent = 100 * cpu / spent_s
    yield Figure("share of one core", percent, "%", reference=AIM_CPU_PERCENT, reference_name="aim")
    a_day = written / spent_s * DAY_S / 1e6
    yield Figure(
        f"written a day {where}", a_day, "MB", reference=AIM_MB_A_DAY, reference_name="aim"
    )
