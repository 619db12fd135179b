"""A real browser, driven over its own debugging pipe: no port, no driver program."""

from __future__ import annotations

import base64
import fcntl
import json
import os
import select
import shutil
import subprocess
import time
from pathlib import Path
from typing import Any

import pytest

FLAGS = (
    "--headless=new", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
    "--disable-background-networking", "--disable-component-update", "--disable-sync",
    "--hide-scrollbars", "--remote-debugging-pipe",
)  # fmt: skip
NAMES = ("chromium", "chromium-browser", "google-chrome", "chrome")
PATIENCE_S = 30.0


def found_browser() -> str | None:
    """$FIELDSILL_BROWSER, else the first browser on the path."""
    named = os.environ.get("FIELDSILL_BROWSER")
    return named or next((path for name in NAMES if (path := shutil.which(name))), None)


needs_browser = pytest.mark.skipif(
    found_browser() is None,
    reason="no browser: set FIELDSILL_BROWSER, or install chromium",
)


class Browser:
    """One page of a browser with a fresh profile."""

    def __init__(self, profile: Path) -> None:
        # High numbers, so that the shell's redirections to 3 and 4 cannot overwrite one another.
        ends = [fcntl.fcntl(end, fcntl.F_DUPFD, 20) for end in (*os.pipe(), *os.pipe())]
        their_in, self._out, self._in, their_out = ends
        start = f'exec "$@" 3<&{their_in} 4>&{their_out}'
        self._process = subprocess.Popen(
            ["bash", "-c", start, "bash", str(found_browser()), *FLAGS,
             f"--user-data-dir={profile}"],
            pass_fds=(their_in, their_out), stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL,
        )  # fmt: skip
        os.close(their_in)
        os.close(their_out)
        self._buffer = b""
        self._number = 0
        self._session = ""
        target = self._call("Target.createTarget", url="about:blank")["targetId"]
        attached = self._call("Target.attachToTarget", targetId=target, flatten=True)
        self._session = attached["sessionId"]
        self._call("Page.enable")

    def close(self) -> None:
        """End the browser."""
        os.close(self._out)
        self._process.terminate()
        self._process.wait(PATIENCE_S)
        os.close(self._in)

    def open(self, address: str, *, width: int, height: int = 900, script: bool = True) -> None:
        """Load a page at that size and wait until it is complete."""
        self._call("Emulation.setScriptExecutionDisabled", value=not script)
        self._call(
            "Emulation.setDeviceMetricsOverride",
            width=width, height=height, deviceScaleFactor=1, mobile=width < 600,
        )  # fmt: skip
        self._call("Page.navigate", url=address)
        self.wait_for("document.readyState === 'complete' && location.href !== 'about:blank'")

    def value(self, expression: str) -> Any:
        """The value of an expression in the page."""
        answer = self._call("Runtime.evaluate", expression=expression, returnByValue=True)
        assert "exceptionDetails" not in answer, answer
        return answer["result"].get("value")

    def wait_for(self, expression: str, within_s: float = PATIENCE_S) -> float:
        """Seconds until an expression in the page is true; fails where it does not become so."""
        began = time.monotonic()
        while time.monotonic() - began < within_s:
            if self.value(expression):
                return time.monotonic() - began
            select.select([], [], [], 0.05)
        pytest.fail(f"not within {within_s} s: {expression}")

    def press(self, key: str) -> None:
        """Press and release a key."""
        for kind in ("keyDown", "keyUp"):
            self._call("Input.dispatchKeyEvent", type=kind, key=key, code=key,
                       windowsVirtualKeyCode={"Tab": 9, "Enter": 13}[key])  # fmt: skip

    def picture(self, path: Path) -> None:
        """The whole page as a PNG file."""
        shot = self._call("Page.captureScreenshot", captureBeyondViewport=True)
        path.write_bytes(base64.b64decode(shot["data"]))

    def scheme(self, dark: bool) -> None:
        """Ask pages for dark or light colours."""
        value = "dark" if dark else "light"
        self._call("Emulation.setEmulatedMedia",
                   features=[{"name": "prefers-color-scheme", "value": value}])  # fmt: skip

    def _call(self, method: str, **params: Any) -> dict[str, Any]:
        self._number += 1
        message: dict[str, Any] = {"id": self._number, "method": method, "params": params}
        if self._session:
            message["sessionId"] = self._session
        os.write(self._out, json.dumps(message).encode() + b"\0")
        while True:
            answer = self._received()
            if answer.get("id") == self._number:
                assert "error" not in answer, answer
                return dict(answer["result"])

    def _received(self) -> dict[str, Any]:
        until = time.monotonic() + PATIENCE_S
        while b"\0" not in self._buffer:
            ready, _, _ = select.select([self._in], [], [], until - time.monotonic())
            data = os.read(self._in, 1 << 20) if ready else b""
            assert data, "the browser ended or gave no answer"
            self._buffer += data
        line, _, self._buffer = self._buffer.partition(b"\0")
        return dict(json.loads(line))
