"""The command line as its user runs it."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Callable, Mapping
from pathlib import Path

import pytest


def fieldsill(*arguments: object, timeout_s: float = 100) -> subprocess.CompletedProcess[str]:
    """Run a command to its end."""
    return subprocess.run(
        [sys.executable, "-m", "monitor", *map(str, arguments)],
        capture_output=True,
        text=True,
        timeout=timeout_s,
        check=False,
    )


def start(*arguments: object) -> subprocess.Popen[bytes]:
    """Start a command and leave it running."""
    return subprocess.Popen([sys.executable, "-m", "monitor", *map(str, arguments)])


def wait_for(what: Callable[[], object], timeout_s: float = 30) -> object:
    """The first true answer of what; the test fails where none comes in time."""
    until = time.monotonic() + timeout_s
    while time.monotonic() < until:
        found = what()
        if found:
            return found
        time.sleep(0.05)
    return pytest.fail(f"nothing within {timeout_s} s")


def recordings() -> Path:
    """The folder of real recordings; the test is skipped where it is not given."""
    folder = os.environ.get("FIELDSILL_RECORDINGS", "")
    if not folder:
        pytest.skip("FIELDSILL_RECORDINGS is not set: no real recordings here")
    return Path(folder)


def filled(text: str, values: Mapping[str, str]) -> str:
    """text with each value put in place of what stands there; all must be found."""
    for old, new in values.items():
        assert old in text
        text = text.replace(old, new)
    return text
