"""What a bench gives, and how two ways of doing a thing are timed against each other."""

from __future__ import annotations

import gc
import time
from collections.abc import Callable
from dataclasses import dataclass
from statistics import median


@dataclass(frozen=True, slots=True)
class Figure:
    """One measured value beside what it is compared with.

    better: "lower" or "higher". reference: the value of the other way, or the aim; None where
    there is nothing to compare with.
    """

    what: str
    value: float
    unit: str
    better: str = "lower"
    reference: float | None = None
    reference_name: str = ""

    @property
    def ratio(self) -> float | None:
        """How many times better than the reference; above 1 is better. None without one."""
        if self.reference is None or not self.value or not self.reference:
            return None
        if self.better == "lower":
            return self.reference / self.value
        return self.value / self.reference


def seconds(action: Callable[[], object], clock: Callable[[], float] = time.perf_counter) -> float:
    """Time of one call, s, the collector kept out of it. clock: wall time unless given."""
    gc.collect()
    gc.disable()
    try:
        start = clock()
        action()
        return clock() - start
    finally:
        gc.enable()


def compare(
    what: str,
    ours: Callable[[], object],
    other: Callable[[], object],
    other_name: str,
    rounds: int = 7,
    clock: Callable[[], float] = time.perf_counter,
) -> Figure:
    """Median times of two ways, taken in turn so that a busy machine disturbs both alike.

    Each is called once before, so that imports and caches are not counted. clock: the processor's
    time instead of the wall's where both ways keep to one thread.
    """
    ours()
    other()
    pairs = [(seconds(ours, clock), seconds(other, clock)) for _ in range(rounds)]
    return Figure(
        what,
        median(pair[0] for pair in pairs),
        "s",
        reference=median(pair[1] for pair in pairs),
        reference_name=other_name,
    )
