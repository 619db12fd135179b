"""Kinds by name, and that a kind loads only what it needs."""

from __future__ import annotations

import subprocess
import sys

import pytest

from hardware import KINDS, settings_for
from monitor.core.errors import ConfigError


def test_an_unknown_kind_names_the_known_ones(tmp_path):
    with pytest.raises(ConfigError) as caught:
        settings_for("crystal", {}, tmp_path)
    assert all(kind in str(caught.value) for kind in KINDS)


@pytest.mark.parametrize(("kind", "loads"), [("level_series", False), ("detector_board", True)])
def test_the_serial_library_is_loaded_only_for_serial_lines(tmp_path, kind, loads):
    (tmp_path / "a.csv").write_text("time,dbm\n0,1\n")
    options = {
        "level_series": {"file": "a.csv", "level_column": "dbm", "resolution": 0.1},
        "detector_board": {"device": "/dev/x"},
    }[kind]
    code = (
        "import sys, pathlib, hardware;"
        f"hardware.settings_for({kind!r}, {options!r}, pathlib.Path({str(tmp_path)!r}));"
        "print('serial' in sys.modules, 'scipy' in sys.modules)"
    )
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert run.stdout.split() == [str(loads), "False"]
