"""What a front end gives: readings with their own time stamps, and the state of the device."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, fields
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

MISSING = -(2**31)
"""Raw count of a channel that gave nothing at that time; a temperature that is not known."""

NS_PER_S = 1_000_000_000


@dataclass(frozen=True, slots=True, init=False)
class Batch:
    """Readings of one front end, in the order of their times.

    times_ns: int64 (n,), boot time, strictly increasing. counts: int32 (n, c), raw.
    flags: int32 (n,), Flag bits that the front end knows of. now_ns: boot time up to which
    the front end vouches that nothing else came; at or after the last reading.
    temperature_dc: int32 (n,), of the instrument at each reading, tenths of a degree Celsius;
    MISSING where it is not known. Left out, it is known of none.
    """

    times_ns: NDArray[np.int64]
    counts: NDArray[np.int32]
    flags: NDArray[np.int32]
    now_ns: int
    temperature_dc: NDArray[np.int32]

    def __init__(
        self,
        times_ns: NDArray[np.int64],
        counts: NDArray[np.int32],
        flags: NDArray[np.int32],
        now_ns: int,
        temperature_dc: NDArray[np.int32] | None = None,
    ) -> None:
        """ValueError where the columns are not equally long."""
        if temperature_dc is None:
            temperature_dc = np.full(times_ns.size, MISSING, np.int32)
        columns = (times_ns, counts, flags, temperature_dc)
        if len({len(column) for column in columns}) != 1:
            lengths = ", ".join(str(len(column)) for column in columns)
            raise ValueError(f"columns of a batch differ in length: {lengths}")
        values = (times_ns, counts, flags, now_ns, temperature_dc)
        for column, value in zip(fields(self), values):
            object.__setattr__(self, column.name, value)

    @property
    def n(self) -> int:
        """Number of readings; 0 is a valid batch that only says that time has passed."""
        return int(self.times_ns.size)

    def part(self, which: slice | NDArray[np.bool_], now_ns: int) -> Batch:
        """The readings of a slice or a mask (n,), every column of them."""
        return Batch(
            self.times_ns[which],
            self.counts[which],
            self.flags[which],
            now_ns,
            self.temperature_dc[which],
        )


def joined(batches: Sequence[Batch]) -> Batch:
    """One batch of several in the order of time, one at least."""
    return Batch(
        np.concatenate([batch.times_ns for batch in batches]),
        np.concatenate([batch.counts for batch in batches]),
        np.concatenate([batch.flags for batch in batches]),
        batches[-1].now_ns,
        np.concatenate([batch.temperature_dc for batch in batches]),
    )


def empty_batch(channels: int, now_ns: int) -> Batch:
    """A batch that says only that nothing came until now_ns (ns, boot time)."""
    return Batch(
        np.empty(0, np.int64), np.empty((0, channels), np.int32), np.empty(0, np.int32), now_ns
    )


@dataclass(frozen=True, slots=True)
class DeviceStatus:
    """State of the device behind a front end, for pages and events.

    name: what the device calls itself; "" where it has not said or cannot. floors: raw counts per
    channel of the noise floor that it tracks, MISSING where it is not known; () without tracking.
    """

    connected: bool
    text: str = ""
    temperature_c: float | None = None
    supply_v: float | None = None
    counters: Mapping[str, int] = field(default_factory=dict)
    ended: bool = False
    name: str = ""
    floors: tuple[int, ...] = ()


class FrontEnd(Protocol):
    """One wire turned into readings, and nothing else: no filling, no averaging, no deriving."""

    owns_clock: bool
    clock_fix: tuple[int, int] | None
    """(boot_ns, utc_ns) of a front end that owns its clock, else None."""

    def read(self, timeout_s: float) -> Batch:
        """Readings since the last call; waits timeout_s at most; device trouble raises nothing."""

    def status(self) -> DeviceStatus:
        """The device's state now."""

    def close(self) -> None:
        """Let the device go."""
