"""Faults on command: what goes wrong between the board and the monitor, and for how long."""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass
from typing import ClassVar

BY_COUNT = ("drop", "truncate", "corrupt", "repeat")
BY_TIME = ("stick", "hang", "vanish")
AT_ONCE = ("return", "restart")
KINDS = (*BY_COUNT, *BY_TIME, *AT_ONCE)
DEFAULT_S = 10.0


@dataclass(frozen=True)
class Fault:
    """One fault. amount: frames for drop, truncate, corrupt, repeat; board seconds for stick,
    hang and vanish (None: ten seconds; for vanish: until return)."""

    kind: str
    amount: float | None = None
    kinds: ClassVar[tuple[str, ...]] = KINDS

    def __post_init__(self) -> None:
        """Raises ValueError for an unknown kind or an amount that means nothing."""
        if self.kind not in self.kinds:
            raise ValueError(f"no fault {self.kind!r}; there are {', '.join(self.kinds)}")
        if self.amount is not None and not self.amount > 0:
            raise ValueError(f"{self.kind}: {self.amount} must be more than zero")


def scheduled(text: str, make: type[Fault] = Fault) -> tuple[int, Fault]:
    """'AT:KIND[:AMOUNT]', AT in device seconds, as (ms, fault). Raises ValueError."""
    found = re.fullmatch(r"(\d+(?:\.\d+)?):([a-z]+)(?::(\d+(?:\.\d+)?))?", text)
    if not found:
        raise ValueError(f"{text!r} is not SECONDS:KIND or SECONDS:KIND:AMOUNT")
    at_s, kind, amount = found.groups()
    return round(float(at_s) * 1000.0), make(kind, None if amount is None else float(amount))


class Faults:
    """The faults in force. Times are board milliseconds since its first start."""

    def __init__(self, schedule: Iterable[tuple[int, Fault]] = ()) -> None:
        self._schedule = sorted(schedule, key=lambda item: item[0])
        self._left = dict.fromkeys(BY_COUNT, 0)
        self._until_ms = {"stick": -1, "hang": -1}

    def due(self, now_ms: int) -> list[Fault]:
        """Faults whose time has come, each once."""
        taken = [fault for at_ms, fault in self._schedule if at_ms <= now_ms]
        del self._schedule[: len(taken)]
        return taken

    def returns_ms(self) -> int | None:
        """When the schedule lets the device return, if it does."""
        return next((at_ms for at_ms, fault in self._schedule if fault.kind == "return"), None)

    def start(self, fault: Fault, now_ms: int) -> None:
        """Put a fault of the wire or the firmware in force; vanish and its kind are the line's."""
        if fault.kind in BY_COUNT:
            self._left[fault.kind] += round(fault.amount or 1)
        elif fault.kind in self._until_ms:
            length_s = DEFAULT_S if fault.amount is None else fault.amount
            self._until_ms[fault.kind] = now_ms + round(length_s * 1000.0)

    def stuck(self, now_ms: int) -> bool:
        """Whether the converter gives its last counts over and over."""
        return now_ms < self._until_ms["stick"]

    def hung(self, now_ms: int) -> bool:
        """Whether the firmware stands still: it samples nothing and sends nothing."""
        return now_ms < self._until_ms["hang"]

    def spoil(self, frame: bytes) -> bytes:
        """What becomes of a frame on its way: nothing, a part, a wrong byte, or twice."""
        if self._take("drop"):
            return b""
        if self._take("truncate"):
            return frame[: len(frame) // 2]
        if self._take("corrupt"):
            at = len(frame) // 2
            wrong = b"7" if frame[at : at + 1] != b"7" else b"3"
            return frame[:at] + wrong + frame[at + 1 :]
        if self._take("repeat"):
            return frame + frame
        return frame

    def _take(self, kind: str) -> bool:
        if self._left[kind] <= 0:
            return False
        self._left[kind] -= 1
        return True
