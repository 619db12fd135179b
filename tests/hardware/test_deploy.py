"""Service units and the device rule: well formed, and they call commands that exist."""

from __future__ import annotations

import configparser
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

DEPLOY = Path("hardware/deploy")
UNITS = sorted(DEPLOY.glob("*.service"))
RECEIVER = DEPLOY / "fieldsill-receiver.service"
HALVES = [path for path in UNITS if path != RECEIVER]


class Unit(configparser.RawConfigParser):
    """Keeps the case of keys; a key may come twice, as systemd allows."""

    def __init__(self):
        super().__init__(strict=False, delimiters="=", interpolation=None)

    def optionxform(self, optionstr):
        return optionstr


def unit(path):
    parser = Unit()
    parser.read_string(path.read_text(encoding="utf-8"))
    return parser


def test_there_is_a_unit_for_each_half():
    assert [path.stem for path in HALVES] == ["fieldsill-measure", "fieldsill-pages"]


def test_the_bridge_is_started_by_the_python_that_has_the_binding():
    receiver = unit(RECEIVER)["Service"]
    assert receiver["ExecStart"] == "/usr/bin/python3 /opt/fieldsill/soapy_bridge.py $OPTIONS"
    assert (receiver["Restart"], receiver["NoNewPrivileges"]) == ("always", "yes")
    assert unit(RECEIVER)["Unit"]["StartLimitIntervalSec"] == "0"
    guide = (DEPLOY / "README.md").read_text(encoding="utf-8")
    assert "install -m 644 hardware/soapy_bridge.py /opt/fieldsill/" in guide
    assert f"`OPTIONS=--device driver=...` in\n  `{receiver['EnvironmentFile']}`" in guide


@pytest.mark.parametrize("path", HALVES, ids=lambda path: path.stem)
def test_a_unit_restarts_for_ever_and_calls_a_command_that_exists(path):
    service = unit(path)["Service"]
    assert service["Restart"] == "always"
    assert service["NoNewPrivileges"] == "yes"
    assert unit(path)["Unit"]["StartLimitIntervalSec"] == "0"
    program, command, *options = service["ExecStart"].split()
    assert program.endswith("/bin/fieldsill")
    run = subprocess.run(
        [sys.executable, "-m", "monitor", command, "--help"],
        capture_output=True,
        text=True,
        check=True,
    )
    for option in (word for word in options if word.startswith("--")):
        assert option in run.stdout


def test_the_daemon_may_ask_for_the_clocks_state_and_the_pages_reach_no_device():
    measure, pages = (unit(path)["Service"] for path in HALVES)
    assert "ProtectClock" not in measure
    assert "adjtimex" in measure["SystemCallFilter"]
    assert pages["PrivateDevices"] == "yes"
    assert "ReadWritePaths" not in pages


@pytest.mark.skipif(not shutil.which("systemd-analyze"), reason="systemd-analyze is not installed")
@pytest.mark.parametrize("path", UNITS, ids=lambda path: path.stem)
def test_systemd_finds_nothing_wrong(path, tmp_path):
    copy = tmp_path / path.name
    text = path.read_text(encoding="utf-8")
    copy.write_text(text.replace("/opt/fieldsill/bin/fieldsill", shutil.which("true")))
    run = subprocess.run(["systemd-analyze", "verify", str(copy)], capture_output=True, text=True)
    own = [line for line in run.stderr.splitlines() if path.stem in line]
    assert own == []


def test_the_rule_names_the_device_that_the_guide_promises():
    rule = (DEPLOY / "70-fieldsill.rules").read_text(encoding="utf-8")
    assert 'SYMLINK+="fieldsill-board"' in rule
    assert 'SUBSYSTEM=="tty"' in rule
