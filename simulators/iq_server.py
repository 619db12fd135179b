"""The receiver's server on a TCP port: header, samples, commands, one client at a time."""

from __future__ import annotations

import os
import select
import socket
import time
from collections import deque
from pathlib import Path
from typing import BinaryIO

from simulators.control import Control
from simulators.faults import Fault
from simulators.iq_faults import StreamFault, StreamFaults
from simulators.iq_receiver import Receiver, Settings
from simulators.iq_signals import Air
from simulators.iq_transfers import Transfers
from simulators.iq_truth import Truth
from simulators.iq_wire import MAGIC, WRONG_MAGIC, Client, header

LOOK_S = 0.2
"""How often the starter and the schedule of faults are looked for."""
COMMANDS_KEPT = 1000


class Server:
    """Socket, stream, faults and control together; run() never returns."""

    def __init__(
        self,
        address: tuple[str, int],
        air: Air,
        seed: int,
        *,
        truth: Path | None = None,
        sent: Path | None = None,
        control: Control | None = None,
        faults: StreamFaults | None = None,
        with_parent: bool = False,
    ) -> None:
        """Listen at address (port 0: any free one). Raises OSError."""
        self._start_s = time.monotonic()
        boot_ns = time.clock_gettime_ns(time.CLOCK_BOOTTIME)
        self._air = air
        self._receiver = Receiver(air, seed)
        self._faults = faults or StreamFaults()
        self._control = control
        self._parent = os.getppid() if with_parent else None
        self._settings = Settings()
        self._client: Client | None = None
        self._connections = 0
        self._told: deque[tuple[int, int]] = deque(maxlen=COMMANDS_KEPT)
        self._halted = False
        self._allowance = 0.0
        self._allowed_s = 0.0
        self._listener: socket.socket | None = self._listen(address)
        self.address: tuple[str, int] = self._listener.getsockname()
        self._truth = Truth(truth, air, seed, boot_ns)
        self._sent_path = sent
        self._sent: BinaryIO | None = sent.open("wb") if sent is not None else None

    def run(self) -> None:
        """Serve for ever."""
        while True:
            self.step()

    def step(self) -> None:
        """One turn: what is due, then wait for the wire, the control socket or the time."""
        if self._parent is not None and os.getppid() != self._parent:
            raise SystemExit(0)
        now_s = self._now_s()
        for fault in self._faults.due(now_s):
            self._begin(fault, now_s)
        self._presence(now_s)
        wait_s = self._fill(now_s)
        client = self._client
        first = client.link if client is not None else self._listener
        readers = [item for item in (first, self._control) if item is not None]
        may = client is not None and client.waits() and not self._quiet(now_s)
        most = self._most(now_s)
        writers = [client.link] if client is not None and may and most else []
        if may and not most:
            wait_s = min(wait_s, 0.01)
        ready, open_, _ = select.select(readers, writers, [], wait_s)
        if self._control is not None and self._control in ready:
            self._control.serve(self._answer)
        if client is None and self._listener is not None and self._listener in ready:
            self._accept()
        elif client is not None and client is self._client:
            self._exchange(client, client.link in ready, most if client.link in open_ else 0)

    def close(self) -> None:
        """Let everything go."""
        self._drop()
        if self._listener is not None:
            self._listener.close()
        self._truth.close()
        if self._sent is not None:
            self._sent.close()

    def _now_s(self) -> float:
        return time.monotonic() - self._start_s

    def _listen(self, address: tuple[str, int]) -> socket.socket:
        listener = socket.socket(socket.AF_INET, socket.SOCK_STREAM)
        listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        try:
            listener.bind(address)
            listener.listen(1)
        except OSError as error:
            listener.close()
            host, port = address
            raise OSError(error.errno, error.strerror, f"{host}:{port}") from error
        listener.setblocking(False)
        return listener

    def _presence(self, now_s: float) -> None:
        """Go where the server is to be absent, come back after that."""
        absent = self._faults.on("absent", now_s)
        if absent and self._listener is not None:
            self._drop()
            self._listener.close()
            self._listener = None
        elif not absent and self._listener is None:
            self._listener = self._listen(self.address)

    def _quiet(self, now_s: float) -> bool:
        return self._faults.on("stall", now_s) or self._faults.on("halt", now_s)

    def _fill(self, now_s: float) -> float:
        """Put the next transfer on hand if one is due; seconds to wait at most."""
        halted = self._faults.on("halt", now_s)
        transfers = self._client.transfers if self._client is not None else None
        if transfers is not None and self._halted and not halted:
            transfers.skip(now_s)
        self._halted = halted
        if transfers is None or self._client is None or self._quiet(now_s):
            return LOOK_S if not self._quiet(now_s) else 0.01
        transfers.lose(self._faults.lost())
        if self._client.waits():
            return LOOK_S
        wait_s = transfers.wait_s(now_s)
        if wait_s:
            return min(wait_s, LOOK_S)
        self._client.give(transfers.take(now_s))
        return LOOK_S

    def _most(self, now_s: float) -> int:
        """Bytes that may go now: all, or what a slow network has let through."""
        slow = self._faults.slow_bytes_per_s
        passed_s, self._allowed_s = now_s - self._allowed_s, now_s
        if slow is None:
            self._allowance = 0.0
            return 2**20
        self._allowance = min(self._allowance + slow * passed_s, max(slow * 0.1, 1.0))
        return int(self._allowance)

    def _accept(self) -> None:
        if self._listener is None:
            return
        try:
            link, _ = self._listener.accept()
        except BlockingIOError:
            return
        self._connections += 1
        if self._faults.strikes("mute"):
            self._client = Client(link, None, b"")
            return
        head = header(WRONG_MAGIC if self._faults.strikes("mislabel") else MAGIC)
        front, note = self._air.front, self._truth.note
        transfers = Transfers(self._receiver, front, self._settings, self._now_s(), note)
        self._client = Client(link, transfers, head)
        if self._sent is not None:
            self._sent.seek(0)
            self._sent.truncate()

    def _exchange(self, client: Client, readable: bool, most: int) -> None:
        try:
            for code, value in client.commands() if readable else []:
                self._told.append((code, value))
                if client.transfers is not None:
                    client.transfers.command(self._now_s(), code, value)
                    self._settings = client.transfers.settings
            if most:
                gone = client.send(most)
                self._allowance -= len(gone)
                if self._sent is not None:
                    self._sent.write(gone)
        except OSError:
            self._drop()

    def _drop(self) -> None:
        if self._client is not None:
            self._client.link.close()
            self._client = None
            if self._sent is not None:
                self._sent.flush()

    def _begin(self, fault: Fault, now_s: float) -> None:
        if fault.kind == "shut":
            self._drop()
        else:
            self._faults.start(fault, now_s)

    def _answer(self, request: dict[str, object]) -> dict[str, object]:
        """The reply to a question on the control socket. Raises ValueError for nonsense."""
        now_s = self._now_s()
        if "fault" in request:
            amount = request.get("amount")
            if amount is not None and not isinstance(amount, (int, float)):
                raise ValueError(f"amount {amount!r} is not a number")
            self._begin(StreamFault(str(request["fault"]), amount), now_s)
            return {"ok": True, "device_s": now_s, "simulated": True}
        if "band_hz" in request:
            low_hz, high_hz = _pair(request["band_hz"])
            power_w = self._truth.power_w(low_hz, high_hz, now_s)
            return {"ok": True, "device_s": now_s, "power_w": power_w, "simulated": True}
        return {"ok": True, "device_s": now_s, **self._state(now_s), "simulated": True}

    def _state(self, now_s: float) -> dict[str, object]:
        """What was set, what was sent on this connection, what was not."""
        self._truth.flush()
        if self._sent is not None:
            self._sent.flush()
        settings = self._settings
        state: dict[str, object] = {
            "connections": self._connections,
            "connected": self._client is not None,
            "centre_hz": settings.centre_hz,
            "rate_hz": settings.rate_hz,
            "real_rate_hz": self._receiver.rate_hz(settings),
            "manual": settings.manual,
            "gain_db": self._receiver.gain_db(settings),
            "commands": [list(pair) for pair in self._told],
        }
        transfers = self._client.transfers if self._client is not None else None
        if transfers is not None and self._client is not None:
            state |= {
                "sent_bytes": self._client.sent,
                "made_samples": transfers.made(now_s),
                "lost_samples": transfers.lost,
                "dropped_samples": transfers.dropped,
            }
        return state


def _pair(value: object) -> tuple[float, float]:
    if not isinstance(value, list) or len(value) != 2:
        raise ValueError("band_hz: [low, high]")
    return float(value[0]), float(value[1])
