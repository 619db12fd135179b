"""Clock fixes: when the wall clock says something new about the boot clock."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol

from monitor.core.readings import NS_PER_S
from monitor.record.fixes import best
from monitor.record.types import ClockFix

FIX_EVERY_NS = 3600 * NS_PER_S
LOOK_EVERY_NS = 60 * NS_PER_S
JUMP_NS = NS_PER_S // 2
UNKNOWN_NS = 10 * 365 * 86_400 * NS_PER_S
"""Stated uncertainty of a clock that nothing has set: ten years."""


class Clock(Protocol):
    """The machine's clocks, see monitor.clock."""

    def boot_ns(self) -> int:
        """ns since the machine started."""

    def utc_ns(self) -> int:
        """ns since 1970 by the wall clock."""

    def uncertainty_ns(self) -> int | None:
        """Largest error of the wall clock; None: not synchronised."""


class Fixes:
    """The mapping from boot time to UTC as it is known now.

    own: the one fix of a front end that owns its clock, else None. known: fixes of this boot that
    the record holds already; page and record find UTC by the same rule.
    """

    def __init__(
        self, clock: Clock, own: tuple[int, int] | None, owns_clock: bool,
        known: Sequence[ClockFix] = (),
    ) -> None:  # fmt: skip
        self._clock = clock
        self._owns = owns_clock
        self._fix_ns = self._look_ns = -FIX_EVERY_NS
        self._own = own
        self._known = list(known)
        self._seen_ns: int | None = None
        self.synchronised = True
        self.offset_ns: int | None = None

    def look(self) -> ClockFix | None:
        """A fix for the record: at the start, each hour, after a jump, when trust changes."""
        if self._owns:
            own, self._own = self._own, None
            return None if own is None else self._kept(ClockFix(*own, "front end", 0))
        boot_ns, utc_ns = self._clock.boot_ns(), self._clock.utc_ns()
        jumped = self._seen_ns is None or abs(utc_ns - boot_ns - self._seen_ns) > JUMP_NS
        if not jumped and boot_ns - self._look_ns < LOOK_EVERY_NS:
            return None
        self._look_ns = boot_ns
        error_ns = self._clock.uncertainty_ns()
        changed = self.synchronised != (error_ns is not None)
        self.synchronised = error_ns is not None
        if not (jumped or changed or boot_ns - self._fix_ns >= FIX_EVERY_NS):
            return None
        source = "system clock" if self.synchronised else "system clock, unsynchronised"
        return self._kept(
            ClockFix(boot_ns, utc_ns, source, UNKNOWN_NS if error_ns is None else error_ns)
        )

    def _kept(self, fix: ClockFix) -> ClockFix:
        self._seen_ns, self._fix_ns = fix.utc_ns - fix.boot_ns, fix.boot_ns
        self._known.append(fix)
        holds = best(self._known)
        self.offset_ns = None if holds is None else holds.utc_ns - holds.boot_ns
        return fix
