"""Faults of a sample stream on command: what goes wrong between receiver and client."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import ClassVar

from simulators.faults import DEFAULT_S, Fault

BY_COUNT = ("lose", "mute", "mislabel")
BY_RATE = ("slow",)
BY_TIME = ("stall", "halt", "absent")
AT_ONCE = ("shut", "free")
KINDS = (*BY_COUNT, *BY_RATE, *BY_TIME, *AT_ONCE)


@dataclass(frozen=True)
class StreamFault(Fault):
    """One fault. amount: samples for lose, connections for mute and mislabel, bytes a second for
    slow (needed), seconds for stall, halt and absent (None: ten)."""

    kinds: ClassVar[tuple[str, ...]] = KINDS

    def __post_init__(self) -> None:
        """Raises ValueError for an unknown kind or an amount that means nothing."""
        super().__post_init__()
        if self.kind in BY_RATE and self.amount is None:
            raise ValueError(f"{self.kind}: say how many bytes a second (--count)")


class StreamFaults:
    """The faults in force. Times are seconds since the receiver's start."""

    def __init__(self, schedule: Iterable[tuple[int, Fault]] = ()) -> None:
        self._schedule = sorted(schedule, key=lambda item: item[0])
        self._left = dict.fromkeys(BY_COUNT, 0)
        self._until_s = dict.fromkeys(BY_TIME, 0.0)
        self.slow_bytes_per_s: float | None = None

    def due(self, now_s: float) -> list[Fault]:
        """Faults whose time has come, each once."""
        taken = [fault for at_ms, fault in self._schedule if at_ms <= now_s * 1000.0]
        del self._schedule[: len(taken)]
        return taken

    def start(self, fault: Fault, now_s: float) -> None:
        """Put a fault in force; shut is the server's own to do."""
        if fault.kind in BY_COUNT:
            self._left[fault.kind] += round(fault.amount or 1)
        elif fault.kind in BY_TIME:
            self._until_s[fault.kind] = now_s + (fault.amount or DEFAULT_S)
        elif fault.kind in BY_RATE:
            self.slow_bytes_per_s = fault.amount
        elif fault.kind == "free":
            self._until_s = dict.fromkeys(BY_TIME, 0.0)
            self.slow_bytes_per_s = None

    def on(self, kind: str, now_s: float) -> bool:
        """Whether one of the faults that last a time is in force."""
        return now_s < self._until_s[kind]

    def lost(self) -> int:
        """Samples to leave out now, told once."""
        lost, self._left["lose"] = self._left["lose"], 0
        return lost

    def strikes(self, kind: str) -> bool:
        """Whether this connection is struck by mute or mislabel; counts it."""
        if self._left[kind] <= 0:
            return False
        self._left[kind] -= 1
        return True
