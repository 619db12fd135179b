"""The setup script on machines that lack something: one line that says what, and no mess.

The machine is a folder of stand-in commands that is the whole search path.
"""

from __future__ import annotations

import shutil
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest

from tests.conventions import tree

TOOLS = ("sh", "dirname", "cat", "cksum", "mktemp", "rm", "tail", "env")
GOOD_PYTHON = "exit 0"
Machine = Callable[..., subprocess.CompletedProcess[str]]


@pytest.fixture
def machine(tmp_path: Path) -> Machine:
    """Runs the script's task "run" or "test" where only the stand-ins given exist."""
    house, bin_folder = tmp_path / "house", tmp_path / "bin"
    (house / "hardware").mkdir(parents=True)
    bin_folder.mkdir()
    script = house / "hardware/setup.sh"
    shutil.copy(tree.ROOT / "hardware/setup.sh", script)
    for tool in TOOLS:
        (bin_folder / tool).symlink_to(shutil.which(tool) or tool)

    def run(task: str = "run", **stand_ins: str) -> subprocess.CompletedProcess[str]:
        for name, body in {"uname": "echo Linux", "id": "echo 1000", **stand_ins}.items():
            command = bin_folder / name
            command.write_text(f"#!{bin_folder}/sh\n{body}\n", encoding="utf-8")
            command.chmod(0o755)
        done = subprocess.run(
            [bin_folder / "sh", script, task],
            env={"PATH": str(bin_folder)},
            stdin=subprocess.DEVNULL,
            capture_output=True,
            text=True,
        )
        assert not (house / ".venv").exists()
        return done

    return run


def assert_one_line(done: subprocess.CompletedProcess[str], *words: str) -> None:
    """Exit code 3 and one line on stderr that holds the words."""
    assert done.returncode == 3
    (line,) = done.stderr.splitlines()
    assert line.startswith("fieldsill: ")
    for word in words:
        assert word in line


def test_other_systems_get_one_line(machine: Machine) -> None:
    assert_one_line(machine(uname="echo Elsewhere"), "needs Linux; this is Elsewhere")


def test_old_python_gets_one_line(machine: Machine) -> None:
    old = 'case "$1" in --version) echo "Python 3.9.2";; *) exit 1;; esac'
    assert_one_line(machine(python3=old), "needs Python 3.11", "Python 3.9.2")


def test_newer_python_beside_an_old_one_is_found(machine: Machine) -> None:
    newer = machine(python3="exit 1", **{"python3.12": GOOD_PYTHON, "make": ""})
    assert "needs Python" not in newer.stderr
    assert "from requirements.lock" in newer.stdout


def test_32_bit_python_gets_one_line(machine: Machine) -> None:
    short = 'case "$2" in *maxsize*) exit 1;; esac'
    assert_one_line(machine(python3=short), "needs a 64-bit system")


def test_without_root_and_sudo_the_missing_packages_are_named(machine: Machine) -> None:
    done = machine(**{"apt-get": "echo called >&2"})
    assert_one_line(done, "install as root", "apt-get install python3 python3-venv")


def test_missing_venv_is_named_alone(machine: Machine) -> None:
    bare = 'case "$2" in *ensurepip*) exit 1;; esac'
    done = machine(python3=bare, **{"apt-get": "exit 1"})
    assert_one_line(done, "apt-get install python3-venv")


def test_tests_also_want_make_a_browser_and_strangers_to_our_formats(machine: Machine) -> None:
    done = machine("test", python3=GOOD_PYTHON, **{"apt-get": "exit 1"})
    assert_one_line(done, "apt-get install make sqlite3 chromium rtl-433")


def test_a_machine_without_apt_is_told_so(machine: Machine) -> None:
    assert_one_line(machine(), "no apt-get", "python3 python3-venv")


def test_a_failing_install_shows_what_apt_said(machine: Machine) -> None:
    apt_get = 'case "$*" in *install*) echo no room; exit 100;; esac'
    done = machine(id="echo 0", **{"apt-get": apt_get})
    assert done.returncode == 3
    assert done.stderr.splitlines() == [
        "no room",
        "fieldsill: could not install; install as root, then repeat: "
        "apt-get install python3 python3-venv",
    ]


def test_an_unknown_task_is_refused(machine: Machine) -> None:
    assert_one_line(machine("fly"), "usage")
