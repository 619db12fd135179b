"""What a receiver makes in its time, handed out in transfers, however late they are fetched.

Time goes on whether anybody fetches or not. Transfers that wait are not stored but made when they
are fetched, with the settings that held when they were due: the same bytes, without the memory.
More than QUEUE of them are not kept: the oldest go, without a word.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from simulators.iq_receiver import BLOCK, Receiver, Settings
from simulators.iq_signals import Front

TRANSFER = 131_072
"""Samples to a transfer: 262 144 bytes, 64 ms at 2.048 MS/s."""
QUEUE = 500

Note = Callable[[float, int, int, Settings, float, NDArray[np.float64]], None]
"""Told of each stretch of samples of one setting: device second, first sample, number of samples,
settings, gain (dB), mean power of each signal at the port (mW)."""


class Transfers:
    """The stream of one connection. Times are device seconds; positions count its samples."""

    def __init__(
        self, receiver: Receiver, front: Front, settings: Settings, now_s: float, note: Note
    ) -> None:
        self._receiver = receiver
        self._settle_s = front.settle_ms / 1000.0
        self._note = note
        self.settings = settings
        """As commands have left them; samples that wait may still be of earlier ones."""
        self._making = settings
        self._base = self._made_base = (0, now_s)
        self._changes: deque[tuple[int, float, Settings]] = deque()
        self._settled_s = now_s
        self.position = 0
        """Of the next sample to be handed out, lost and dropped ones counted."""
        self.lost = 0
        self.dropped = 0

    def made(self, now_s: float) -> int:
        """Samples that the receiver has made by now, a fraction of one not counted."""
        position, at_s = self._made_base
        return position + int((now_s - at_s) * self._receiver.rate_hz(self.settings))

    def command(self, now_s: float, code: int, value: int) -> None:
        """Take a command; it holds for samples made from now on."""
        told = self.settings.told(code, value)
        if told == self.settings:
            return
        made = self.made(now_s)
        self._changes.append((made, now_s, told))
        self.settings, self._made_base = told, (made, now_s)

    def lose(self, samples: int) -> None:
        """Leave out samples that were made: the next transfer begins so much later."""
        self.position += samples
        self.lost += samples

    def skip(self, now_s: float) -> None:
        """Nothing was made until now: whatever waits is lost."""
        self.lose(max(self.made(now_s) - self.position, 0))

    def wait_s(self, now_s: float) -> float:
        """Seconds until a transfer is complete; 0 where one is."""
        lacking = self.position + TRANSFER - self.made(now_s)
        return max(lacking / self._receiver.rate_hz(self.settings), 0.0)

    def take(self, now_s: float) -> bytes:
        """The oldest transfer that waits: 2 * TRANSFER bytes. Ask wait_s first."""
        over = (self.made(now_s) - self.position) // TRANSFER - QUEUE
        if over > 0:
            self.position += over * TRANSFER
            self.dropped += over * TRANSFER
        parts: list[bytes] = []
        sums: list[NDArray[np.float64]] = []
        first = self.position
        for _ in range(TRANSFER // BLOCK):
            if self._changes and self._changes[0][0] <= self.position:
                self._told(first, sums)
                first, sums = self.position, []
                self._change()
            at_s = self._at_s(self.position)
            data, power_mw = self._receiver.block(
                self._making, at_s, self.position, at_s >= self._settled_s
            )
            parts.append(data)
            sums.append(power_mw.copy())
            self.position += BLOCK
        self._told(first, sums)
        return b"".join(parts)

    def _at_s(self, position: int) -> float:
        from_position, at_s = self._base
        return at_s + (position - from_position) / self._receiver.rate_hz(self._making)

    def _change(self) -> None:
        """Make the changes that hold from here on; a tuner that was moved has to settle."""
        while self._changes and self._changes[0][0] <= self.position:
            made, at_s, settings = self._changes.popleft()
            moved = settings.centre_hz != self._making.centre_hz
            self._making, self._base = settings, (made, at_s)
            if moved:
                self._settled_s = self._at_s(self.position) + self._settle_s

    def _told(self, first: int, sums: list[NDArray[np.float64]]) -> None:
        if sums:
            gain_db = self._receiver.gain_db(self._making)
            n = len(sums) * BLOCK
            self._note(self._at_s(first), first, n, self._making, gain_db, np.mean(sums, axis=0))
